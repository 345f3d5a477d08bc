"""A solver in a process of its own, so that a time limit is a time limit and a crash costs one cell.

Native solvers can't be interrupted from Python, overrun their own limits and may end the process. The child serves one
request after another; the parent waits no longer than the deadline, then kills it and starts another when needed.
"""

from __future__ import annotations

import contextlib
import ctypes
import multiprocessing
import os
import resource
import signal
import sys
import time
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Any

from solverkit.registry import load

if TYPE_CHECKING:
    from multiprocessing.connection import Connection
    from multiprocessing.process import BaseProcess

    from solverkit.window import Cell

__all__ = ["Answer", "Ending", "SolverProcess", "become_solver_child", "die_with_parent"]

_PR_SET_PDEATHSIG = 1


def die_with_parent() -> None:
    """Have the kernel kill this process when its parent ends; only Linux can."""
    if sys.platform == "linux":
        ctypes.CDLL(None, use_errno=True).prctl(_PR_SET_PDEATHSIG, signal.SIGKILL)


def become_solver_child() -> None:
    """Make this process one that serves solvers: it ends with its parent, leaves Ctrl-C to it, and prints nothing."""
    die_with_parent()
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    # Native code writes notes to standard output, where the caller may be printing JSON.
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 1)
    os.close(nowhere)


class Ending(StrEnum):
    """How a request ended: all cycles listed, out of time, "infeasible" without a proof, or otherwise."""

    COMPLETE = "complete"
    LIMIT = "limit"
    INEXACT = "inexact"
    FAILED = "failed"


@dataclass(frozen=True, slots=True)
class Answer:
    """What one request gave.

    Args:
        least: least elements found, in the order the solver found them.
        ending: how it ended.
        reason: why the list is not complete, or empty.
        statistics: sizes and times, as far as they are known.
    """

    least: tuple[int, ...]
    ending: Ending
    reason: str
    statistics: dict[str, int | float | str]

    @property
    def complete(self) -> bool:
        """Whether the formula had no further model."""
        return self.ending is Ending.COMPLETE


class SolverProcess:
    """The parent's end of a child process that encodes and solves cells."""

    def __init__(self) -> None:
        self._process: BaseProcess | None = None
        self._pipe: Connection | None = None

    def answer(self, cell: Cell, encoding: str, solver: str, seconds: float | None, memory: int | None) -> Answer:
        """Encode ``cell``, list its cycles and return what came out by the deadline.

        Args:
            cell: of positive elements.
            encoding: name of an encoding.
            solver: name of a back end.
            seconds: time limit, None for none.
            memory: limit of the child's address space in bytes, None for none.
        """
        pipe = self._started()
        least: list[int] = []
        statistics: dict[str, Any] = {}

        def ended(ending: Ending, reason: str = "") -> Answer:
            return Answer(tuple(least), ending, reason, statistics)

        deadline = None if seconds is None else time.monotonic() + seconds
        try:
            pipe.send((cell, encoding, solver, memory))
            while True:
                left = None if deadline is None else max(0.0, deadline - time.monotonic())
                if not pipe.poll(left):
                    self.close()
                    return ended(Ending.LIMIT, f"no answer within {seconds:g} s")
                kind, content = pipe.recv()
                if kind == "least":
                    least.append(content)
                elif kind == "encoded":
                    statistics |= content
                elif kind == "done":
                    statistics |= content
                    return ended(Ending.COMPLETE)
                elif kind == "inexact":
                    statistics |= content
                    return ended(Ending.INEXACT, "infeasible in floating-point arithmetic, which proves nothing")
                else:
                    self.close()
                    return ended(Ending.FAILED, content)
        except (EOFError, ConnectionError):
            code = self._exit_code()
            self.close()
            return ended(Ending.FAILED, f"the solver process ended with status {code}")

    def _started(self) -> Connection:
        if self._pipe is None or self._process is None or not self._process.is_alive():
            self.close()
            context = multiprocessing.get_context("spawn")
            ours, theirs = context.Pipe()
            process = context.Process(target=_serve, args=(theirs,), daemon=True)
            # Ctrl-C may come while it starts; `close` then has nothing to end.
            process.start()
            self._process, self._pipe = process, ours
            theirs.close()
        return self._pipe

    def _exit_code(self) -> int | None:
        if self._process is None:
            return None
        self._process.join(1)
        return self._process.exitcode

    def close(self) -> None:
        """End the child, whatever it is doing."""
        if self._process is not None:
            self._process.kill()
            self._process.join()
            self._process.close()
        if self._pipe is not None:
            self._pipe.close()
        self._process = self._pipe = None


def _serve(pipe: Connection) -> None:
    become_solver_child()
    with contextlib.suppress(EOFError, BrokenPipeError, ConnectionResetError):
        while True:
            cell, encoding, solver, memory = pipe.recv()
            try:
                _limit_memory(memory)
                _solve(pipe, cell, encoding, solver)
            except MemoryError:
                pipe.send(("failed", "the memory limit was reached"))
            except (EOFError, BrokenPipeError):
                raise
            except Exception as problem:  # noqa: BLE001 - any failure of a solver is an open cell
                pipe.send(("failed", f"{type(problem).__name__}: {problem}"))


def _limit_memory(memory: int | None) -> None:
    _, hard = resource.getrlimit(resource.RLIMIT_AS)
    resource.setrlimit(resource.RLIMIT_AS, (hard if memory is None else memory, hard))


def _solve(pipe: Connection, cell: Cell, encoding: str, solver: str) -> None:
    begun = time.perf_counter()
    formula = load("encodings", encoding).encode(cell)
    encoded = time.perf_counter()
    back_end = load("solvers", solver)
    sizes = {**formula.sizes(), "digest": formula.digest(), "encode_s": round(encoded - begun, 6)}
    pipe.send(("encoded", sizes | {"solver": back_end.version}))
    begun = time.perf_counter()
    for least in back_end.least_elements(formula):
        pipe.send(("least", least))
    spent = {"solve_s": round(time.perf_counter() - begun, 6)}
    pipe.send(("done" if back_end.abilities.exact else "inexact", spent))
