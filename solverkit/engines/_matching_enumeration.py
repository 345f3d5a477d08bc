"""The definition made code: every word of a cell once or more, each substituted. For cells of few words."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["ballot_words"]


def ballot_words(length: int, odd: int) -> Iterator[int]:
    """Yield the words whose every prefix of i letters has j ones with j·k ≥ i·x.

    Args:
        length: k ≥ 1.
        odd: x, 1 … k.

    Yields:
        the word as an integer whose bit j is the letter of step j.

    By the cycle lemma every word has a rotation of this kind, and exactly one when gcd(k, x) = 1; then they number
    C(k, x)/k. Source: Dvoretzky & Motzkin, Duke Math. J. 14 (1947) 305-313.

    >>> [bin(word) for word in ballot_words(5, 3)]
    ['0b111', '0b1011']
    """
    stack = [(0, 0, 0)]
    while stack:
        position, ones, word = stack.pop()
        if position == length:
            yield word
            continue
        if position + 1 - ones <= length - odd and ones * length >= (position + 1) * odd:
            stack.append((position + 1, ones, word))
        if ones < odd:
            stack.append((position + 1, ones + 1, word | 1 << position))
