"""Integers, fractions and rigorous enclosures only: nothing here is decided by a floating-point number."""
