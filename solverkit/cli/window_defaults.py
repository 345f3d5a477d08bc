"""Commands that can do without part of a window, because another option says it."""

from __future__ import annotations

import functools
import inspect
from typing import TYPE_CHECKING, Any

from solverkit.cli.window_options import takes_window

if TYPE_CHECKING:
    from collections.abc import Callable

__all__ = ["lengths_from", "window_unless"]


def lengths_from(option: str, lengths: Callable[[str], str]) -> Callable[[Callable[..., Any]], Callable[..., Any]]:
    """Give a command that `takes_window` the lengths that ``option`` implies, when no other option states them.

    Args:
        option: parameter of the command.
        lengths: its value -> the lengths, as ``--lengths`` takes them.
    """

    def decorated(command: Callable[..., Any]) -> Callable[..., Any]:
        def wrapper(**given: Any) -> Any:  # noqa: ANN401
            if given.get("window_file") is None and given.get("lengths") is None:
                given["lengths"] = lengths(given[option])
            return command(**given)

        return _like(command, wrapper)

    return decorated


def window_unless(option: str) -> Callable[[Callable[..., Any]], Callable[..., Any]]:
    """Give ``command(window, …)`` the options of a window, and None for it where ``option`` stands in its place.

    Args:
        option: parameter of the command that replaces a window; the window counts as given with any of its options.
    """

    def decorated(command: Callable[..., Any]) -> Callable[..., Any]:
        windowed = takes_window(command)
        own = list(inspect.signature(command).parameters)[1:]

        def wrapper(**given: Any) -> Any:  # noqa: ANN401
            stated = any(value is not None for key, value in given.items() if key not in own)
            if given.get(option) is not None and not stated:
                return command(None, **{key: given[key] for key in own})
            return windowed(**given)

        return _like(windowed, wrapper)

    return decorated


def _like(command: Callable[..., Any], wrapper: Callable[..., Any]) -> Callable[..., Any]:
    result = functools.wraps(command)(wrapper)
    result.__signature__ = inspect.signature(command)  # type: ignore[attr-defined]
    result.__annotations__ = command.__annotations__
    del result.__wrapped__
    return result
