"""Results as JSON Lines, appended run by run: a file that was cut short anywhere is continued."""

from __future__ import annotations

import json
import os
from typing import TYPE_CHECKING, Any

from solverkit.errors import FileError, InputError

if TYPE_CHECKING:
    from pathlib import Path

__all__ = ["ResultFile", "run_key"]

_IDENTITY = ("q", "d", "k", "x", "above", "encoding", "solver", "repeat", "limit_s", "memory")
_NEEDED = (*_IDENTITY, "status", "reason", "found", "wall_s", "disagreement")
_BEGINNING = b'{"schema": 1, "q": '


def run_key(record: dict[str, Any]) -> tuple[Any, ...]:
    """Return what tells runs apart: cell, pair, repeat and limits, not the seed."""
    return tuple(record.get(name) for name in _IDENTITY)


class ResultFile:
    """The records of a trial, in a file or in memory alone.

    Args:
        path: the file; its whole lines are read, a last line without an end is dropped. None for no file.

    Raises:
        InputError: a whole line that is no record; the message has its number.
        FileError: the file can't be read or mended.
    """

    def __init__(self, path: Path | None) -> None:
        self._path = path
        self._records: dict[tuple[Any, ...], dict[str, Any]] = {}
        if path is not None:
            if path.exists() and not path.is_file():
                raise InputError("--to", str(path), "a plain file")
            try:
                self._read(path)
            except OSError as problem:
                if isinstance(problem, FileError):
                    raise
                raise FileError(path, f"can't be read or continued ({problem.strerror})") from None

    def _read(self, path: Path) -> None:
        with path.open("a+b") as file:
            file.seek(0)
            content = file.read()
            whole, _, rest = content.rpartition(b"\n")
            for number, line in enumerate(whole.split(b"\n") if whole else [], 1):
                record = _record(line)
                if record is None:
                    raise InputError("--to", f"{path} line {number}", "a new file, or results of a trial to continue")
                self._records[run_key(record)] = record
            if rest:
                start = min(len(rest), len(_BEGINNING))
                if rest[:start] != _BEGINNING[:start]:
                    raise InputError("--to", f"{path}, whose last line has no end", "a new file, or results of a trial")
                file.truncate(len(content) - len(rest))

    def __len__(self) -> int:
        return len(self._records)

    def record(self, key: tuple[Any, ...]) -> dict[str, Any] | None:
        """Return the record of a run that is done, or None."""
        return self._records.get(key)

    def append(self, record: dict[str, Any]) -> None:
        """Keep a record; it is on disk when this returns.

        Raises:
            FileError: it can't be written.
        """
        self._records[run_key(record)] = record
        if self._path is None:
            return
        line = (json.dumps({"schema": 1, **record}, ensure_ascii=True) + "\n").encode("ascii")
        try:
            with self._path.open("ab") as file:
                file.write(line)
                file.flush()
                os.fsync(file.fileno())
        except OSError as problem:
            raise FileError(self._path, f"can't be written ({problem.strerror})") from None


def _record(line: bytes) -> dict[str, Any] | None:
    try:
        record = json.loads(line)
    except (ValueError, RecursionError):
        return None
    if not isinstance(record, dict) or record.get("schema") != 1 or any(key not in record for key in _NEEDED):
        return None
    try:
        hash(run_key(record))
    except TypeError:
        return None
    return record
