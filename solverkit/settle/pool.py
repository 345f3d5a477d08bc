"""Running pieces of work on an executor, a bounded number in flight, and going on when a worker dies."""

from __future__ import annotations

import os
import signal
import time
from collections import deque
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import suppress
from dataclasses import dataclass
from multiprocessing import get_context
from typing import TYPE_CHECKING, TypeVar

from solverkit.errors import InputError, MissingPartError, SolverkitError
from solverkit.methods import Budget, Piece, PieceResult
from solverkit.settle.choice import method_named

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator

__all__ = ["Order", "SerialExecutor", "executor", "run_orders", "usable_cores"]

_Result = TypeVar("_Result")
_TRIES = 3


@dataclass(frozen=True, slots=True)
class Order:
    """Pieces that go to a worker together, because each alone would be shorter than the way there.

    Args:
        pieces: with the budget of each.
        tries: how many workers have died over it.
    """

    pieces: tuple[tuple[Piece, Budget], ...]
    tries: int = 0


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


class SerialExecutor(Executor):
    """An executor that runs each call where it is submitted; for windows too small to be worth a second process."""

    def submit(self, fn: Callable[..., _Result], /, *args: object, **kwargs: object) -> Future[_Result]:
        """Run ``fn`` now and return its finished future."""
        future: Future[_Result] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as problem:  # noqa: BLE001 - a future carries whatever the call raised
            future.set_exception(problem)
        return future


def _begin_worker() -> None:
    from solverkit.solvers._isolation import die_with_parent  # noqa: PLC0415 - only in workers

    die_with_parent()
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def executor(jobs: int, cluster: str | None = None) -> Executor:
    """Return an executor: the calling process for one job, a process pool, or a Dask scheduler.

    Args:
        jobs: number of processes.
        cluster: address of a running Dask scheduler, or None.

    Raises:
        MissingPartError: ``cluster`` without dask.distributed.
        InputError: nothing answers at the address.
    """
    if cluster is not None:
        try:
            from distributed import Client  # noqa: PLC0415 - an optional part
        except ImportError:
            raise MissingPartError("dask.distributed", 'install it with: pip install "solverkit[cluster]"') from None
        try:
            result: Executor = Client(cluster).get_executor(pure=False)
        except (OSError, ValueError, TypeError) as problem:
            raise InputError("--cluster", cluster, f"the address of a running Dask scheduler ({problem})") from problem
        return result
    if jobs <= 1:
        return SerialExecutor()
    return ProcessPoolExecutor(jobs, mp_context=get_context("spawn"), initializer=_begin_worker)


def run_order(order: Order) -> list[PieceResult]:
    """Run the pieces of an order one after another; a piece that fails is an incomplete result with the reason."""
    results = []
    for piece, budget in order.pieces:
        begun = time.perf_counter()
        try:
            results.append(method_named(piece.method).run(piece, budget))
        except MemoryError:
            results.append(_failed(piece, "the memory limit was reached", begun))
        except SolverkitError as problem:
            results.append(_failed(piece, f"{type(problem).__name__}: {problem}", begun))
    return results


def _failed(piece: Piece, reason: str, begun: float) -> PieceResult:
    return PieceResult(piece, (), complete=False, reason=reason, seconds=time.perf_counter() - begun)


def run_orders(orders: Iterable[Order], make: Callable[[], Executor], in_flight: int) -> Iterator[list[PieceResult]]:
    """Yield the results of the orders as they come.

    Args:
        orders: taken one by one as room comes free.
        make: returns a new executor; called again when the workers of the last one died.
        in_flight: at most so many orders submitted at once.

    An order whose worker died goes to a new worker, at most three times; then its pieces are incomplete.
    """
    waiting: deque[Order] = deque()
    source = iter(orders)
    running: dict[Future[list[PieceResult]], Order] = {}
    pool = make()
    try:
        while True:
            while len(running) < in_flight:
                order = waiting.popleft() if waiting else next(source, None)
                if order is None:
                    break
                try:
                    running[pool.submit(run_order, order)] = order
                except BrokenProcessPool:
                    waiting.appendleft(order)
                    pool = _renewed(pool, make)
            if not running:
                return
            finished, _ = wait(running, return_when=FIRST_COMPLETED)
            broken = False
            for future in finished:
                order = running.pop(future)
                problem = future.exception()
                if problem is None:
                    yield future.result()
                    continue
                broken = broken or isinstance(problem, BrokenProcessPool)
                again = Order(order.pieces, order.tries + 1)
                if again.tries < _TRIES:
                    waiting.append(again)
                else:
                    reason = f"its worker failed three times ({type(problem).__name__}: {problem})"
                    yield [_failed(piece, reason, time.perf_counter()) for piece, _ in order.pieces]
            if broken:
                pool = _renewed(pool, make)
    finally:
        for future in running:
            future.cancel()
        _end(pool)


def _renewed(pool: Executor, make: Callable[[], Executor]) -> Executor:
    _end(pool)
    return make()


def _end(pool: Executor) -> None:
    if isinstance(pool, ProcessPoolExecutor):
        # A worker inside native code would be waited for; its piece is not on record and runs again next time.
        for process in list((getattr(pool, "_processes", None) or {}).values()):
            with suppress(OSError, ValueError):
                process.terminate()
        pool.shutdown(wait=False, cancel_futures=True)
    else:
        pool.shutdown(wait=False)
