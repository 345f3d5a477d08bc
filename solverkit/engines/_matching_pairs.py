"""Pairs of 64-bit residues that nearly agree."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import numpy.typing as npt

__all__ = ["near_pairs"]


def near_pairs(
    left: npt.NDArray[np.uint64], right: npt.NDArray[np.uint64], distance: int, most: int
) -> npt.NDArray[np.int64] | None:
    """Return the places (i, j) of all pairs at most ``distance`` apart modulo 2^64; None when over ``most``.

    Args:
        left: in any order, with repeats.
        right: likewise.
        distance: less than 2^62.
        most: largest number of pairs that is wanted.

    Returns:
        an array of shape (pairs, 2).

    Costs the sorting of both.

    >>> import numpy as np
    >>> near_pairs(np.array([3, 9], np.uint64), np.array([2**64 - 1, 12], np.uint64), 4, 9).tolist()
    [[0, 0], [1, 1]]
    """
    if not len(left) or not len(right):
        return np.empty((0, 2), np.int64)
    # Turned by ``distance``, the interval [y − distance, y + distance] starts at y: only its end may wrap.
    turned = right + np.uint64(distance)
    sorted_left, sorted_right = np.sort(left), np.sort(turned)
    start = np.searchsorted(sorted_right, sorted_left)
    ends = sorted_left + np.uint64(2 * distance)
    number = np.searchsorted(sorted_right, ends, side="right") - start + (ends < sorted_left) * len(right)
    total = int(number.sum())
    if total > most:
        return None
    if not total:
        return np.empty((0, 2), np.int64)
    before = np.cumsum(number) - number
    run = np.arange(total) - np.repeat(before, number)
    i = np.argsort(left)[np.repeat(np.arange(len(left)), number)]
    j = np.argsort(turned)[(np.repeat(start, number) + run) % len(right)]
    return np.stack([i, j], axis=1)
