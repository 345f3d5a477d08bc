"""What every back end for formulas offers."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Any, Protocol

from cycle_encodings._formula import Form

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["Abilities", "BackEnd", "Kind"]


class Kind(StrEnum):
    """Kinds of solvers, as methods name them."""

    CNF = "cnf"
    CP = "cp"
    MIP = "mip"
    PB = "pb"

    @property
    def form(self) -> Form:
        """The form of encodings that solvers of this kind take."""
        return {Kind.CNF: Form.CNF, Kind.CP: Form.CONSTRAINTS}.get(self, Form.INEQUALITIES)


@dataclass(frozen=True, slots=True)
class Abilities:
    """What a back end can do, known before it runs.

    Args:
        incremental: clauses can be added between solutions.
        proofs: it can log a clausal refutation.
        assumptions: it can solve under assumed literals and name those it used.
        exact: it decides in exact arithmetic; without, "infeasible" is no evidence.
    """

    incremental: bool
    proofs: bool
    assumptions: bool
    exact: bool = True


class BackEnd(Protocol):
    """A solver of the encodings of one form."""

    @property
    def name(self) -> str:
        """The name that options and records use."""

    @property
    def version(self) -> str:
        """Library and version that provide it."""

    @property
    def abilities(self) -> Abilities:
        """What it can do."""

    @property
    def kind(self) -> Kind:
        """Which form of encodings it takes, and how methods name it."""

    def least_elements(self, encoding: Any) -> Iterator[int]:  # noqa: ANN401 - each kind has its own form
        """Yield the least element of each model, blocking it before the next; end when no model is left.

        Runs for as long as it takes; the caller sets limits from outside.
        """
