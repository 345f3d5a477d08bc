"""``python -m solverkit``."""

from solverkit.cli import main

if __name__ == "__main__":
    main()
