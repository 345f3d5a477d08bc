"""Parts are found by scanning their room or through entry points; the example parts keep the contracts."""

import importlib
from importlib.metadata import EntryPoint

import pytest

from solverkit import registry
from solverkit.errors import ContradictionError, InputError, MissingPartError
from solverkit.methods import Budget
from solverkit.registry import load, parts
from solverkit.window import Cell
from tests.contracts import example_parts
from tests.reference import cycles_of_cell

CELLS = [
    Cell(3, 1, 2, 1),
    Cell(3, -1, 11, 7),
    Cell(3, 13, 8, 5),
    Cell(3, 13, 8, 5, above=250),
    Cell(3, -1, 12, 8),
    Cell(5, 1, 7, 3),
]


@pytest.fixture
def outside(monkeypatch):
    """Pretend that an outside package names parts in its entry points."""

    def named(room, **values):
        points = [EntryPoint(name, value, f"solverkit.{room}") for name, value in values.items()]
        monkeypatch.setattr(registry, "entry_points", lambda group: points if group == f"solverkit.{room}" else [])
        parts.cache_clear()

    yield named
    monkeypatch.undo()
    parts.cache_clear()


@pytest.mark.parametrize(
    ("room", "attribute", "name"),
    [
        ("engines", "ENGINE", "every-number"),
        ("encodings", "ENCODING", "one-literal-each"),
        ("solvers", "BACK_ENDS", "fresh-each-time"),
    ],
)
def test_an_outside_part_is_found_beside_those_of_the_room(room, attribute, name, outside):
    own = {part.name for part in parts(room)}
    outside(room, example=f"tests.contracts.example_parts:{attribute}")
    assert {part.name for part in parts(room)} == own | {name}
    assert load(room, name).name == name


def test_a_name_that_is_taken_is_refused(outside):
    outside("engines", one="tests.contracts.example_parts:ENGINE", two="tests.contracts.example_parts:ENGINE")
    with pytest.raises(ContradictionError, match="every-number"):
        parts("engines")


def test_a_broken_part_is_listed_as_broken_and_the_others_stay(outside):
    outside("solvers", lost="no_such_module_anywhere:X")
    (broken,) = [part for part in parts("solvers") if part.problem]
    assert (broken.name, broken.value) == ("lost", None)
    assert "ModuleNotFoundError" in broken.problem
    assert load("solvers", "cadical195").name == "cadical195"
    with pytest.raises(MissingPartError, match="no_such_module_anywhere"):
        load("solvers", "lost")
    with pytest.raises(InputError, match="solver"):
        load("solvers", "nowhere")


@pytest.mark.parametrize("cell", CELLS, ids=str)
def test_example_parts_list_what_brute_force_lists(cell):
    importlib.import_module("tests.contracts.example_parts")
    expected = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
    engine, encoding, (solver,) = example_parts.ENGINE, example_parts.ENCODING, example_parts.BACK_ENDS
    assert engine.refusal(cell) is None
    (piece,) = engine.pieces(engine.batches([cell])[0], 1.0)
    assert [hit.least for hit in engine.run(piece, Budget()).hits] == expected
    assert sorted(solver.least_elements(encoding.encode(cell))) == expected
