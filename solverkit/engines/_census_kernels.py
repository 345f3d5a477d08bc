# ruff: noqa: ANN001, ANN202 - numba infers the types
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator"
"""Compiled loops of the census: Lyndon words with a running fraction β/R, and the check of each word.

The enumeration is the one of ``solverkit.words.lyndon_words``, with its state in arrays so that it can stop
when a buffer is full and go on later. It places the rarer of the two letters. β is a sum of one weight for
each of them, plus a constant, also when the rarer letter is 0: see ``_census_scan``.

The fraction is made of ⌊2^64·(u·w mod R)/R⌋ over the weights w of the ones, u a unit mod R, in wrapping
unsigned arithmetic: when R divides β, the exact sum is a multiple of 2^64 and the running one is at most x
below it, so no word with R | β is lost. What passes by chance is removed by the exact check.

Source: Ruskey & Sawada, SIAM J. Comput. 29 (1999) 671-684.
"""

import numpy as np
from numba import njit

__all__ = ["check_words", "scan_words"]

_ZERO, _ONE = np.uint64(0), np.uint64(1)


@njit(cache=True, nogil=True)
def scan_words(length, fractions, slack, state, place, period, latest, partial, depth, stride, index, quota, found):
    """Store the places of the rarer letter in further words that pass the screen; return how many.

    Args:
        length: k.
        fractions: uint64 array (z, k) for z ≥ 3 rare letters, what the t-th one at place p adds to 2^64·β/R.
        slack: uint64, how far below a multiple of 2^64 the fraction of a word with R | β may lie.
        state: int64 array: level of the recursion (0 when done), nodes met at ``depth``, words visited.
        place: int64 array (z + 1), place[t] is where the t-th rare letter stands, from 1.
        period: int64 array (z + 1), index of the rare letter that ends the longest Lyndon prefix.
        latest: int64 array (z + 1), last place that keeps the prefix of a necklace.
        partial: uint64 array (z + 1), running fraction; partial[0] is the constant.
        depth: level, at most z − 2, at which subtrees are dealt out; 0 for a single worker.
        stride: number of workers.
        index: which worker this is; it takes every ``stride``-th subtree.
        quota: words to visit before it returns, give or take k.
        found: uint16 array (capacity, z) of places from 0, capacity at least 2k.
    """
    rare = fractions.shape[0]
    level, met, visited = state[0], state[1], state[2]
    room = found.shape[0] - length
    last = fractions[rare - 1, length - 1]
    shortest = (length + rare - 1) // rare
    free = fractions[rare - 2]
    hits, goal = 0, visited + quota
    while level > 0 and hits <= room and visited < goal:
        here = place[level] - 1
        place[level] = here
        if here <= (shortest - 1 if level == 1 else place[level - 1]):
            level -= 1
            continue
        if level > 1:
            period[level] = period[level - 1] if here == latest[level] else level
        partial[level] = partial[level - 1] + fractions[level - 1, here - 1]
        if level == depth:
            met += 1
            if met % stride != index:
                continue
        p = period[level]
        top = place[level + 1 - p] + place[p]
        if level < rare - 2:
            level += 1
            latest[level] = top
            place[level] = min(top, length - rare + level) + 1
            continue
        # The last free letter. Below `top` it makes the prefix a Lyndon word, and with the letter at the
        # end the whole word is one if the place is beyond k − place[1]. At `top` the period goes on.
        high = min(top, length - 1)
        low = max(here, length - place[1])
        if high == top:
            high -= 1
            if (top if p == 1 else place[rare - p]) + place[p] > length:
                visited += 1
                if _ZERO - (partial[level] + free[top - 1] + last) <= slack:
                    _store(found, hits, place, rare, top, length)
                    hits += 1
        visited += max(high - low, 0)
        total = partial[level] + last
        for v in range(high, low, -1):
            if _ZERO - (total + free[v - 1]) <= slack:
                _store(found, hits, place, rare, v, length)
                hits += 1
    state[0], state[1], state[2] = level, met, visited
    return hits


@njit(cache=True, nogil=True)
def _store(found, row, place, rare, free, length):
    for t in range(rare - 2):
        found[row, t] = place[t + 1] - 1
    found[row, rare - 2] = free - 1
    found[row, rare - 1] = length - 1


@njit(cache=True, nogil=True)
def check_words(words, count, weights, constant, primes, powers, multiplier, negative, target, most, offsets, least):
    """Keep the words whose offset is wanted; return how many, with their offsets and least elements.

    Args:
        words: uint16 array (capacity, z) of the places of the rarer letter.
        count: number of rows in use.
        weights: uint64 array (z, k), what the t-th rare letter at place p adds to β, modulo 2^64.
        constant: uint64, the rest of β, modulo 2^64.
        primes: uint64 array, the prime factors of D, largest first.
        powers: uint64 array, their powers in D.
        multiplier: q.
        negative: whether D < 0, that is, whether the offset is −|D|/gcd(D, β).
        target: uint64; keep an offset only if it divides this; 0 keeps all.
        most: uint64; keep an offset only if it is at most this.
        offsets: uint64 array (capacity), filled.
        least: int64 array (capacity), filled.

    The offset grows prime by prime, so that most words are dropped after a division or two. Every element
    times q must stay below 2^63 − |D|; the caller sees to that.
    """
    rare, length = weights.shape
    kept = 0
    for i in range(count):
        beta = constant
        for t in range(rare):
            beta += weights[t, words[i, t]]
        offset, common = _ONE, _ONE
        for f in range(primes.shape[0]):
            rest = beta % powers[f]
            if rest == _ZERO:
                common *= powers[f]
                continue
            missing = powers[f]
            while rest % primes[f] == _ZERO:
                rest //= primes[f]
                missing //= primes[f]
                common *= primes[f]
            offset *= missing
            if offset > most:
                break
        if offset > most or (target != _ZERO and target % offset != _ZERO):
            continue
        value = np.int64(beta // common)
        shift = -np.int64(offset) if negative else np.int64(offset)
        smallest = value
        for _ in range(length):
            value = (multiplier * value + shift) >> 1 if value & 1 else value >> 1
            smallest = min(smallest, value)
        offsets[kept], least[kept] = offset, smallest
        kept += 1
    return kept
