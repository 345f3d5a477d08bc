"""How fast this machine is, method by method, compared with the one the cost models were measured on.

A method's estimate is a formula with constants from one machine. Timing each method once on a cell of less than half
a second gives a factor that carries the formula over. Factors are kept in a file of the user's cache folder, named
after the machine and the versions that matter; without such a file, and for short work, the factor is 1.
"""

from __future__ import annotations

import hashlib
import json
import os
import platform
import time
from contextlib import suppress
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING

from solverkit import __version__
from solverkit.methods import Budget
from solverkit.window import Cell

if TYPE_CHECKING:
    from collections.abc import Mapping

    from solverkit.methods import Method

__all__ = ["calibrated", "factors", "measure"]

# Cells that take a tenth to half a second on the machine of the cost models.
_PROBES = {
    "sweep": Cell(3, 1, 125743, 79335),
    "matching": Cell(3, 1, 62, 39),
    "tally": Cell(3, (2**80 - 3**50) // (13 * 36791), 80, 50),
    "census": Cell(3, 1, 33, 20),
    "cnf:composed@glucose4": Cell(3, 425, 59, 37),
}
_LEAST, _MOST = 0.125, 8.0


def _path() -> Path:
    base = os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    machine = [
        platform.node(),
        platform.machine(),
        platform.processor(),
        str(os.cpu_count()),
        platform.python_version(),
    ]
    libraries = [__version__, version("numba"), version("python-sat")]
    name = hashlib.sha256("\n".join(machine + libraries).encode()).hexdigest()[:16]
    return Path(base) / "solverkit" / f"speed-{name}.json"


_known: dict[str, float] = {}


def factors() -> Mapping[str, float]:
    """Return method name -> factor on its estimates, as measured by this process or an earlier one; empty without."""
    if not _known:
        _known.update(_kept())
    return _known


def _kept() -> dict[str, float]:
    with suppress(OSError, ValueError, TypeError, AttributeError, RuntimeError):
        kept = json.loads(_path().read_text(encoding="utf-8"))
        return {str(name): _clipped(float(factor)) for name, factor in kept.items()}
    return {}


def _clipped(factor: float) -> float:
    return min(_MOST, max(_LEAST, factor))


def measure(methods: tuple[Method, ...]) -> Mapping[str, float]:
    """Time every method on its probe, keep the factors, and return them. Under 2 s once the kernels are compiled.

    A slow first run is repeated, since it may have compiled. A folder that can't be written costs the file only.
    """
    found: dict[str, float] = {}
    for method in methods:
        cell = _PROBES.get(method.name)
        if cell is None or method.refusal(cell) is not None:
            continue
        batch = method.batches([cell])[0]
        expected = method.estimate(batch)
        best = _seconds(method, batch)
        if best > 1.5 * expected:
            best = min(best, _seconds(method, batch))
        if expected > 0:
            found[method.name] = _clipped(best / expected)
    with suppress(OSError, RuntimeError):
        path = _path()
        path.parent.mkdir(parents=True, exist_ok=True)
        partial = path.with_suffix(f".{os.getpid()}")
        partial.write_text(json.dumps(found), encoding="utf-8")
        partial.replace(path)
    _known.clear()
    _known.update(found or {"none": 1.0})
    return _known


def _seconds(method: Method, batch: tuple[Cell, ...]) -> float:
    begun = time.perf_counter()
    for piece in method.pieces(batch, 3600.0):
        method.run(piece, Budget())
    return time.perf_counter() - begun


def calibrated(method: Method, cells: tuple[Cell, ...]) -> float:
    """Return the estimate of ``method`` for ``cells`` in seconds on one core of this machine."""
    return method.estimate(cells) * factors().get(method.name, 1.0)
