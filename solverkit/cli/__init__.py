"""The command line. No logic: options in, one call, tables or one JSON document out."""

from __future__ import annotations

import sys
from io import TextIOWrapper
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> None:
    """Run the command line and end the process with its exit status.

    Every error that a person can cause is one line on standard error, without a traceback.
    """
    from solverkit.cli.commands import application  # noqa: PLC0415 - parts of a command load only when it runs
    from solverkit.errors import SolverkitError  # noqa: PLC0415

    for stream in (sys.stdout, sys.stderr):
        # A terminal without these characters gets question marks rather than an error.
        if isinstance(stream, TextIOWrapper):
            stream.reconfigure(errors="replace")
    try:
        status = application()(args=None if arguments is None else list(arguments), standalone_mode=False)
    except SolverkitError as problem:
        _complain(str(problem))
        sys.exit(problem.exit_status)
    except MemoryError:
        _complain("memory: all of it was used; allowed: a smaller cell or window")
        sys.exit(3)
    except BrokenPipeError:
        sys.stderr.close()
        sys.exit(1)
    except Exception as problem:
        told = getattr(problem, "format_message", None)
        if told is None:
            raise
        _complain(told() or "no command given; see solverkit --help")
        sys.exit(2)
    sys.exit(status if isinstance(status, int) else 0)


def _complain(text: str) -> None:
    print("solverkit: " + " ".join(text.split()), file=sys.stderr)
