"""The parts that this installation has."""

from __future__ import annotations

import inspect
import sys
from dataclasses import asdict
from importlib.metadata import PackageNotFoundError, version
from typing import Any

from solverkit import __version__
from solverkit.registry import ROOMS, Part, parts
from solverkit.settle.documents import SCHEMA

__all__ = ["catalog_document"]


def catalog_document() -> dict[str, Any]:
    """Return the encodings, solvers and engines with file, version and abilities; broken ones say what is wrong."""
    return {
        "schema": SCHEMA,
        "version": __version__,
        "python": sys.version.split()[0],
        "libraries": {name: _version(name) for name in ("python-sat", "python-flint", "numba", "networkx", "numpy")},
        **{room: [_entry(part) for part in parts(room)] for room in ROOMS},
    }


def _version(name: str) -> str | None:
    try:
        return version(name)
    except PackageNotFoundError:
        return None


def _entry(part: Part) -> dict[str, Any]:
    entry: dict[str, Any] = {"name": part.name, "file": _file(part.origin)}
    if part.problem:
        return entry | {"broken": part.problem}
    value = part.value
    if part.room == "engines":
        entry |= {"version": __version__, "family": value.family.value, "summary": _first_line(type(value))}
    elif part.room == "encodings":
        entry |= {"version": __version__, "form": value.form.value, "summary": value.summary}
    else:
        entry |= {"version": value.version, "kind": value.kind.value, **asdict(value.abilities)}
    return entry


def _file(module: str) -> str:
    loaded = sys.modules.get(module)
    path = getattr(loaded, "__file__", None) or ""
    return "/".join(path.split("/")[-len(module.split(".")) :]) or module


def _first_line(kind: type) -> str:
    return (inspect.getdoc(kind) or "").split("\n")[0]
