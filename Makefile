# Set-up, demo, checks. Needs Python >= 3.11 with venv, and make; nothing else.
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin

.PHONY: setup demo test test-slow check lint types bench clean

setup: $(VENV)/ready

$(VENV)/ready: pyproject.toml
	$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11) and "Python 3.11 or newer is needed; set PYTHON=")'
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --upgrade pip
	$(BIN)/python -m pip install --quiet --editable '.[dev]'
	touch $@

demo: setup
	$(BIN)/python benchmarks/demo.py

test: setup
	$(BIN)/python -m pytest --numprocesses 2

test-slow: setup
	$(BIN)/python -m pytest --numprocesses 2 -m slow

lint: setup
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .

types: setup
	$(BIN)/mypy

check: lint types test

bench: setup
	for name in sweep matching tally_census estimates constraint_models clausal_encodings; do $(BIN)/python benchmarks/$$name.py || exit 1; done

clean:
	rm -rf $(VENV) .mypy_cache .pytest_cache .ruff_cache demo-dossier
