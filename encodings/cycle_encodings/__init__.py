"""Encodings of cells as formulas: one strategy a file, each a pure function of the cell and its options."""
