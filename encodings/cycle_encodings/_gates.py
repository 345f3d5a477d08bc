"""Building a formula: clauses in named groups, gates with constant folding, adders and comparisons.

A number is a list of literals, least significant first. Constants are the literals of one variable that a unit clause
sets; gates fold them away, so adding a constant costs what its ones cost.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from pysat.card import CardEnc, EncType
from pysat.formula import IDPool

if TYPE_CHECKING:
    from collections.abc import Hashable, Sequence

__all__ = ["Builder"]


class Builder:
    """A formula under construction.

    Attributes:
        true: the literal that holds; its negation is the literal that fails.
        clauses: so far.
        groups: name -> ranges of clauses, [start, stop).
    """

    def __init__(self) -> None:
        self._pool = IDPool()
        self.clauses: list[tuple[int, ...]] = []
        self.groups: dict[str, list[tuple[int, int]]] = {}
        self._group, self._start = "constants", 0
        self.names: dict[int, str] = {}
        self.true = self.variable("true")
        self.clauses.append((self.true,))

    @property
    def variables(self) -> int:
        """Number of variables so far."""
        return int(self._pool.top)

    def variable(self, name: Hashable = None) -> int:
        """Return a new variable, or the one that ``name`` already has."""
        number = int(self._pool.id() if name is None else self._pool.id(name))
        if name is not None:
            self.names[number] = str(name)
        return number

    def group(self, name: str) -> None:
        """State that the clauses from here on belong to the condition ``name``."""
        self._close()
        self._group = name

    def _close(self) -> None:
        if len(self.clauses) > self._start:
            self.groups.setdefault(self._group, []).append((self._start, len(self.clauses)))
        self._start = len(self.clauses)

    def finished(self) -> dict[str, tuple[tuple[int, int], ...]]:
        """Return the groups, once nothing is added any more."""
        self._close()
        return {name: tuple(ranges) for name, ranges in self.groups.items()}

    def constant(self, value: int, width: int) -> list[int]:
        """Return ``value`` mod 2^width as ``width`` constant literals."""
        return [self.true if value >> place & 1 else -self.true for place in range(width)]

    def add(self, *literals: int) -> None:
        """Add the clause of these literals, without those that fail; nothing when one holds."""
        true = self.true
        if true in literals:
            return
        if -true in literals:
            literals = tuple(literal for literal in literals if literal != -true) or (-true,)
        self.clauses.append(literals)

    def equal(self, one: int, two: int) -> None:
        """State that two literals are equivalent."""
        if one != two:
            self.add(-one, two)
            self.add(one, -two)

    def equal_numbers(self, one: Sequence[int], two: Sequence[int]) -> None:
        """State that two numbers are equal; the shorter one has zeros above."""
        for place in range(max(len(one), len(two))):
            a = one[place] if place < len(one) else -self.true
            b = two[place] if place < len(two) else -self.true
            self.equal(a, b)

    def both(self, one: int, two: int) -> int:
        """Return a literal equivalent to the conjunction."""
        true = self.true
        if -true in (one, two) or one == -two:
            return -true
        if one in {true, two}:
            return two
        if two == true:
            return one
        gate = self.variable()
        self.add(-gate, one)
        self.add(-gate, two)
        self.add(gate, -one, -two)
        return gate

    def differ(self, one: int, two: int) -> int:
        """Return a literal equivalent to the exclusive or."""
        true = self.true
        for a, b in ((one, two), (two, one)):
            if a == true:
                return -b
            if a == -true:
                return b
        if one == two:
            return -true
        if one == -two:
            return true
        gate = self.variable()
        self.add(-gate, one, two)
        self.add(-gate, -one, -two)
        self.add(gate, -one, two)
        self.add(gate, one, -two)
        return gate

    def full_adder(self, a: int, b: int, c: int) -> tuple[int, int]:
        """Return sum and carry of three literals."""
        true = self.true
        inputs = sorted((a, b, c), key=lambda literal: abs(literal) != true)
        if abs(inputs[0]) == true:
            one, two = inputs[1], inputs[2]
            if inputs[0] == -true:
                return self.differ(one, two), self.both(one, two)
            return -self.differ(one, two), -self.both(-one, -two)
        for one, two, other in ((a, b, c), (a, c, b), (b, c, a)):
            if one == two:
                return other, one
            if one == -two:
                return -other, other
        total, carry = self.variable(), self.variable()
        for clause in (
            (-total, a, b, c), (-total, a, -b, -c), (-total, -a, b, -c), (-total, -a, -b, c),
            (total, -a, -b, -c), (total, -a, b, c), (total, a, -b, c), (total, a, b, -c),
            (-carry, a, b), (-carry, a, c), (-carry, b, c), (carry, -a, -b), (carry, -a, -c), (carry, -b, -c),
            # implied; they let the sum and the carry decide the inputs by unit propagation
            (-carry, -total, a), (-carry, -total, b), (-carry, -total, c),
            (carry, total, -a), (carry, total, -b), (carry, total, -c),
        ):  # fmt: skip
            self.clauses.append(clause)
        return total, carry

    def add_numbers(self, one: Sequence[int], two: Sequence[int], carry: int, width: int) -> list[int]:
        """Return (one + two + carry) mod 2^width."""
        result = []
        for place in range(width):
            a = one[place] if place < len(one) else -self.true
            b = two[place] if place < len(two) else -self.true
            total, carry = self.full_adder(a, b, carry)
            result.append(total)
        return result

    def at_most(self, bits: Sequence[int], bound: int, unless: Sequence[int] = ()) -> None:
        """State that the number is ≤ ``bound``, or that one of the literals ``unless`` holds."""
        head = list(unless)
        if bound < 0:
            self.add(*head)
            return
        if bound >= (1 << len(bits)) - 1:
            return
        for place in range(len(bits) - 1, -1, -1):
            if bound >> place & 1:
                head.append(-bits[place])
            else:
                self.add(*head, -bits[place])

    def at_least(self, bits: Sequence[int], bound: int, unless: Sequence[int] = ()) -> None:
        """State that the number is ≥ ``bound``, or that one of the literals ``unless`` holds."""
        head = list(unless)
        if bound <= 0:
            return
        if bound >> len(bits):
            self.add(*head)
            return
        for place in range(len(bits) - 1, -1, -1):
            if bound >> place & 1:
                self.add(*head, bits[place])
            else:
                head.append(bits[place])

    def less(self, one: Sequence[int], two: Sequence[int], when: int | None = None) -> None:
        """State one < two, or that ``when`` fails.

        Most significant bits first: a literal a place says that all above it are equal so far.
        """
        equal = self.true if when is None else when
        if len(two) > len(one):
            # One literal for all places above: it must hold only where they are zero, and then what follows binds.
            below = self.variable()
            self.add(-equal, below, *two[len(one) :])
            equal = below
        for place in range(len(one) - 1, -1, -1):
            a, b = one[place], two[place] if place < len(two) else -self.true
            self.add(-equal, -a, b)
            following = self.variable()
            self.add(-equal, -a, following)
            self.add(-equal, b, following)
            equal = following
        self.add(-equal)

    def exactly_one(self, literals: Sequence[int]) -> None:
        """State that exactly one of the literals holds."""
        if len(literals) == 1:
            self.add(literals[0])
            return
        kind = EncType.pairwise if len(literals) <= 6 else EncType.ladder
        for clause in CardEnc.equals(lits=list(literals), bound=1, vpool=self._pool, encoding=kind).clauses:
            self.add(*clause)
