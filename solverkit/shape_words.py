"""Facts about cyclic words: factors, runs, balance, and whether conditions on factors leave any word.

A cycle repeats its parity word for ever. So a factor of a cyclic word is a factor of that endless repetition,
and may be longer than the word; a run counts elements of the cycle, and so is never longer than the word.
"""

from __future__ import annotations

from collections import deque
from fractions import Fraction
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

__all__ = [
    "avoiding",
    "begins_with",
    "discrepancy",
    "has_factor",
    "is_balanced",
    "is_palindromic",
    "leaves_a_word",
    "longest_run",
]


def has_factor(word: str, factor: str) -> bool:
    """Tell whether ``factor`` occurs in the endless repetition of ``word``.

    >>> has_factor("110", "0110"), has_factor("110", "00")
    (True, False)
    """
    return factor in word * (len(factor) // len(word) + 2)


def begins_with(word: str, prefix: str) -> bool:
    """Tell whether the endless repetition of ``word`` begins with ``prefix``."""
    return (word * (len(prefix) // len(word) + 1)).startswith(prefix)


def longest_run(word: str, symbol: str) -> int:
    """Return the length of the longest block of ``symbol`` in the cyclic word, at most the word's length.

    >>> longest_run("1101", "1"), longest_run("1", "1"), longest_run("1", "0")
    (3, 1, 0)
    """
    other = "0" if symbol == "1" else "1"
    start = word.find(other)
    if start < 0:
        return len(word)
    return max(map(len, (word[start:] + word[:start]).split(other)))


def discrepancy(word: str) -> Fraction:
    """Return the largest |ones − l·x/k| over all factors of the cyclic word, l being the factor's length.

    With P_i = k·(ones among the first i) − i·x, a factor from i to j has k·ones − l·x = P_j − P_i, also
    across the end since P_k = 0; so the largest is (max P − min P)/k. Costs k additions.

    >>> discrepancy("11010"), discrepancy("11100")
    (Fraction(4, 5), Fraction(6, 5))
    """
    length, odd = len(word), word.count("1")
    value = lowest = highest = 0
    for symbol in word:
        value += length - odd if symbol == "1" else -odd
        lowest, highest = min(lowest, value), max(highest, value)
    return Fraction(highest - lowest, length)


def is_balanced(word: str) -> bool:
    """Tell whether factors of equal length of the cyclic word differ by at most 1 in their number of ones.

    So it is if and only if the discrepancy is below 1. The k factors of length l have l·x/k ones on average.
    Counts less than 1 away from it are at most two neighbouring integers; and if all counts are m or m + 1,
    then so is the average or it lies between, hence less than 1 away from each count that occurs.

    Source: these are the rotations of powers of Christoffel words; Berstel, Lauve, Reutenauer & Saliola,
    Combinatorics on Words: Christoffel Words and Repetitions in Words (2009).

    >>> is_balanced("11011010"), is_balanced("11100")
    (True, False)
    """
    return discrepancy(word) < 1


def is_palindromic(word: str) -> bool:
    """Tell whether the cyclic word equals its own reversal: the word read backwards is a rotation of it.

    >>> is_palindromic("11010"), is_palindromic("110100")
    (True, False)
    """
    return word[::-1] in word + word


def leaves_a_word(forbidden: Iterable[str], required: Sequence[str]) -> bool:
    """Tell whether some cyclic word with an odd step has every factor ``required`` and none ``forbidden``.

    Such a word is a closed walk of the automaton of the forbidden factors, so all of it lies in one strongly
    connected component; conversely walks of one component join to a closed one. Costs at most the symbols of
    ``required`` times the symbols of ``forbidden``.

    >>> leaves_a_word(["11", "00"], []), leaves_a_word(["11", "00", "101"], [])
    (True, False)
    """
    following = avoiding(forbidden)
    component = _components(following)
    inside = [
        tuple(target if target >= 0 and component[target] == component[state] else -1 for target in targets)
        for state, targets in enumerate(following)
    ]
    able = {component[state] for state, targets in enumerate(inside) if targets[1] >= 0}
    for word in required:
        able &= {component[state] for state in _after(inside, word)}
    return bool(able)


def _after(following: Sequence[Sequence[int]], word: str) -> set[int]:
    """Return the states at which a walk labelled ``word`` can end."""
    states = set(range(len(following)))
    for symbol in word:
        states = {following[state][symbol == "1"] for state in states} - {-1}
    return states


def avoiding(forbidden: Iterable[str]) -> list[tuple[int, int]]:
    """Return the automaton that reads words without the ``forbidden`` factors.

    A closed walk of it reads a cyclic word without them; every such word, repeated, comes to a closed walk.

    Returns:
        For every state the states after 0 and after 1; −1 completes a factor. State 0 is the start.

    Source: Aho & Corasick, Comm. ACM 18 (1975) 333-340.

    >>> avoiding(["11"])
    [(0, 1), (0, -1), (-1, -1)]
    """
    children, ends = [[-1, -1]], [False]
    for word in forbidden:
        state = 0
        for symbol in word:
            if children[state][symbol == "1"] < 0:
                children[state][symbol == "1"] = len(children)
                children.append([-1, -1])
                ends.append(False)
            state = children[state][symbol == "1"]
        ends[state] = True
    fallback, queue = [0] * len(children), deque([0])
    while queue:
        state = queue.popleft()
        ends[state] = ends[state] or ends[fallback[state]]
        for parity in (0, 1):
            child, elsewhere = children[state][parity], children[fallback[state]][parity] if state else 0
            if child < 0:
                children[state][parity] = elsewhere
            else:
                fallback[child] = elsewhere
                queue.append(child)

    def allowed(state: int) -> int:
        return -1 if ends[state] else state

    return [(-1, -1) if ends[state] else (allowed(even), allowed(odd)) for state, (even, odd) in enumerate(children)]


def _components(following: Sequence[Sequence[int]]) -> list[int]:
    """Return a number of the strongly connected component of every state (Kosaraju's two searches)."""
    finished: list[int] = []
    seen = [False] * len(following)
    backward: list[list[int]] = [[] for _ in following]
    for root, targets in enumerate(following):
        for target in targets:
            if target >= 0:
                backward[target].append(root)
    for root in range(len(following)):
        stack = [] if seen[root] else [(root, 0)]
        seen[root] = True
        while stack:
            state, edge = stack.pop()
            if edge == len(following[state]):
                finished.append(state)
                continue
            stack.append((state, edge + 1))
            target = following[state][edge]
            if target >= 0 and not seen[target]:
                seen[target] = True
                stack.append((target, 0))
    component = [-1] * len(following)
    for root in reversed(finished):
        stack_of_states = [root] if component[root] < 0 else []
        while stack_of_states:
            state = stack_of_states.pop()
            component[state] = root
            stack_of_states += [source for source in backward[state] if component[source] < 0]
    return component
