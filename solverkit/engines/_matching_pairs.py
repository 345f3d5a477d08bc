"""Pairs of 64-bit residues that nearly agree."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import numpy.typing as npt

__all__ = ["near_pairs"]


def near_pairs(
    left: npt.NDArray[np.uint64], right: npt.NDArray[np.uint64], distance: int, most: int
) -> set[tuple[int, int]] | None:
    """Return the pairs of values at most ``distance`` apart on the circle modulo 2^64; None when over ``most``.

    Args:
        left: in any order, with repeats.
        right: likewise.
        distance: less than 2^63.
        most: largest number of different pairs of values that is wanted.

    Costs the sorting of both.

    >>> import numpy as np
    >>> sorted(near_pairs(np.array([3, 9], np.uint64), np.array([2**64 - 1, 12], np.uint64), 4, 9))
    [(3, 18446744073709551615), (9, 12)]
    """
    if not len(left) or not len(right):
        return set()
    left, right = _distinct(left), _distinct(right)
    # Turned by ``distance``, each interval [y − distance, y + distance] starts at y: only its end may wrap.
    turned = np.sort(right + np.uint64(distance))
    start = np.searchsorted(turned, left)
    stop = np.searchsorted(turned, left + np.uint64(2 * distance), side="right")
    wrapped = left + np.uint64(2 * distance) < left
    number = stop - start + wrapped * len(turned)
    if int(number.sum()) > most:
        return None
    pairs = set()
    for i in np.flatnonzero(number):
        for j in range(int(start[i]), int(start[i] + number[i])):
            pairs.add((int(left[i]), (int(turned[j % len(turned)]) - distance) % (1 << 64)))
    return pairs


def _distinct(values: npt.NDArray[np.uint64]) -> npt.NDArray[np.uint64]:
    ordered = np.sort(values)
    return ordered[np.concatenate([[True], ordered[1:] != ordered[:-1]])]
