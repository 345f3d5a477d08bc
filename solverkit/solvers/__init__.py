"""Solver back ends: one file each, loaded only when used. A module offers its back ends as ``BACK_ENDS``."""
