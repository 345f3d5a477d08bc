"""Windows from TOML files and from command line options, and back to plain values.

Both come in as a table of plain values with the keys of a window file; every complaint names the key or the option.
"""

from __future__ import annotations

import hashlib
import json
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from itertools import groupby
from pathlib import Path
from typing import Any

from solverkit.errors import InputError
from solverkit.maps import Map
from solverkit.numerals import Span, json_integer, parse_integer, parse_span
from solverkit.shape import Shape, shape_from_table, shape_table
from solverkit.window import MAX_LENGTH, MAX_MAPS, Assumption, Sign, Window

__all__ = ["map_option", "read_window", "window_digest", "window_from_table", "window_table"]

_MOST_BYTES = 4 * 2**20
_SIGNS = {
    "positive": (Sign.POSITIVE,),
    "negative": (Sign.NEGATIVE,),
    "both": (Sign.POSITIVE, Sign.NEGATIVE),
}
_KEYS = {
    "": ("title", "map", "cycle", "assume", "shape"),
    "map": ("multiplier", "offsets", "offsets_at_most"),
    "cycle": ("lengths", "odd_steps", "above", "sign", "primitive"),
    "assume": ("no_cycle_below", "source"),
}
#: Key of a window file -> the option that means the same.
_OPTIONS = {
    "map": "--map",
    "map.offsets_at_most": "--offsets-at-most",
    "cycle.lengths": "--lengths",
    "cycle.odd_steps": "--odd",
    "cycle.above": "--above",
    "cycle.sign": "--sign",
    "cycle.primitive": "--primitive",
}


def read_window(path: Path) -> dict[str, Any]:
    """Return the table that a window file holds; it is not yet checked beyond being TOML.

    Raises:
        InputError: the file can't be read, is over 4 MiB, or is no TOML.
    """
    try:
        size = path.stat().st_size
        if size > _MOST_BYTES:
            raise InputError("window file", f"{path} with {size} bytes", f"at most {_MOST_BYTES} bytes")
        text = path.read_bytes().decode("utf-8")
    except OSError as problem:
        raise InputError("window file", str(path), f"a file that can be read ({problem.strerror})") from None
    except UnicodeDecodeError:
        raise InputError("window file", str(path), "TOML, which is UTF-8 text") from None
    try:
        return tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as problem:
        detail = " ".join(str(problem).split())
        raise InputError("window file", str(path), f"valid TOML ({detail})") from None


def window_from_table(table: Mapping[str, Any], overrides: Mapping[str, Any] | None = None) -> Window:
    """Return the window that a table states.

    Args:
        table: with the keys of a window file.
        overrides: values of options by dotted key, such as ``cycle.lengths``; ``map`` holds the texts of ``--map``.

    Raises:
        InputError: an unknown key, a missing one, or a value that is not allowed; the message names it.
    """
    given = dict(overrides or {})
    named = {key: _OPTIONS.get(key, key) if key in given else key for key in _OPTIONS}
    _only_known(table, "")
    cycle = _subtable(table, "cycle")
    if "map.offsets_at_most" in given and not any("any" in map_option(text)[1] for text in given.get("map", ())):
        raise InputError(_OPTIONS["map.offsets_at_most"], given["map.offsets_at_most"], "this only beside --map Q,any")
    values = {f"cycle.{key}": value for key, value in cycle.items()} | given
    lengths = values.get("cycle.lengths")
    if lengths is None:
        raise InputError("lengths", "nothing", "--lengths A..B or the key cycle.lengths")
    odd = values.get("cycle.odd_steps", "any")
    sign = values.get("cycle.sign", "positive")
    if not isinstance(sign, str) or sign not in _SIGNS:
        raise InputError(named["cycle.sign"], sign, "positive, negative or both")
    return Window(
        maps=_maps_of_options(given["map"], given.get("map.offsets_at_most"))
        if "map" in given
        else _maps_of_table(table),
        lengths=parse_span(lengths, named["cycle.lengths"], 1, MAX_LENGTH),
        odd=None if odd == "any" else parse_span(odd, named["cycle.odd_steps"], 1, MAX_LENGTH),
        above=parse_integer(values.get("cycle.above", 0), named["cycle.above"], 0),
        signs=_SIGNS[sign],
        primitive=_boolean(values.get("cycle.primitive", False), named["cycle.primitive"]),
        assumption=_assumption(table),
        shape=_shape(table),
        title=_text(table.get("title", ""), "title"),
    )


def _only_known(table: Mapping[str, Any], name: str) -> None:
    for key in table:
        if key not in _KEYS[name]:
            where = f"{name}.{key}" if name else key
            raise InputError(where, "an unknown key", "one of " + ", ".join(_KEYS[name]))


def _subtable(table: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    value = table.get(name, {})
    if not isinstance(value, Mapping):
        raise InputError(name, value, f"a table [{name}] with the keys {', '.join(_KEYS[name])}")
    _only_known(value, name)
    return value


def _boolean(value: object, field: str) -> bool:
    if not isinstance(value, bool):
        raise InputError(field, value, "true or false")
    return value


def _text(value: object, field: str) -> str:
    if not isinstance(value, str):
        raise InputError(field, value, "a text")
    return value


def _maps_of_table(table: Mapping[str, Any]) -> tuple[Map, ...]:
    stated = table.get("map")
    if stated is None:
        raise InputError("map", "nothing", "--map Q,D or a table [map] with multiplier and offsets")
    maps: list[Map] = []
    for each in stated if isinstance(stated, list) else [stated]:
        if not isinstance(each, Mapping):
            raise InputError("map", each, "a table [map] with the keys multiplier, offsets")
        _only_known(each, "map")
        for key in ("multiplier", "offsets"):
            if key not in each:
                raise InputError(f"map.{key}", "nothing", "this key; a map has multiplier and offsets")
        offsets = each["offsets"]
        parts = offsets if isinstance(offsets, list) else [offsets]
        parts = _without_any(parts, each.get("offsets_at_most"), "map.offsets_at_most")
        maps += _maps(each["multiplier"], parts, "map.multiplier", "map.offsets")
    return _without_repeats(maps)


def map_option(text: str) -> tuple[str, list[str]]:
    """Return multiplier and offsets of one ``--map Q,D``, D being a list of numbers and ranges."""
    multiplier, comma, rest = text.partition(",")
    parts = rest.split(",")
    if not comma or not all(part.strip() for part in (multiplier, *parts)):
        raise InputError("--map", text, "Q,D such as 3,1 or 3,-5 or 3,5..49 or 5,1,3,7..21 or 3,any")
    return multiplier, parts


def _without_any(parts: list[Any], at_most: object, field: str) -> list[Any]:
    """Replace ``any`` by the range of all offsets of either sign up to a bound, which must then be given."""
    if "any" not in parts:
        if at_most is not None:
            raise InputError(field, at_most, "this only beside the offsets any")
        return parts
    if at_most is None:
        raise InputError(field, "nothing", "an integer N: the offsets any are those with |d| at most N")
    top = parse_integer(at_most, field, 1, MAX_MAPS)
    return [f"-{top}..{top}" if part == "any" else part for part in parts]


def _maps_of_options(texts: Iterable[str], at_most: object) -> tuple[Map, ...]:
    maps: list[Map] = []
    for text in texts:
        multiplier, parts = map_option(text)
        parts = _without_any(list(parts), at_most if "any" in parts else None, _OPTIONS["map.offsets_at_most"])
        maps += _maps(multiplier, parts, "--map multiplier", "--map offset")
    return _without_repeats(maps)


def _maps(multiplier: object, offsets: Sequence[object], field: str, offset_field: str) -> list[Map]:
    q = parse_integer(multiplier, field, 3)
    if q % 2 == 0:
        raise InputError(field, multiplier, "an odd integer of at least 3")
    if not offsets:
        raise InputError(offset_field, "an empty list", "at least one odd integer or range")
    maps: list[Map] = []
    for part in offsets:
        if isinstance(part, str) and ".." in part:
            span = parse_span(part, offset_field)
            first, last = span.low + (span.low + 1) % 2, span.high - (span.high + 1) % 2
            if first > last:
                raise InputError(offset_field, part, "a range that holds an odd integer")
            if (last - first) // 2 >= MAX_MAPS:
                raise InputError(offset_field, part, f"at most {MAX_MAPS} offsets")
            maps += [Map(q, d) for d in range(first, last + 1, 2)]
        else:
            d = parse_integer(part, offset_field)
            if d % 2 == 0:
                raise InputError(
                    offset_field, part, "an odd integer, positive or negative; even ones may only lie in a range"
                )
            maps.append(Map(q, d))
    return maps


def _without_repeats(maps: Sequence[Map]) -> tuple[Map, ...]:
    return tuple(dict.fromkeys(maps))


def _assumption(table: Mapping[str, Any]) -> Assumption | None:
    if "assume" not in table:
        return None
    stated = _subtable(table, "assume")
    for key in _KEYS["assume"]:
        if key not in stated:
            raise InputError(f"assume.{key}", "nothing", "this key; an assumption has no_cycle_below and source")
    return Assumption(
        parse_integer(stated["no_cycle_below"], "assume.no_cycle_below", 1), _text(stated["source"], "assume.source")
    )


def _shape(table: Mapping[str, Any]) -> Shape | None:
    if "shape" not in table:
        return None
    stated = table["shape"]
    if not isinstance(stated, Mapping):
        raise InputError("shape", stated, "a table [shape] of side conditions")
    return shape_from_table(stated) if stated else None


def _offset_parts(offsets: list[int]) -> list[int | str]:
    """Return ascending odd integers as integers and ranges."""
    parts: list[int | str] = []
    for _, run in groupby(enumerate(offsets), key=lambda pair: pair[1] - 2 * pair[0]):
        values = [offset for _, offset in run]
        parts += [str(Span(values[0], values[-1]))] if len(values) > 2 else [json_integer(value) for value in values]
    return parts


def window_table(window: Window) -> dict[str, Any]:
    """Return the window as plain values with the keys of a window file; reading them gives the same window."""
    maps = [
        {"multiplier": json_integer(multiplier), "offsets": _offset_parts(sorted(each.offset for each in run))}
        for multiplier, run in groupby(sorted(window.maps), key=lambda each: each.multiplier)
    ]
    signs = next(name for name, signs in _SIGNS.items() if set(signs) == set(window.signs))
    table: dict[str, Any] = {
        "title": window.title,
        "map": maps,
        "cycle": {
            "lengths": str(window.lengths),
            "odd_steps": "any" if window.odd is None else str(window.odd),
            "above": json_integer(window.above),
            "sign": signs,
            "primitive": window.primitive,
        },
    }
    if window.assumption is not None:
        table["assume"] = {
            "no_cycle_below": json_integer(window.assumption.no_cycle_below),
            "source": window.assumption.source,
        }
    if window.shape is not None:
        table["shape"] = shape_table(window.shape)
    return table


def window_digest(window: Window) -> str:
    """Return the SHA-256 of what the window asks; its title does not count."""
    table = {key: value for key, value in window_table(window).items() if key != "title"}
    return hashlib.sha256(json.dumps(table, sort_keys=True, ensure_ascii=True).encode("ascii")).hexdigest()
