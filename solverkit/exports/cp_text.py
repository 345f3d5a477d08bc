"""CP-SAT models as protocol buffer text, which ``sat_runner`` and OR-Tools in any language read."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from solverkit.exports.comments import heading, plain

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["cp_lines"]


def cp_lines(statement: Any, name: str) -> Iterator[str]:  # noqa: ANN401 - the model is of OR-Tools
    """Yield the lines of the file; comments begin with ``#``.

    Args:
        statement: an encoding of the form "constraints", with the model as ``model``.
        name: of the encoder.
    """
    for note in heading(statement.cell, name, statement.digest()):
        yield f"# {note}"
    for note in sorted(f"{key} {value}" for key, value in statement.sizes().items()):
        yield f"# {plain(note)}"
    yield from str(statement.model.Proto()).splitlines()
