"""Residues mod 2^m: the transition graph, its closed walks, and the sieve of least elements."""
