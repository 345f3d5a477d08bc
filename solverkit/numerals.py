"""Integers and ranges as people write them, and as JSON carries them."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from solverkit.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["MAX_DIGITS", "Span", "json_integer", "parse_integer", "parse_span"]

#: Integers of a window have at most this many decimal digits (Python's own text conversion ends at 4,300).
MAX_DIGITS = 4000
_LIMIT = 10**MAX_DIGITS
_EXACT_IN_JSON = 2**53

_PLAIN = re.compile(r"[+-]?[0-9]+(?:_[0-9]+)*")
_POWER = re.compile(r"(-?)([0-9]+)\^([0-9]+)([+-][0-9]+)?")
_INTEGER_FORM = "an integer such as 12, -5 or 2^71"


def parse_integer(value: object, field: str, low: int | None = None, high: int | None = None) -> int:
    """Return the integer that ``value`` writes: an int, decimal digits, or a power such as ``2^71`` or ``2^71-1``.

    Args:
        value: an int, or a text.
        field: the name that an error message gives.
        low: least allowed value, or None.
        high: largest allowed value, or None.

    Raises:
        InputError: not an integer, over 4,000 digits, or outside ``low`` … ``high``.
    """
    number = _read_integer(value, field)
    if (low is not None and number < low) or (high is not None and number > high):
        at_least = "" if low is None else f" of at least {low}"
        at_most = "" if high is None else f"{' and' if at_least else ' of'} at most {_short(high)}"
        raise InputError(field, value, f"an integer{at_least}{at_most}")
    return number


def _short(number: int) -> str:
    digits = len(str(number))
    return f"10^{digits - 1}" if digits > 7 and number == 10 ** (digits - 1) else str(number)


def _read_integer(value: object, field: str) -> int:
    if isinstance(value, int) and not isinstance(value, bool):
        if abs(value) >= _LIMIT:
            raise InputError(field, "a huge integer", f"an integer of at most {MAX_DIGITS} digits")
        return value
    if isinstance(value, str):
        text = value.strip()
        if len(text) > MAX_DIGITS:
            raise InputError(field, text, f"an integer of at most {MAX_DIGITS} digits")
        if _PLAIN.fullmatch(text):
            return int(text)
        if power := _POWER.fullmatch(text):
            minus, base, exponent, rest = power.groups()
            root, height = int(base), int(exponent)
            if root > 1 and height * (root.bit_length() - 1) >= _LIMIT.bit_length():
                raise InputError(field, value, f"an integer of at most {MAX_DIGITS} digits")
            result: int = root**height if root > 1 else root ** min(height, 1)
            result = -result if minus else result
            result += int(rest or 0)
            if abs(result) >= _LIMIT:
                raise InputError(field, value, f"an integer of at most {MAX_DIGITS} digits")
            return result
    raise InputError(field, value, _INTEGER_FORM)


@dataclass(frozen=True, slots=True, order=True)
class Span:
    """The integers from ``low`` to ``high``, both included.

    Raises:
        InputError: ``low`` above ``high``.
    """

    low: int
    high: int

    def __post_init__(self) -> None:
        if self.low > self.high:
            raise InputError("range", str(self), "a range A..B with A at most B")

    def __contains__(self, value: int) -> bool:
        return self.low <= value <= self.high

    def __iter__(self) -> Iterator[int]:
        return iter(range(self.low, self.high + 1))

    def __len__(self) -> int:
        return self.high - self.low + 1

    def __str__(self) -> str:
        return str(self.low) if self.low == self.high else f"{self.low}..{self.high}"


def parse_span(value: object, field: str, low: int | None = None, high: int | None = None) -> Span:
    """Return the range that ``value`` writes: ``A..B`` with both ends included, or one integer.

    Raises:
        InputError: neither form, a reversed range, or an end outside ``low`` … ``high``.
    """
    form = "an integer or a range A..B with both ends included"
    if isinstance(value, str) and ".." in value:
        parts = value.split("..")
        if len(parts) != 2 or not all(part.strip() for part in parts):
            raise InputError(field, value, form)
        first, last = (parse_integer(part, field, low, high) for part in parts)
        if first > last:
            raise InputError(field, value, "a range A..B with A at most B")
        return Span(first, last)
    if not isinstance(value, str) and (isinstance(value, bool) or not isinstance(value, int)):
        raise InputError(field, value, form)
    number = parse_integer(value, field, low, high)
    return Span(number, number)


def json_integer(number: int) -> int | str:
    """Return ``number`` as JSON carries it exactly: a number up to 2^53, a text of decimal digits beyond."""
    return number if abs(number) <= _EXACT_IN_JSON else str(number)
