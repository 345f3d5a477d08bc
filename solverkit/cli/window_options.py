"""The options that state a window, shared by every command that takes one."""

from __future__ import annotations

import functools
import inspect
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit.window_file import read_window, window_from_table

if TYPE_CHECKING:
    from collections.abc import Callable

    from solverkit.window import Window

__all__ = ["takes_window"]

_PANEL = "The window"


def _option(*names: str, help: str, metavar: str | None = None) -> Any:  # noqa: A002, ANN401 - typer's own words
    return typer.Option(*names, help=help, metavar=metavar, rich_help_panel=_PANEL)


def _stated(
    window_file: Annotated[Path | None, typer.Argument(metavar="[WINDOW]", help="A window file (TOML).")] = None,
    maps: Annotated[
        list[str] | None,
        _option("--map", metavar="Q,D", help="A map; D may be a list or a range: 3,5..49 (repeatable)."),
    ] = None,
    offsets_at_most: Annotated[
        str | None,
        _option("--offsets-at-most", metavar="N", help="With --map Q,any: all odd offsets with |d| at most N."),
    ] = None,
    lengths: Annotated[str | None, _option("--lengths", metavar="A..B", help="Cycle lengths k.")] = None,
    odd: Annotated[str | None, _option("--odd", metavar="A..B", help="Numbers x of odd steps; any by default.")] = None,
    above: Annotated[
        str | None, _option("--above", metavar="B", help="Least elements above B in absolute value; also 2^71.")
    ] = None,
    sign: Annotated[str | None, _option("--sign", metavar="SIGN", help="positive (default), negative or both.")] = None,
    *,
    primitive: Annotated[
        bool | None, _option("--primitive/--any-gcd", help="Only cycles without a common factor with d.")
    ] = None,
) -> Window:
    table = {} if window_file is None else read_window(window_file)
    values = {
        "map": maps or None,
        "map.offsets_at_most": offsets_at_most,
        "cycle.lengths": lengths,
        "cycle.odd_steps": odd,
        "cycle.above": above,
        "cycle.sign": sign,
        "cycle.primitive": primitive,
    }
    return window_from_table(table, {key: value for key, value in values.items() if value is not None})


def takes_window(command: Callable[..., Any]) -> Callable[..., Any]:
    """Give ``command(window, …)`` the options of a window in place of its first parameter.

    Options beside a window file replace what the file says.
    """
    shared = list(inspect.signature(_stated, eval_str=True, locals={"Window": Any}).parameters.values())
    own = list(inspect.signature(command, eval_str=True, locals={"Window": Any}).parameters.values())[1:]

    @functools.wraps(command)
    def wrapper(**given: Any) -> Any:  # noqa: ANN401
        window = _stated(**{parameter.name: given.pop(parameter.name) for parameter in shared})
        return command(window, **given)

    parameters = [p.replace(kind=inspect.Parameter.KEYWORD_ONLY) for p in [*shared, *own]]
    wrapper.__signature__ = inspect.Signature(parameters)  # type: ignore[attr-defined]
    wrapper.__annotations__ = {p.name: p.annotation for p in parameters}
    del wrapper.__wrapped__
    return wrapper
