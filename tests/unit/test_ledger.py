"""The ledger keeps what it was given, and refuses what is not its own."""

import sqlite3

import pytest

from solverkit.errors import DossierError
from solverkit.ledger.ledger import Ledger, batch_key
from solverkit.maps import Map
from solverkit.methods import Hit, Listing, Piece, PieceResult
from solverkit.numerals import Span
from solverkit.window import Cell, Window
from solverkit.window_file import window_digest, window_table

CELL = Cell(3, -(10**30 + 1), 11, 7, above=2**70)
PIECES = [Piece("sweep", (CELL,), i, 2, (i, 10**40 + i)) for i in range(2)]
KEY = batch_key("sweep", (CELL,))
RESULT = PieceResult(PIECES[0], (Hit(11, 7, 17 * 10**30),), True, "", ((11, 7, 10**50),), {"candidates": 3}, 0.5)


def _window(title="a", top=5):
    return Window((Map(3, 1),), Span(1, top), title=title)


def test_results_come_back_as_they_were(tmp_path):
    path = tmp_path / "ledger.sqlite"
    listing = Listing(CELL, "sweep", (17 * 10**30,), True, "", 10**50, 0.25)
    with Ledger(path) as ledger:
        ledger.add_batch(KEY, "sweep", (CELL,), PIECES)
        ledger.add_result(KEY, RESULT, [listing])
    with Ledger(path) as ledger:
        assert ledger.batches() == [(KEY, "sweep", (CELL,))]
        assert ledger.results(KEY, PIECES) == {0: RESULT}
        assert ledger.listings() == [listing]


def test_pieces_cut_in_another_way_drop_the_old_results(tmp_path):
    with Ledger(tmp_path / "ledger.sqlite") as ledger:
        ledger.add_batch(KEY, "sweep", (CELL,), PIECES)
        ledger.add_result(KEY, RESULT)
        ledger.add_batch(KEY, "sweep", (CELL,), PIECES)
        assert len(ledger.results(KEY, PIECES)) == 1
        other = [Piece("sweep", (CELL,), 0, 1, (0, 99))]
        ledger.add_batch(KEY, "sweep", (CELL,), other)
        assert ledger.results(KEY, other) == {}


def test_a_second_run_is_refused_while_the_first_lives(tmp_path):
    path = tmp_path / "ledger.sqlite"
    with Ledger(path), pytest.raises(DossierError, match="another run has it open"):
        Ledger(path)
    Ledger(path).close()


def test_another_window_is_refused(tmp_path):
    with Ledger(tmp_path / "ledger.sqlite") as ledger:
        for window in (_window(), _window(title="b")):
            ledger.bind(window, window_digest(window), window_table(window))
        other = _window(top=6)
        with pytest.raises(DossierError, match="another window"):
            ledger.bind(other, window_digest(other), window_table(other))


def test_files_that_are_no_ledgers_are_refused(tmp_path):
    text = tmp_path / "text"
    text.write_bytes(b"not a database at all, but long enough to be read as one" * 40)
    with pytest.raises(DossierError, match="can't be used"):
        Ledger(text)
    other = tmp_path / "other"
    connection = sqlite3.connect(other)
    connection.execute("CREATE TABLE x (y)")
    connection.commit()
    connection.close()
    with pytest.raises(DossierError, match="no ledger"):
        Ledger(other)
    with pytest.raises(DossierError, match="not writable"):
        Ledger(tmp_path / "absent" / "ledger.sqlite")


def test_a_ledger_of_a_later_schema_is_refused(tmp_path):
    path = tmp_path / "ledger.sqlite"
    with Ledger(path) as ledger:
        ledger.set_meta("schema", "99")
    with pytest.raises(DossierError, match="schema 99"):
        Ledger(path)


def test_keys_of_batches_depend_on_method_and_cells():
    keys = {batch_key(m, c) for m in ("sweep", "cnf") for c in ((CELL,), (CELL, Cell(3, 1, 2, 1)), (Cell(3, 1, 2, 1),))}
    assert len(keys) == 6
