"""Parity words: β, rotations, circuits, and Lyndon words of fixed density.

A word is a text of 0 and 1, one character a step, 1 for an odd element. A cycle is written from its least element.
"""

from __future__ import annotations

from math import comb, gcd
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = [
    "balanced_word",
    "beta",
    "circuits",
    "is_aperiodic",
    "lyndon_count",
    "lyndon_words",
    "moebius",
    "rotations",
]


def beta(word: str, multiplier: int) -> int:
    """Return β = Σ_j q^(x−1−j)·2^(p_j) over the odd positions p_0 < … < p_(x−1) of ``word``.

    Source: Böhm & Sontacchi (1978).

    >>> beta("110", 3)
    5
    """
    value = 0
    for position, parity in enumerate(word):
        if parity == "1":
            value = multiplier * value + (1 << position)
    return value


def rotations(word: str) -> list[str]:
    """Return the ``len(word)`` rotations of ``word``, the word itself first."""
    return [word[i:] + word[:i] for i in range(len(word))]


def is_aperiodic(word: str) -> bool:
    """Tell whether ``word`` is not a shorter word repeated."""
    return bool(word) and (word + word).find(word, 1) == len(word)


def circuits(word: str) -> int:
    """Return the number of local minima of a cycle with this word: blocks of odd steps, read cyclically.

    A word of odd steps alone counts as one circuit (the fixed point −1 of 3x+1 is one; Steiner 1977).

    >>> circuits("11110111000")
    2
    """
    if "1" not in word:
        return 0
    return max(1, sum(word[i - 1] == "0" and word[i] == "1" for i in range(len(word))))


def moebius(n: int) -> int:
    """Return the Möbius function of n ≥ 1."""
    sign, factor = 1, 2
    while factor * factor <= n:
        if n % factor == 0:
            n //= factor
            if n % factor == 0:
                return 0
            sign = -sign
        factor += 1
    return -sign if n > 1 else sign


def lyndon_count(length: int, odd: int) -> int:
    """Return the number of Lyndon words of this length with this many ones.

    Source: Möbius inversion, (1/k)·Σ_{e | gcd(k, x)} μ(e)·C(k/e, x/e); OEIS A051168.

    >>> lyndon_count(11, 7), lyndon_count(12, 8)
    (30, 40)
    """
    if length < 1 or not 0 <= odd <= length:
        return 0
    common = gcd(length, odd)
    divisors = (e for e in range(1, common + 1) if common % e == 0)
    return sum(moebius(e) * comb(length // e, odd // e) for e in divisors) // length


def balanced_word(length: int, odd: int) -> str:
    """Return the word whose j-th odd step stands at ⌊j·k/x⌋, j = 0 … x−1.

    Source: Halbeisen & Hungerbühler, Acta Arith. 78 (1997) 227-239.

    >>> balanced_word(8, 5)
    '11011010'
    """
    places = {j * length // odd for j in range(odd)}
    return "".join("1" if i in places else "0" for i in range(length))


def lyndon_words(length: int, odd: int) -> Iterator[str]:
    """Yield the Lyndon words of ``length`` with ``odd`` ones (least rotations) in constant amortised time.

    The positions a_1 < … < a_x of the ones are extended while the prefix stays the prefix of a necklace: with the
    longest Lyndon prefix ending at the p-th one, the next one stands no later than a_(t+1−p) + a_p, where p stays,
    and every earlier place makes the whole prefix a Lyndon word.

    Source: Ruskey & Sawada, SIAM J. Comput. 29 (1999) 671-684 (their fixed-density recursion, here without recursion).

    >>> list(lyndon_words(5, 2))
    ['00011', '00101']
    """
    if length < 1 or not 0 <= odd <= length:
        return
    if odd in {0, length}:
        if length == 1:
            yield str(odd)
        return
    if odd == 1:
        yield "0" * (length - 1) + "1"
        return
    # The first gap is a longest one, so its one stands at ⌈k/x⌉ or later.
    for first in range(length - odd + 1, -(-length // odd) - 1, -1):
        yield from _extend(length, odd, first)


def _extend(length: int, odd: int, first: int) -> Iterator[str]:
    """Yield the Lyndon words whose first one stands at place ``first``."""
    place = [0] * (odd + 1)  # place[t]: where the t-th one stands, counted from 1
    period = [0] * (odd + 1)  # period[t]: index of the one that ends the longest Lyndon prefix
    place[1], period[1], place[odd] = first, 1, length

    def latest(t: int) -> int:
        p = period[t]
        return place[t + 1 - p] + place[p]

    t = 1
    place[2] = min(latest(1), length - odd + 2) + 1 if odd > 2 else length
    while t >= 1:
        if t == odd - 1:
            # The last one of a necklace ends the word; it is a Lyndon word unless the period continues.
            if length < latest(t):
                gaps = (place[i + 1] - place[i] - 1 for i in range(odd))
                yield "".join("0" * gap + "1" for gap in gaps)
            t -= 1
            continue
        place[t + 1] -= 1
        if place[t + 1] <= place[t]:
            t -= 1
            continue
        period[t + 1] = period[t] if place[t + 1] == latest(t) else t + 1
        t += 1
        if t < odd - 1:
            place[t + 1] = min(latest(t), length - odd + t + 1) + 1
