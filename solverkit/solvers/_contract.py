"""What every back end for formulas offers."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._formula import Encoding

__all__ = ["Abilities", "BackEnd"]


@dataclass(frozen=True, slots=True)
class Abilities:
    """What a back end can do, known before it runs.

    Args:
        incremental: clauses can be added between solutions.
        proofs: it can log a clausal refutation.
        assumptions: it can solve under assumed literals and name those it used.
    """

    incremental: bool
    proofs: bool
    assumptions: bool


class BackEnd(Protocol):
    """A solver of formulas."""

    @property
    def name(self) -> str:
        """The name that options and records use."""

    @property
    def version(self) -> str:
        """Library and version that provide it."""

    @property
    def abilities(self) -> Abilities:
        """What it can do."""

    def least_elements(self, encoding: Encoding) -> Iterator[int]:
        """Yield the least element of each model, blocking it before the next; end when no model is left.

        Runs for as long as it takes; the caller sets limits from outside.
        """
