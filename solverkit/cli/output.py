"""How commands print their results."""

from __future__ import annotations

import json
import sys
from enum import StrEnum
from typing import Annotated

import typer

__all__ = ["Format", "FormatOption", "print_json"]


class Format(StrEnum):
    """How results are printed."""

    TEXT = "text"
    JSON = "json"


FormatOption = Annotated[Format, typer.Option("--format", help="text, or one JSON document on standard output.")]


def print_json(document: object) -> None:
    """Print one JSON document, ASCII only."""
    sys.stdout.write(json.dumps(document, indent=1, ensure_ascii=True) + "\n")
