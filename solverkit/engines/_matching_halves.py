"""All words of one half and their sums of fractions, as sums of a short list and sorted long lists."""

from __future__ import annotations

from dataclasses import dataclass
from math import comb
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Collection

    import numpy.typing as npt

    Sums = npt.NDArray[np.uint64]

__all__ = ["PAD", "Half", "HalfWords", "Pool", "build"]

#: Copies of the last value behind every sorted list, so that a kernel may read that far beyond its end.
PAD = 16


@dataclass(frozen=True, slots=True)
class HalfWords:
    """The words of steps ``start`` … ``stop`` − 1 with ``ones`` ones; the first one is the ``index``-th of the cycle.

    They are the paths of a lattice from (start, 0) to (stop, ones), a node being (step, ones so far).
    """

    start: int
    stop: int
    index: int
    ones: int

    def ways(self, step: int, ones: int) -> int:
        """Return the number of paths from a node to the end."""
        missing = self.ones - ones
        return comb(self.stop - step, missing) if missing >= 0 else 0

    def word(self, step: int, ones: int, rank: int) -> int:
        """Return the path of rank ``rank`` from a node to the end, bit j for step j; the order is that of `_tails`."""
        bits = 0
        while step < self.stop:
            zeros_first = self.ways(step + 1, ones)
            if rank >= zeros_first:
                rank -= zeros_first
                bits |= 1 << step
                ones += 1
            step += 1
        return bits


@dataclass(frozen=True, slots=True)
class _Leaf:
    """A node where the heads end: the heads that reach it and where its sorted tails stand."""

    step: int
    ones: int
    heads: Sums
    words: list[int]


@dataclass(frozen=True, slots=True)
class Pool:
    """Some sums of a half.

    Args:
        residues: uint64, the sums, some of them perhaps more than once.
        places: int64, of shape (number, 2): for each its stream and its place in ``values``.
    """

    residues: Sums
    places: npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Half:
    """The sums of one half: stream s gives base[s] + values[first[s]], …, base[s] + values[end[s] − 1].

    Args:
        words: which words they belong to.
        weights: table (i, j) ↦ fraction, wrapped modulo 2^64.
        leaves: nodes where the heads end.
        base: uint64, one a stream: the sum of its head.
        first: int64, one a stream: start of its list of tails in ``values``.
        end: int64, one a stream: end of that list.
        values: uint64, the sorted lists, each with `PAD` copies of its last value behind it.
    """

    words: HalfWords
    weights: Sums
    leaves: tuple[_Leaf, ...]
    base: Sums
    first: npt.NDArray[np.int64]
    end: npt.NDArray[np.int64]
    values: Sums

    def count(self) -> int:
        """Return the number of sums."""
        return int((self.end - self.first).sum())

    def whole(self) -> Pool:
        """Return all sums of a half of one stream."""
        number = self.count()
        assert len(self.base) == 1
        places = np.stack([np.zeros(number, np.int64), np.arange(number)], axis=1)
        return Pool(self.values[:number] + self.base, places)

    def below(self, bound: int) -> int:
        """Return, by binary search, the number of sums that are less than ``bound`` ≤ 2^64 as residues 0 … 2^64 − 1."""
        total = stream = 0
        for leaf in self.leaves:
            tails = self.values[self.first[stream] : self.end[stream]]
            stream += len(leaf.heads)
            if bound >= 1 << 64:
                total += len(leaf.heads) * len(tails)
                continue
            start = np.searchsorted(tails, -leaf.heads)
            stop = np.searchsorted(tails, np.uint64(bound) - leaf.heads)
            wrapped = np.uint64(bound) - leaf.heads < -leaf.heads
            total += int((stop - start).sum()) + len(tails) * int(wrapped.sum())
        return total

    def words_at(self, places: Collection[tuple[int, int]]) -> dict[tuple[int, int], int]:
        """Return the word of the sum base[s] + values[p] for each given (stream s, place p), bit j for step j.

        The lists that are needed are made again, unsorted, about 0.1 s for each million of values.
        """
        wanted = sorted(set(places))
        borders = np.cumsum([0] + [len(leaf.heads) for leaf in self.leaves]).tolist()
        found: dict[tuple[int, int], int] = {}
        for number, leaf in enumerate(self.leaves):
            low, high = borders[number], borders[number + 1]
            here = [(stream, place) for stream, place in wanted if low <= stream < high]
            if not here:
                continue
            node = (leaf.step, leaf.ones)
            order = np.argsort(_tails(self.words, self.weights, [node])[node], kind="stable")
            for stream, place in here:
                tail = self.words.word(*node, int(order[place - self.first[stream]]))
                found[stream, place] = leaf.words[stream - low] | tail
        return found


def build(words: HalfWords, weights: Sums, base: int, most: int) -> Half:
    """Return the sums of ``words``, each plus ``base``.

    Args:
        words: which words.
        weights: fractions, of shape (x, k).
        base: added to every sum, modulo 2^64.
        most: a head ends where at most this many tails are left, so no list is longer.

    Time and memory are proportional to the lists: about 10 · ``most`` values of 8 bytes, three times that at the peak.
    """
    leaves = _leaves(words, weights, base, most)
    tails = _tails(words, weights, [(leaf.step, leaf.ones) for leaf in leaves])
    lists, first, end, offset = [], [], [], 0
    for leaf in leaves:
        each = tails.pop((leaf.step, leaf.ones))
        each.sort()
        lists += [each, np.full(PAD, each[-1])]
        first.append(np.full(len(leaf.heads), offset, np.int64))
        end.append(np.full(len(leaf.heads), offset + len(each), np.int64))
        offset += len(each) + PAD
    half = Half(
        words,
        weights,
        leaves,
        np.concatenate([leaf.heads for leaf in leaves]),
        np.concatenate(first),
        np.concatenate(end),
        np.concatenate(lists),
    )
    assert half.count() == words.ways(words.start, 0)
    return half


def _leaves(words: HalfWords, weights: Sums, base: int, most: int) -> tuple[_Leaf, ...]:
    """Return the first nodes on every path from which at most ``most`` paths lead to the end, with their heads."""
    leaves = []
    nodes: dict[int, tuple[list[Sums], list[int]]] = {0: ([np.array([base], np.uint64)], [0])}
    for step in range(words.start, words.stop + 1):
        following: dict[int, tuple[list[Sums], list[int]]] = {}
        for ones, (parts, heads) in sorted(nodes.items()):
            sums = np.concatenate(parts)
            if words.ways(step, ones) <= most or step == words.stop:
                leaves.append(_Leaf(step, ones, sums, heads))
                continue
            for bit in (0, 1):
                if words.ways(step + 1, ones + bit):
                    more_parts, more_heads = following.setdefault(ones + bit, ([], []))
                    more_parts.append(sums + weights[words.index + ones, step] if bit else sums)
                    more_heads.extend([head | bit << step for head in heads])
        nodes = following
    return tuple(leaves)


def _tails(words: HalfWords, weights: Sums, wanted: Collection[tuple[int, int]]) -> dict[tuple[int, int], Sums]:
    """Return, for every wanted node, the sums of its paths to the end, those with a 0 next before those with a 1."""
    found: dict[tuple[int, int], Sums] = {}
    needed = [_reach(words, wanted, step) for step in range(words.start, words.stop + 1)]
    level: dict[int, Sums] = {words.ones: np.zeros(1, np.uint64)}
    for step in range(words.stop, words.start - 1, -1):
        if step < words.stop:
            level = {ones: _extended(words, weights, level, step, ones) for ones in needed[step - words.start]}
        found.update({(step, ones): level[ones].copy() for ones in level if (step, ones) in wanted})
    return found


def _reach(words: HalfWords, wanted: Collection[tuple[int, int]], step: int) -> list[int]:
    """Return the odd counts at ``step`` of the nodes on paths from a wanted node to the end."""
    counts = {
        ones
        for at, low in wanted
        if at <= step
        for ones in range(low, min(low + step - at, words.ones) + 1)
        if words.ways(step, ones)
    }
    return sorted(counts)


def _extended(words: HalfWords, weights: Sums, level: dict[int, Sums], step: int, ones: int) -> Sums:
    parts = []
    if words.ways(step + 1, ones):
        parts.append(level[ones])
    if words.ways(step + 1, ones + 1):
        parts.append(level[ones + 1] + weights[words.index + ones, step])
    return np.concatenate(parts)
