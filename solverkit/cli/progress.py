"""Progress on a terminal; silence elsewhere."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

    from solverkit.settle.run import Progress

__all__ = ["progress_bar"]


class _Bar:
    def __init__(self, advance: object) -> None:
        from rich.progress import Progress, TaskID  # noqa: PLC0415

        assert isinstance(advance, Progress)
        self._progress = advance
        self._task: TaskID | None = None
        self._total = 0.0

    def planned(self, seconds: float, cells: int) -> None:
        self._total += max(seconds, 1e-6)
        if self._task is None:
            self._task = self._progress.add_task(f"{cells} cells", total=self._total, note="")
        else:
            self._progress.update(self._task, total=self._total, description=f"{cells} more cells")

    def advanced(self, seconds: float, note: str) -> None:
        if self._task is not None:
            self._progress.update(self._task, advance=seconds, note=note)


@contextmanager
def progress_bar() -> Iterator[Progress | None]:
    """Show a bar on standard error while the block runs, if that is a terminal."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console  # noqa: PLC0415
    from rich.progress import (  # noqa: PLC0415  # noqa: PLC0415
        BarColumn,
        Progress,
        SpinnerColumn,
        TaskProgressColumn,
        TextColumn,
        TimeElapsedColumn,
        TimeRemainingColumn,
    )

    bar = Progress(
        SpinnerColumn(),
        TextColumn("{task.description}"),
        BarColumn(),
        TaskProgressColumn(),
        TimeElapsedColumn(),
        TextColumn("left"),
        TimeRemainingColumn(),
        TextColumn("{task.fields[note]}"),
        console=Console(stderr=True),
        transient=True,
    )
    with bar:
        yield _Bar(bar)
