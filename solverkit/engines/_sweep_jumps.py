"""Distances from any integer to the next candidate of a plain pass."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from solverkit.residues.sieve import survivors

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from solverkit.maps import Map

__all__ = ["classes_apart", "odd_apart"]


def odd_apart() -> NDArray[np.int64]:
    """Return the distances to the next odd integer, modulo 2."""
    return np.array([1, 2], np.int64)


@lru_cache(maxsize=64)
def classes_apart(map_: Map, depth: int) -> NDArray[np.int64]:
    """Return the distances to the next integer in a surviving class mod 2^depth.

    Beyond `drop_threshold` every least element lies in one of these classes.
    """
    size = 1 << depth
    classes = np.array(survivors(map_, depth), np.int64)
    following = np.append(classes, classes[0] + size)
    places = np.arange(size, dtype=np.int64)
    return following[np.searchsorted(following, places, side="right")] - places
