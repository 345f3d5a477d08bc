"""Trials: encodings × solvers × cells, each run in a process of its own, timed, scored and checked."""
