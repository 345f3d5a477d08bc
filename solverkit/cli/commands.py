"""The commands."""

from __future__ import annotations

import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit import __version__
from solverkit.cli.encode_command import encode
from solverkit.cli.explain_command import explain
from solverkit.cli.output import Format, FormatOption, print_json
from solverkit.cli.trial_command import trial
from solverkit.cli.window_options import takes_window
from solverkit.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable

    from solverkit.window import Window

__all__ = ["application"]

_app = typer.Typer(
    name="solverkit",
    help="Settle windows of cycles of the maps n/2, (q·n + d)/2: list every cycle, or establish that there is none.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    context_settings={"help_option_names": ["-h", "--help"]},
)


class Bound(StrEnum):
    """Which bound of the least element decides."""

    PRODUCT = "product"
    BALANCED = "balanced"


class Level(StrEnum):
    """Levels of evidence."""

    COMPUTED = "computed"
    CONFIRMED = "confirmed"
    PROVED = "proved"


#: No budget in seconds and no limit in GiB is larger.
_MOST = 1e9
_MOST_LISTED = 1_000_000


def application() -> Callable[..., Any]:
    """Return the command line as a callable."""
    return typer.main.get_command(_app)


def _version(value: bool) -> None:
    if value:
        print(f"solverkit {__version__}")
        raise typer.Exit


@_app.callback()
def _global(
    _version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and end.")
    ] = False,
) -> None:
    pass


@_app.command(epilog="Example: [bold]solverkit triage --map 3,-1 --lengths 1..100[/bold]")
@takes_window
def triage(
    window: Window,
    *,
    bound: Annotated[
        Bound, typer.Option("--bound", help="Upper bound of the least element that decides what is live.")
    ] = Bound.BALANCED,
    most: Annotated[
        int | None, typer.Option("--most", min=0, help="List at most N cells (default: 30 in text, 10000 in JSON).")
    ] = None,
    format: FormatOption = Format.TEXT,  # noqa: A002 - the option's own name
) -> int:
    """What arithmetic alone excludes; the live cells with bounds, chances, estimated cost and method."""
    from solverkit.settle.documents import triage_document  # noqa: PLC0415
    from solverkit.settle.forecasts import methods_for  # noqa: PLC0415
    from solverkit.settle.triage import Criterion  # noqa: PLC0415
    from solverkit.settle.triage import triage as examine  # noqa: PLC0415

    examined = examine(window, Criterion(bound.value))
    if format is Format.JSON:
        print_json(triage_document(examined, 10_000 if most is None else most, methods_for))
    else:
        from solverkit.cli.tables import print_triage  # noqa: PLC0415

        print_triage(examined, 30 if most is None else most)
    return 0


@_app.command(epilog="Example: [bold]solverkit settle --map 3,5..49 --lengths 1..40 --sign both[/bold]")
@takes_window
def settle(
    window: Window,
    *,
    dossier: Annotated[
        Path | None, typer.Option("--dossier", metavar="DIR", help="Folder of the dossier; continued when it is there.")
    ] = None,
    evidence: Annotated[
        Level | None, typer.Option("--evidence", help="Level to reach (default: confirmed where a second method fits).")
    ] = None,
    methods: Annotated[
        str | None, typer.Option("--methods", metavar="a,b", help="Methods to use on every cell; see catalog.")
    ] = None,
    jobs: Annotated[int | None, typer.Option("--jobs", min=1, help="Processes (default: the cores there are).")] = None,
    cluster: Annotated[
        str | None, typer.Option("--cluster", metavar="ADDRESS", help="A running Dask scheduler to work on.")
    ] = None,
    budget: Annotated[
        float | None, typer.Option("--budget", metavar="SECONDS", min=0, help="Time one method may spend on a cell.")
    ] = None,
    limit_memory: Annotated[
        float | None, typer.Option("--limit-memory", metavar="GiB", min=0, help="Memory one worker may use.")
    ] = None,
    list_at_most: Annotated[
        int,
        typer.Option(
            "--list-at-most", metavar="N", min=20, help="A cell with more cycles gives their number and a sample."
        ),
    ] = 10_000,
    all_cells: Annotated[bool, typer.Option("--all-cells", help="JSON also lists the excluded cells.")] = False,
    format: FormatOption = Format.TEXT,  # noqa: A002
) -> int:
    """Decide every live cell of a window; write a dossier, or continue one that a kill or Ctrl-C interrupted."""
    from solverkit.cli.progress import progress_bar  # noqa: PLC0415
    from solverkit.findings import Evidence  # noqa: PLC0415
    from solverkit.settle.choice import method_named  # noqa: PLC0415
    from solverkit.settle.documents import settle_document  # noqa: PLC0415
    from solverkit.settle.run import Settings, default_dossier  # noqa: PLC0415
    from solverkit.settle.run import settle as decide  # noqa: PLC0415
    from solverkit.settle.triage import count_cells  # noqa: PLC0415

    names = None if methods is None else tuple(method_named(name.strip()).name for name in methods.split(","))
    folder = dossier or default_dossier(window)
    for option, value in (("--budget", budget), ("--limit-memory", limit_memory)):
        if value is not None and not 0 < value < _MOST:
            raise InputError(option, value, f"a number above 0 and below {_MOST:g}")
    if all_cells and count_cells(window) > _MOST_LISTED:
        raise InputError("--all-cells", f"a window of {count_cells(window)} cells", f"at most {_MOST_LISTED} cells")
    settings = Settings(
        evidence=None if evidence is None else Evidence[evidence.name],
        methods=names,
        jobs=jobs,
        cluster=cluster,
        budget=budget,
        memory=None if limit_memory is None else round(limit_memory * 2**30),
        list_at_most=list_at_most,
    )
    try:
        with progress_bar() as progress:
            settlement = decide(window, folder, settings, progress)
    except KeyboardInterrupt:
        print(f"solverkit: interrupted; what is done is in {folder}, the same command continues it", file=sys.stderr)
        return 3
    if format is Format.JSON:
        print_json(settle_document(settlement, str(folder), all_cells=all_cells))
    else:
        from solverkit.cli.tables import print_settlement  # noqa: PLC0415

        print_settlement(settlement, folder)
    return settlement.exit_status


_app.command(epilog="Example: [bold]solverkit explain --map 3,1 --cell 24,15[/bold]")(explain)
_app.command(epilog="Example: [bold]solverkit encode --map 3,5 --cell 27,17 --to cell.cnf[/bold]")(encode)
_app.command(
    epilog="Example: [bold]solverkit trial --map 3,5 --lengths 20..30 --encodings orbit --solvers glucose4[/bold]"
)(trial)


@_app.command(epilog="Example: [bold]solverkit catalog --format json[/bold]")
def catalog(*, format: FormatOption = Format.TEXT) -> int:  # noqa: A002
    """The encodings, solvers and engines there are, with file, version and abilities."""
    from solverkit.settle.catalog import catalog_document  # noqa: PLC0415

    document = catalog_document()
    if format is Format.JSON:
        print_json(document)
    else:
        from solverkit.cli.tables import print_catalog  # noqa: PLC0415

        print_catalog(document)
    return 0
