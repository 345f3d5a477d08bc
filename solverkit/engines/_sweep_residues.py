"""Which residues mod a power of q a tested candidate may have."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

__all__ = ["Residues", "every_element", "without_tails"]

_MOST = 64  # residues fit one machine word as a bit mask


@dataclass(frozen=True, slots=True)
class Residues:
    """A set of residues.

    Args:
        modulus: at most 64.
        allowed: one flag a residue.
        valid_from: least candidate for which the set is sound.
        tail: most steps from a tested candidate to a cycle that it stands for.
    """

    modulus: int
    allowed: tuple[bool, ...]
    valid_from: int = 0
    tail: int = 0


def _orbit_of_offset(multiplier: int, offset: int) -> frozenset[int]:
    """Return d·⟨2⟩ mod q: all elements of all cycles lie there, for T(n) ≡ d/2 mod q after an odd step."""
    classes, residue, half = set(), offset % multiplier, pow(2, -1, multiplier)
    while residue not in classes:
        classes.add(residue)
        residue = residue * half % multiplier
    return frozenset(classes)


@lru_cache(maxsize=1024)
def every_element(multiplier: int, offset: int) -> Residues:
    """Return the residues mod q that elements of cycles have; all residues when q is above 64."""
    if multiplier > _MOST:
        return Residues(1, (True,))
    there = _orbit_of_offset(multiplier, offset)
    return Residues(multiplier, tuple(residue in there for residue in range(multiplier)))


@lru_cache(maxsize=1024)
def without_tails(multiplier: int, offset: int, above: int) -> Residues:
    """Return the residues mod 27 that are left when a smaller integer of the same tail is tested instead (q = 3).

    Take a least element n of a cycle and a word w of l steps with a ≤ 2 odd ones, all of whose prefixes grow
    (3^a > 2^l). When n ≡ d·β·2^(−l) mod 3^a, an integer m = (2^l·n − d·β)/3^a < n runs into n along w without
    falling below m, and then round the cycle, which stays above m; so a test of m that looks for orbits which never
    fall below their start finds the cycle of n. That is used only when m is itself tested as far as residues go:
    m lies in d·⟨2⟩ mod 3 (which n mod 27 decides) and above ``above``. By induction on n every cycle is found from
    some tested integer; each link of the chain divides by more than 1.09 and takes at most three steps, so for
    n < 2^80 a tail has fewer than 1,500 steps.

    For d < 0 the prefixes grow only from some m on; ``valid_from`` covers that.
    """
    if multiplier != 3 or offset % 3 == 0:
        return every_element(multiplier, offset)
    there = _orbit_of_offset(3, offset)
    allowed = [residue % 3 in there for residue in range(27)]
    valid_from = 0
    # (steps, odd steps, β) of the words "1", "11" and "110": no other prefix-growing word has at most two odd steps.
    for steps, odd, beta in ((1, 1, 1), (2, 2, 5), (3, 2, 5)):
        power = 3**odd
        least = max(above + 1, 32 * abs(offset) * beta)
        valid_from = max(valid_from, (power * least + abs(offset) * beta) // (1 << steps) + 1)
        target = offset * beta * pow(2, -steps, power) % power
        for residue in range(target, 27, power):
            source = ((1 << steps) * residue - offset * beta) // power
            if source % 3 in there:
                allowed[residue] = False
    return Residues(27, tuple(allowed), valid_from, 1500)
