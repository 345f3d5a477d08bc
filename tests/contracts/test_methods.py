"""What every method must do, engines and encoding-with-solver pairs alike. A new one is taken up by itself."""

import os
import pickle
from dataclasses import replace

import pytest

from cycle_encodings._formula import Form
from solverkit.findings import Cycle
from solverkit.methods import Budget, merged
from solverkit.registry import parts
from solverkit.settle.choice import method_named
from solverkit.window import Cell
from tests.reference import cycles_of_cell

ENGINES = [part.name for part in parts("engines")]
# A form of encodings -> the kind and the solver that judge it; a kind of solvers -> the encoding they are judged on.
JUDGE = {Form.CNF: ("cnf", "cadical195"), Form.CONSTRAINTS: ("cp", "cpsat"), Form.INEQUALITIES: ("pb", "exact")}
PAIRS = [
    f"{JUDGE[part.value.form][0]}:{part.name}@{JUDGE[part.value.form][1]}" for part in parts("encodings") if part.value
]
SOLVERS = [
    method_named(f"{part.value.kind}@{part.name}").name
    for part in parts("solvers")
    if part.value and part.value.abilities.exact
]

# Reduced cells: empty, one cycle, several, fixed points, repeated words only, both signs, q up to 181.
CELLS = [
    Cell(3, 1, 2, 1),
    Cell(3, -1, 1, 1),
    Cell(3, -1, 3, 2),
    Cell(3, -1, 11, 7),
    Cell(3, -1, 12, 8),
    Cell(3, 5, 5, 3),
    Cell(3, 5, 10, 6),
    Cell(3, 13, 8, 5),
    Cell(5, 1, 7, 3),
    Cell(5, -1, 2, 1),
    Cell(7, 1, 3, 1),
    Cell(9, 7, 10, 3),
    Cell(181, 1, 15, 2),
    Cell(3, -139, 11, 7),
    Cell(15, 1, 4, 1),
    Cell(3, -35, 3, 2, above=30),
    Cell(3, 65, 8, 5, above=1200),
]


def complete_list(method, cells):
    listings = []
    for batch in method.batches(cells):
        results = [method.run(piece, Budget()) for piece in method.pieces(batch, 0.01)]
        listings += merged(batch, results)
    return {entry.cell: entry for entry in listings}


@pytest.mark.parametrize("name", [*ENGINES, *PAIRS])
def test_lists_equal_brute_force(name):
    method = method_named(name)
    cells = [cell for cell in CELLS if method.refusal(cell) is None]
    assert len(cells) > len(CELLS) // 2
    found = complete_list(method, cells)
    assert set(found) == set(cells)
    for cell, entry in found.items():
        expected = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
        assert entry.complete, entry.reason
        assert list(entry.least) == expected, (name, cell)


@pytest.mark.parametrize("name", SOLVERS)
def test_every_solver_completes_the_lists(name):
    method = method_named(name)
    for cell in (Cell(3, 13, 8, 5), Cell(3, -1, 12, 8)):
        entry = complete_list(method, [cell])[cell]
        assert list(entry.least) == cycles_of_cell(3, cell.offset, cell.length, cell.odd)


@pytest.mark.parametrize("name", [*ENGINES, *PAIRS])
def test_pieces_are_reproducible_and_travel(name):
    method = method_named(name)
    (batch,) = method.batches([CELLS[3]])
    pieces = method.pieces(batch, 0.5)
    assert pieces == method.pieces(batch, 0.5)
    assert pickle.loads(pickle.dumps(pieces)) == pieces
    assert [(p.index, p.count, p.method) for p in pieces] == [(i, len(pieces), name) for i in range(len(pieces))]
    result = method.run(pieces[0], Budget())
    assert pickle.loads(pickle.dumps(result)).hits == result.hits


@pytest.mark.parametrize("name", [*ENGINES, *PAIRS])
def test_estimates_are_positive_and_batches_cover_the_cells(name):
    method = method_named(name)
    cells = [cell for cell in CELLS if method.refusal(cell) is None]
    batches = method.batches(cells)
    assert sorted(cell for batch in batches for cell in batch) == sorted(cells)
    assert all(method.estimate(batch) >= 0 for batch in batches)
    assert all(len({(c.multiplier, c.offset) for c in batch}) == 1 for batch in batches)


@pytest.mark.parametrize("name", [*ENGINES, *PAIRS])
def test_a_cell_beyond_all_reach_is_refused_with_a_reason_at_once(name):
    vast = Cell(3, 1, 114208327604, 72057431991, above=2**68)
    assert method_named(name).refusal(vast)


def test_all_parts_of_this_installation_work():
    broken = [part for room in ("engines", "encodings", "solvers") for part in parts(room) if part.problem]
    assert broken == []
    assert {"census", "matching", "sweep", "tally"} <= set(ENGINES)
    assert {"cadical195", "glucose4", "minisat22"} <= {part.name for part in parts("solvers")}


def test_witnesses_are_substituted_before_they_count():
    with pytest.raises(Exception, match="not the least element"):
        Cycle(3, 1, 5, 2)


def test_merging_refuses_a_result_twice_or_missing():
    method = method_named("sweep")
    cell = replace(CELLS[3])
    result = method.run(method.pieces((cell,), 1.0)[0], Budget())
    with pytest.raises(Exception, match="do not cover"):
        merged((cell,), [result, result])


if os.environ.get("SOLVERKIT_REQUIRE_ALL"):

    def test_nothing_optional_is_missing_where_everything_is_required():
        assert len(SOLVERS) >= 15


@pytest.mark.parametrize("name", [*ENGINES, *PAIRS])
def test_cells_with_bounds_beyond_every_float_are_refused_or_estimated(name):
    cell = Cell(3, 2**4000 + 1, 9000, 4000)
    method = method_named(name)
    assert method.refusal(cell) is not None
    assert method.estimate([cell]) > 1e9
