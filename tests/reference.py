"""The definitions made code, slow and plain: what everything else is compared with."""

from itertools import combinations

from solverkit.exact.bounds import balanced_bound
from solverkit.maps import Map


def cycles_of_cell(q, d, k, x, above=0):
    """Least elements of the cycles of positive elements, from every placement of the odd steps (cycle equation)."""
    determinant = 2**k - q**x
    found = set()
    for places in combinations(range(k), x):
        beta = sum(q ** (x - 1 - j) * 2**p for j, p in enumerate(places))
        n, remainder = divmod(d * beta, determinant)
        if remainder or n <= 0:
            continue
        orbit = Map(q, d).orbit(n, k)
        if orbit[-1] == n and len(set(orbit)) == k and min(orbit) > above:
            found.add(min(orbit))
    return sorted(found)


def cycles_by_iteration(q, d, top, longest):
    """(least, length, odd) of the cycles of positive elements met from starts 1 … top, length at most ``longest``."""
    found = set()
    for start in range(1, top + 1):
        n, seen, limit = start, {}, 1 << 200
        while n not in seen and 0 < n < limit:
            seen[n] = len(seen)
            n = n // 2 if n % 2 == 0 else (q * n + d) // 2
        if n in seen:
            cycle = [v for v, place in seen.items() if place >= seen[n]]
            if len(cycle) <= longest:
                found.add((min(cycle), len(cycle), sum(v % 2 for v in cycle)))
    return found


def conditions_met(cell, n):
    """Names of the condition groups that the orbit of n meets, by iterating the map; the map itself always."""
    orbit = Map(cell.multiplier, cell.offset).orbit(n, cell.length)
    holds = {
        "step": True,
        "closing": orbit[-1] == n,
        "odd count": sum(v % 2 for v in orbit[:-1]) == cell.odd,
        "order": all(v > n for v in orbit[1:-1]),
        "lower bound": n > cell.above,
        "upper bound": n <= balanced_bound(cell),
    }
    return {group for group, holding in holds.items() if holding}
