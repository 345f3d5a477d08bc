"""Finding the parts of a room: one file each, or an entry point of an outside package."""

from __future__ import annotations

import importlib
import pkgutil
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import entry_points
from itertools import pairwise
from typing import Any

from solverkit.errors import ContradictionError, InputError, MissingPartError

__all__ = ["ROOMS", "Part", "load", "parts"]

#: Room name -> (package that is scanned, attribute that a module of it offers).
ROOMS = {
    "engines": ("solverkit.engines", "ENGINE"),
    "encodings": ("cycle_encodings", "ENCODING"),
    "solvers": ("solverkit.solvers", "BACK_ENDS"),
}


@dataclass(frozen=True, slots=True)
class Part:
    """One part of a room.

    Args:
        room: name of the room.
        name: name of the part.
        origin: module that offers it.
        value: the part itself, or None when it is broken.
        problem: why it can't be used, or empty.
    """

    room: str
    name: str
    origin: str
    value: Any
    problem: str = ""


@lru_cache
def parts(room: str) -> tuple[Part, ...]:
    """Return the parts of ``room`` sorted by name, broken ones included.

    Raises:
        ContradictionError: two parts have the same name.
    """
    package, attribute = ROOMS[room]
    found: list[Part] = []
    for info in pkgutil.iter_modules(importlib.import_module(package).__path__):
        if not info.name.startswith("_"):
            found.extend(_offered(room, f"{package}.{info.name}", attribute, info.name))
    for point in entry_points(group=f"solverkit.{room}"):
        module, _, name = point.value.partition(":")
        found.extend(_offered(room, module, name or attribute, point.name))
    found.sort(key=lambda part: part.name)
    for one, two in pairwise(found):
        if one.name == two.name:
            raise ContradictionError(f"{room}: {one.origin} and {two.origin} both offer the name {one.name}")
    return tuple(found)


def _offered(room: str, module: str, attribute: str, fallback: str) -> list[Part]:
    try:
        content = getattr(importlib.import_module(module), attribute, None)
        if content is None:
            return []
        values = content() if callable(content) and not hasattr(content, "name") else content
        each = values if isinstance(values, (tuple, list)) else (values,)
        return [Part(room, value.name, module, value) for value in each]
    except MemoryError:
        raise
    except Exception as problem:  # noqa: BLE001 - whatever an outside module raises, the others must stay usable
        return [Part(room, fallback, module, None, f"{type(problem).__name__}: {problem}")]


def load(room: str, name: str) -> Any:  # noqa: ANN401 - a part may be of any class that keeps the room's contract
    """Return the part ``name`` of ``room``.

    Raises:
        InputError: no such part.
        MissingPartError: the part is there but broken.
    """
    there = {part.name: part for part in parts(room)}
    if name not in there:
        raise InputError(room.removesuffix("s"), name, "one of " + ", ".join(there))
    part = there[name]
    if part.problem:
        raise MissingPartError(f"{room.removesuffix('s')} {name}", f"importing {part.origin} failed: {part.problem}")
    return part.value
