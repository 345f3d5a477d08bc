"""The ledger: which pieces of work are done and what they gave, in one SQLite file with a single writer.

Every record is written in a transaction of its own, with write-ahead logging and full synchronisation, so whatever was
reported as done is there after a kill or a power cut. SQLite's exclusive locking keeps a second run out for as long as
the first lives, and needs no file that a killed run could leave behind.
"""

from __future__ import annotations

import json
import sqlite3
from contextlib import contextmanager
from hashlib import sha256
from typing import TYPE_CHECKING, Any, Self

from solverkit.errors import DossierError
from solverkit.methods import Hit, Listing, Piece, PieceResult
from solverkit.numerals import json_integer
from solverkit.window import Cell

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from pathlib import Path

    from solverkit.window import Window

__all__ = ["LEDGER_SCHEMA", "Ledger", "batch_key"]

LEDGER_SCHEMA = 1

_TABLES = """
CREATE TABLE meta (key TEXT PRIMARY KEY, value TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE batch (key TEXT PRIMARY KEY, method TEXT NOT NULL, cells TEXT NOT NULL, pieces INTEGER NOT NULL,
  position INTEGER NOT NULL) WITHOUT ROWID;
CREATE TABLE piece (batch TEXT NOT NULL, number INTEGER NOT NULL, detail TEXT NOT NULL, complete INTEGER NOT NULL,
  reason TEXT NOT NULL, hits TEXT NOT NULL, totals TEXT NOT NULL, statistics TEXT NOT NULL, seconds REAL NOT NULL,
  PRIMARY KEY (batch, number)) WITHOUT ROWID;
CREATE TABLE listing (method TEXT NOT NULL, multiplier TEXT NOT NULL, divisor TEXT NOT NULL, length INTEGER NOT NULL,
  odd INTEGER NOT NULL, above TEXT NOT NULL, least TEXT NOT NULL, complete INTEGER NOT NULL, reason TEXT NOT NULL,
  total TEXT, seconds REAL NOT NULL, PRIMARY KEY (multiplier, divisor, length, odd, above, method)) WITHOUT ROWID;
"""


def batch_key(method: str, cells: Sequence[Cell]) -> str:
    """Return the key under which a batch is recorded: a digest of its method and cells."""
    return sha256(json.dumps([method, _cells_out(cells)]).encode("ascii")).hexdigest()[:32]


def _cells_out(cells: Sequence[Cell]) -> list[list[int | str]]:
    return [[json_integer(value) for value in (c.multiplier, c.offset, c.length, c.odd, c.above)] for c in cells]


def _cells_in(text: str) -> tuple[Cell, ...]:
    rows = ([int(value) for value in row] for row in json.loads(text))
    return tuple(Cell(q, d, k, x, above) for q, d, k, x, above in rows)


class Ledger:
    """An open ledger. Use as a context manager.

    Args:
        path: the file; made when absent.

    Raises:
        DossierError: the file is no ledger, of another schema, corrupt, not writable, or open in another run.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        with self._errors():
            self._connection = sqlite3.connect(path, timeout=0.5, isolation_level=None)
            try:
                self._open()
            except BaseException:
                self._connection.close()
                raise

    def _open(self) -> None:
        run = self._connection.execute
        run("PRAGMA locking_mode = EXCLUSIVE")
        run("PRAGMA journal_mode = WAL")
        run("PRAGMA synchronous = FULL")
        run("BEGIN EXCLUSIVE")
        tables = {row[0] for row in run("SELECT name FROM sqlite_master WHERE type = 'table'")}
        if not tables:
            for statement in _TABLES.split(";"):
                run(statement)
            run("INSERT INTO meta VALUES ('schema', ?)", (str(LEDGER_SCHEMA),))
        elif "meta" not in tables:
            raise DossierError(self._path, "this SQLite file is no ledger; name another folder")
        run("COMMIT")
        schema = self.meta("schema")
        if schema != str(LEDGER_SCHEMA):
            raise DossierError(
                self._path, f"ledger schema {schema}, this version reads {LEDGER_SCHEMA}; use the version that wrote it"
            )

    @contextmanager
    def _errors(self) -> Iterator[None]:
        try:
            yield
        except sqlite3.DatabaseError as problem:
            text = str(problem)
            if "locked" in text:
                reason = "another run has it open; wait for it to end, or name another folder"
            elif "readonly" in text or "unable to open" in text:
                reason = f"not writable ({text}); name another folder with --dossier"
            elif "full" in text or "I/O" in text:
                reason = f"{text}; free some space and start the same command again, nothing recorded is lost"
            else:
                reason = f"the ledger can't be used ({text}); move the folder away or name another one"
            raise DossierError(self._path, reason) from problem

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; other runs can open it then."""
        self._connection.close()

    def meta(self, key: str) -> str | None:
        """Return the text recorded under ``key``, or None."""
        with self._errors():
            row = self._connection.execute("SELECT value FROM meta WHERE key = ?", (key,)).fetchone()
        return None if row is None else str(row[0])

    def set_meta(self, key: str, value: str) -> None:
        """Record a text under ``key``."""
        self._write("INSERT OR REPLACE INTO meta VALUES (?, ?)", (key, value))

    def bind(self, window: Window, digest: str, table: dict[str, Any]) -> None:
        """Tie the ledger to one window.

        Raises:
            DossierError: it is tied to another one.
        """
        known = self.meta("window_digest")
        if known is None:
            self.set_meta("window", json.dumps(table))
            self.set_meta("window_digest", digest)
        elif known != digest:
            title = json.loads(self.meta("window") or "{}").get("title") or "another window"
            raise DossierError(
                self._path.parent, f"it belongs to another window ({title}); name another folder with --dossier"
            )
        if window.title and known is not None:
            self.set_meta("window", json.dumps(table))

    def _write(self, statement: str, values: tuple[Any, ...]) -> None:
        with self._errors():
            self._connection.execute(statement, values)

    # --- batches and pieces -------------------------------------------------------------------------------------

    def add_batch(self, key: str, method: str, cells: Sequence[Cell], pieces: Sequence[Piece]) -> None:
        """Record that a batch is planned; its pieces on record stay when they are the same pieces."""
        with self._errors():
            run = self._connection.execute
            run("BEGIN")
            try:
                row = run("SELECT pieces FROM batch WHERE key = ?", (key,)).fetchone()
                details = dict(run("SELECT number, detail FROM piece WHERE batch = ?", (key,)).fetchall())
                wanted = {p.index: _detail(p) for p in pieces}
                if row is not None and (row[0] != len(pieces) or any(wanted.get(n) != d for n, d in details.items())):
                    run("DELETE FROM piece WHERE batch = ?", (key,))
                position = run("SELECT COUNT(*) FROM batch").fetchone()[0]
                run(
                    "INSERT INTO batch VALUES (?, ?, ?, ?, ?) ON CONFLICT (key) DO UPDATE SET pieces = excluded.pieces",
                    (key, method, json.dumps(_cells_out(cells)), len(pieces), position),
                )
                run("COMMIT")
            except BaseException:
                run("ROLLBACK")
                raise

    def batches(self) -> list[tuple[str, str, tuple[Cell, ...]]]:
        """Return key, method and cells of the planned batches, in the order they were planned."""
        with self._errors():
            rows = self._connection.execute("SELECT key, method, cells FROM batch ORDER BY position, key").fetchall()
        return [(key, method, _cells_in(cells)) for key, method, cells in rows]

    def results(self, key: str, pieces: Sequence[Piece]) -> dict[int, PieceResult]:
        """Return the recorded results of the pieces of a batch, complete or not."""
        with self._errors():
            rows = self._connection.execute(
                "SELECT number, complete, reason, hits, totals, statistics, seconds FROM piece WHERE batch = ?", (key,)
            ).fetchall()
        by_number = {p.index: p for p in pieces}
        return {
            number: PieceResult(
                by_number[number],
                tuple(Hit(length, odd, int(least)) for length, odd, least in json.loads(hits)),
                bool(complete),
                reason,
                tuple((length, odd, int(total)) for length, odd, total in json.loads(totals)),
                json.loads(statistics),
                seconds,
            )
            for number, complete, reason, hits, totals, statistics, seconds in rows
            if number in by_number
        }

    def add_result(self, key: str, result: PieceResult, listings: Sequence[Listing] = ()) -> None:
        """Record the result of a piece and, with the last one of a batch, the lists it completes: one transaction."""
        with self._errors():
            run = self._connection.execute
            run("BEGIN")
            try:
                run(
                    "INSERT OR REPLACE INTO piece VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
                    (
                        key,
                        result.piece.index,
                        _detail(result.piece),
                        int(result.complete),
                        result.reason,
                        json.dumps([[h.length, h.odd, str(h.least)] for h in result.hits]),
                        json.dumps([[length, odd, str(total)] for length, odd, total in result.totals]),
                        json.dumps(dict(result.statistics)),
                        result.seconds,
                    ),
                )
                for listing in listings:
                    cell = listing.cell
                    run(
                        "INSERT OR REPLACE INTO listing VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                        (
                            listing.method,
                            str(cell.multiplier),
                            str(cell.offset),
                            cell.length,
                            cell.odd,
                            str(cell.above),
                            json.dumps([str(n) for n in listing.least]),
                            int(listing.complete),
                            listing.reason,
                            None if listing.total is None else str(listing.total),
                            listing.seconds,
                        ),
                    )
                run("COMMIT")
            except BaseException:
                run("ROLLBACK")
                raise

    def listings(self) -> list[Listing]:
        """Return all lists on record, complete or not, in a fixed order."""
        with self._errors():
            rows = self._connection.execute(
                "SELECT method, multiplier, divisor, length, odd, above, least, complete, reason, total, seconds"
                " FROM listing"
            ).fetchall()
        return [
            Listing(
                Cell(int(q), int(d), k, x, int(above)),
                method,
                tuple(int(n) for n in json.loads(least)),
                bool(complete),
                reason,
                None if total is None else int(total),
                seconds,
            )
            for method, q, d, k, x, above, least, complete, reason, total, seconds in rows
        ]


def _detail(piece: Piece) -> str:
    return json.dumps([str(value) for value in piece.detail])
