"""Arithmetic methods: one file each, with its compiled kernels beside it. A module offers itself as ``ENGINE``."""
