"""Settle windows of cycles of 3x+1-like maps, with evidence.

A *map* (q, d) sends n to n/2 when n is even and to (q·n + d)/2 when n is odd. A *window* names maps, cycle
lengths, counts of odd steps and a lower bound; settling it lists every cycle inside or establishes that there is
none. Symbols are those of the glossary in DEVELOPERS.md.
"""

__version__ = "0.1.0"
