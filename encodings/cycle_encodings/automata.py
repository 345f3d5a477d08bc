"""Word side by automata: the orbit, and β_i modulo the prime powers that divide D/gcd(d, D).

D/gcd(d, D) divides β = β_k, because n_0·D = d·β (Böhm & Sontacchi 1978). For each prime, its highest power P that
is at most ``largest`` and divides D/gcd(d, D) gives an automaton of β_i mod P over the steps: β_0 = 0, β_(i+1) = β_i
at an even step and q·β_i + 2^i at an odd one, β_k ≡ 0. A step permutes the residues, since P has no factor in common
with q, and it does not depend on the odd count. A residue is a literal; those on no path from 0 to 0 over the
admissible states (i, j) are left out, and a clause excludes each pair of a state and a residue that lie on no such path
together. Only trial division up to ``largest`` looks for the primes. Without one, what is left is the orbit: one serial
multiplier a step, exact windows to a fixpoint, the order, guards in every state.

Condition groups: those of the orbit (``step``, ``closing``, ``odd count``, ``order``, ``lower bound``, ``upper bound``,
``ranges``), and ``automata``, which follows from them.

Size, with r_i the number of residues after i steps and s_i the number of admissible odd counts there: Σ r_i variables
more than the orbit, over the i with r_i > 1, and at most Σ (1 + s_i + 5·r_i) clauses for each automaton, over
0 ≤ i ≤ k; r_i ≤ P.

Good for: cells whose D/gcd(d, D) has several small prime powers and few steps, such as (7, −803517, 24, 12) with 3, 5,
31 and 37: 0.2 of the time of the orbit alone on MiniSat 2.2 and 0.3 on Glucose 4. In general it does not pay: over
those of twelve cells with U' from 3·10^3 to 10^6 that have such a prime power, the geometric mean of process time
against the same orbit without automata was 0.82 (MiniSat) and 2.11 (Glucose, one cell 13 times) with ``largest`` = 32,
0.88 and 1.58 with 64, 0.86 and 1.37 with 256, 1.03 and 1.69 with 1024: hence the default.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from math import isqrt
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import checked_option, encoded
from cycle_encodings._sizes import guarded_orbit_size
from cycle_encodings.serial import guarded_orbit
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from cycle_encodings._orbit_draft import OrbitDraft
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Automata", "live_residues", "prime_powers"]


@dataclass(frozen=True, slots=True)
class Automata:
    """The orbit with automata of the word side, and its option.

    Args:
        largest: no automaton has more residues, 3 … 4096.

    Raises:
        InputError: an option outside its range.
    """

    largest: int = 256
    name: str = "automata"
    form: Form = Form.CNF
    summary: str = (
        "orbit and automata of beta modulo the prime powers of D/gcd(d, D); for cells with several small ones"
    )

    def __post_init__(self) -> None:
        checked_option("largest", self.largest, 3, 4096)

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses, from the lengths of U' and d and the prime powers alone."""
        if balanced_bound(cell) <= cell.above:
            return 2
        layers = sum(
            min(modulus, 1 << min(i, cell.length - i, 12))
            for modulus in prime_powers(cell, self.largest)
            for i in range(cell.length)
        )
        return guarded_orbit_size(cell) + 4 * layers

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        draft = guarded_orbit(windows)
        draft.builder.group("automata")
        for modulus in prime_powers(windows.cell, self.largest):
            _follow(draft, modulus)
        return draft.finished()


def prime_powers(cell: Cell, largest: int) -> tuple[int, ...]:
    """Return, for each prime, its highest power up to ``largest`` that divides D/gcd(d, D); primes ascending.

    Trial division up to ``largest`` on residues of D, which is never built.

    >>> from solverkit.window import Cell
    >>> prime_powers(Cell(3, 5, 27, 17), 4096)  # D = 5077565 = 5·71·14303
    (71,)
    """
    found = []
    for prime in range(3, largest + 1, 2):
        if any(prime % factor == 0 for factor in range(3, isqrt(prime) + 1, 2)):
            continue
        shared, rest = 1, abs(cell.offset)
        while rest % prime == 0:
            shared, rest = shared * prime, rest // prime
        power = 1
        while power * prime <= largest:
            modulus = shared * power * prime
            if (pow(2, cell.length, modulus) - pow(cell.multiplier, cell.odd, modulus)) % modulus:
                break
            power *= prime
        if power > 1:
            found.append(power)
    return tuple(found)


def live_residues(windows: Windows, modulus: int) -> dict[tuple[int, int], frozenset[int]]:
    """Return (i, j) -> residues of β_i that lie on a path of admissible states from β_0 = 0 to β_k ≡ 0.

    Args:
        windows: not empty.
        modulus: P ≥ 2 without a common factor with 2·q.

    In the coordinate β_i/q^j an odd step only adds 2^i/q^(j+1), so a set of residues is an integer of P bits that
    an odd step rotates: k·w operations on P bits, w the number of odd counts admissible at one step.
    """
    q, k, x, rooms = windows.cell.multiplier, windows.cell.length, windows.cell.odd, windows.rooms
    every, inverse = (1 << modulus) - 1, pow(q, -1, modulus)

    def rotated(members: int, shift: int) -> int:
        return (members << shift | members >> (modulus - shift)) & every

    def shift(i: int, j: int) -> int:
        return pow(2, i, modulus) * pow(inverse, j + 1, modulus) % modulus

    ahead = dict.fromkeys(rooms, 0) | {(0, 0): 1}
    for i in range(k):
        for j in windows.odd_counts(i):
            for after, members in (((i + 1, j), ahead[i, j]), ((i + 1, j + 1), rotated(ahead[i, j], shift(i, j)))):
                if after in ahead:
                    ahead[after] |= members
    back = dict.fromkeys(rooms, 0) | {(k, x): 1}
    for i in range(k - 1, -1, -1):
        for j in windows.odd_counts(i):
            odd = rotated(back.get((i + 1, j + 1), 0), -shift(i, j) % modulus)
            back[i, j] = back.get((i + 1, j), 0) | odd
    live = {}
    for (i, j), members in ahead.items():
        digits = bin(members & back[i, j])[:1:-1]
        power = pow(q, j, modulus)
        live[i, j] = frozenset(place * power % modulus for place, digit in enumerate(digits) if digit == "1")
    return live


def _follow(draft: OrbitDraft, modulus: int) -> None:
    """State that β_i mod ``modulus`` starts and ends at 0, one literal for each live residue after each step."""
    builder, cell, windows = draft.builder, draft.cell, draft.windows
    live = live_residues(windows, modulus)
    layers: list[dict[int, int]] = []
    for i in range(cell.length + 1):
        counts = windows.odd_counts(i)
        residues = sorted(frozenset[int]().union(*(live[i, j] for j in counts)))
        only = len(residues) == 1
        layer = {r: builder.true if only else builder.variable(f"beta[{i}]={r} mod {modulus}") for r in residues}
        layers.append(layer)
        builder.add(*layer.values())
        for j in counts:
            if len(live[i, j]) < len(layer):
                builder.add(-draft.states[i, j], *(layer[r] for r in sorted(live[i, j])))
        for r, literal in layer.items():
            able = [draft.states[i, j] for j in counts if r in live[i, j]]
            if len(able) < len(counts):
                builder.add(-literal, *able)
    inverse = pow(cell.multiplier, -1, modulus)
    for i, (layer, following) in enumerate(pairwise(layers)):
        odd, term = draft.elements[i][0], pow(2, i, modulus)
        for r, literal in layer.items():
            builder.add(-literal, odd, following.get(r, -builder.true))
            builder.add(-literal, -odd, following.get((cell.multiplier * r + term) % modulus, -builder.true))
        for r, literal in following.items():
            builder.add(-literal, odd, layer.get(r, -builder.true))
            builder.add(-literal, -odd, layer.get((r - term) * inverse % modulus, -builder.true))


ENCODING = Automata()
