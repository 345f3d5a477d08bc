"""Conditions on the residues of the elements of a cycle."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from enum import StrEnum
from math import gcd
from typing import TYPE_CHECKING

from solverkit.errors import InputError

if TYPE_CHECKING:
    from solverkit.findings import Cycle

__all__ = ["Among", "ResidueCondition"]


class Among(StrEnum):
    """The elements that a residue condition speaks of."""

    LEAST = "least"
    LARGEST = "largest"
    ALL = "all"
    SOME = "some"


@dataclass(frozen=True, slots=True, order=True)
class ResidueCondition:
    """The least or largest element, all elements, or at least one, lie in given classes mod M, or outside.

    Residues are the mathematical ones, 0 … M−1, for negative elements too: −17 ≡ 3 (mod 5).

    Args:
        of: which elements; least and largest by absolute value.
        modulus: M ≥ 2.
        residues: classes, kept ascending and without repeats; neither none nor all of them.
        inside: True when the elements lie in these classes (``in``), False when outside them (``not_in``).

    Raises:
        InputError: a value outside these ranges.
    """

    of: Among
    modulus: int
    residues: tuple[int, ...]
    inside: bool = True

    def __post_init__(self) -> None:
        if self.modulus < 2:
            raise InputError("shape.residues.modulus", self.modulus, "an integer of at least 2")
        name = f"shape.residues.{'in' if self.inside else 'not_in'}"
        classes = tuple(sorted(set(self.residues)))
        for residue in classes:
            if not 0 <= residue < self.modulus:
                raise InputError(name, residue, f"residues from 0 to {self.modulus - 1}")
        if not 0 < len(classes) < self.modulus:
            given = f"{len(classes)} residues of {self.modulus}"
            raise InputError(name, given, "at least one residue, but not all of them")
        object.__setattr__(self, "residues", classes)

    def __str__(self) -> str:
        place = "in" if self.inside else "not in"
        return f"{self.of} mod {self.modulus} {place} {', '.join(map(str, self.residues))}"

    def admits(self, number: int) -> bool:
        """Tell whether ``number`` lies where this condition wants it."""
        return (number % self.modulus in self.residues) == self.inside

    def admits_odd(self) -> bool:
        """Tell whether some odd number lies where this condition wants it."""
        if self.modulus % 2:
            return True
        odd = sum(residue % 2 for residue in self.residues)
        return odd > 0 if self.inside else odd < self.modulus // 2

    def meets(self, other: ResidueCondition) -> bool:
        """Tell whether some number lies where both conditions want it.

        By the Chinese remainder theorem it does if both admit some class modulo the gcd of the moduli.
        """
        common = gcd(self.modulus, other.modulus)
        mine, theirs = self._modulo(common), other._modulo(common)
        if self.inside and other.inside:
            return bool(mine & theirs)
        if self.inside:
            return bool(mine - theirs)
        if other.inside:
            return bool(theirs - mine)
        return len(mine | theirs) < common

    def _modulo(self, divisor: int) -> set[int]:
        """Return the classes mod a divisor of M that lie partly in ``in``, or entirely in ``not_in``."""
        counts = Counter(residue % divisor for residue in self.residues)
        whole = 1 if self.inside else self.modulus // divisor
        return {residue for residue, count in counts.items() if count >= whole}

    def holds(self, cycle: Cycle) -> bool:
        """Tell whether the condition holds for ``cycle``."""
        match self.of:
            case Among.LEAST:
                return self.admits(cycle.least)
            case Among.LARGEST:
                return self.admits(cycle.largest)
            case Among.ALL | Among.SOME:
                classes = frozenset(self.residues)
                found = ((element % self.modulus in classes) == self.inside for element in cycle.elements())
                return all(found) if self.of is Among.ALL else any(found)
