"""Side residues: the serial orbit, and every element modulo small odd primes.

For each prime P a row of literals "n_i ≡ a mod P" follows the map: n_(i+1) ≡ n_i/2 or (q·n_i + d)/2. The residue of n_0
is read off its bits by an automaton; the others follow. For P = q and d not divisible by q no element is ≡ 0, which
only the channel says at once.

Condition groups: those of ``serial``, and ``residues``, which follows from them.

Size, with w the width of n_0: about (k + w − 1)·P variables, twice that for P > 6, and k·(4·P + P·(P + 1)/2) + 4·w·P
clauses for each prime on top of ``serial``.

Good for P = 3: on six cells of the benchmark with Glucose 4 the geometric mean of the time is 0.7 of that of
``serial``, but (3, 1175, 59, 37), which has a cycle, took four times as long. Larger primes cost what they save.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import encoded
from cycle_encodings._sizes import excluded_by_bounds, guarded_orbit_size
from cycle_encodings.serial import guarded_orbit
from solverkit.errors import InputError

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from cycle_encodings._orbit_draft import OrbitDraft
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "PRIMES", "Channels", "add_channel"]

#: The primes that a channel can have.
PRIMES = (3, 5, 7, 11, 13, 17, 19, 23, 29, 31)


@dataclass(frozen=True, slots=True)
class Channels:
    """The serial orbit with side residues.

    Args:
        primes: different odd primes from 3 to 31.

    Raises:
        InputError: an option outside its range.
    """

    primes: tuple[int, ...] = (3,)
    name: str = "channels"
    form: Form = Form.CNF
    summary: str = "serial orbit with the elements modulo small odd primes; for q = 3"

    def __post_init__(self) -> None:
        if len(set(self.primes)) < len(self.primes) or not set(self.primes) <= set(PRIMES):
            raise InputError("primes", self.primes, f"different primes out of {', '.join(map(str, PRIMES))}")

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        size = guarded_orbit_size(cell)
        if not excluded_by_bounds(cell):
            size += sum(cell.length * (4 * p + p * (p + 1) // 2) for p in self.primes)
        return size

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        draft = guarded_orbit(windows)
        for prime in self.primes:
            add_channel(draft, prime)
        return draft.finished()


def add_channel(draft: OrbitDraft, prime: int) -> None:
    """State the residues mod ``prime`` of the elements that are kept; implied."""
    builder, cell = draft.builder, draft.cell
    q, d, half = cell.multiplier, cell.offset, pow(2, -1, prime)
    builder.group("residues")
    positions = draft.positions[:-1]
    rows = {i: [builder.variable(f"n[{i}]={a} mod {prime}") for a in range(prime)] for i in positions}
    rows[cell.length] = rows[0]
    for i in positions:
        builder.exactly_one(rows[i])
        if q % prime == 0 and d % prime:
            builder.add(-rows[i][0])
    for i in positions:
        if i + 1 not in rows:
            continue
        odd, row, image = draft.elements[i][0], rows[i], rows[i + 1]
        for a in range(prime):
            builder.add(-row[a], odd, image[a * half % prime])
            builder.add(-row[a], -odd, image[(q * a + d) * half % prime])
            builder.add(-image[a], odd, row[2 * a % prime])
            builder.add(-image[a], -odd, *(row[b] for b in range(prime) if (q * b + d - 2 * a) % prime == 0))
    for i in positions:
        if i == 0 or i - 1 not in rows:
            _read(draft, draft.elements[i], rows[i])


def _read(draft: OrbitDraft, bits: list[int], row: list[int]) -> None:
    """State, by an automaton over the bits from the lowest, that ``row`` is the residue of the number."""
    builder, prime = draft.builder, len(row)
    layers = [{0: builder.true}]
    for place in range(len(bits)):
        weight = pow(2, place, prime)
        reached = sorted({(a + weight * bit) % prime for a in layers[-1] for bit in (0, 1)})
        last = place == len(bits) - 1
        layers.append({a: row[a] if last else builder.variable() for a in reached})
        if not last:
            builder.exactly_one(list(layers[-1].values()))
    for a in range(prime):
        if a not in layers[-1]:
            builder.add(-row[a])
    for place, (layer, following) in enumerate(pairwise(layers)):
        bit, weight = bits[place], pow(2, place, prime)
        for a, literal in layer.items():
            builder.add(-literal, bit, following[a])
            builder.add(-literal, -bit, following[(a + weight) % prime])
        for a, literal in following.items():
            builder.add(-literal, bit, layer.get(a, -builder.true))
            builder.add(-literal, -bit, layer.get((a - weight) % prime, -builder.true))


ENCODING = Channels()
