"""Cycles and findings refuse what does not hold together."""

import pickle

import pytest
from hypothesis import given

from solverkit.errors import ContradictionError, InputError, SolverkitError
from solverkit.findings import CellFinding, Cycle, Evidence, Verdict
from solverkit.window import Cell, Sign
from tests.published import published
from tests.reference import cycles_of_cell
from tests.strategies import cells

SEVENTEEN = Cycle(3, 1, -17, 11)
ITS_CELL = Cell(3, 1, 11, 7, sign=Sign.NEGATIVE)


def test_a_cycle_knows_its_facts():
    assert (SEVENTEEN.word, SEVENTEEN.odd, SEVENTEEN.largest, SEVENTEEN.gcd, SEVENTEEN.circuits) == (
        "11110111000", 7, -136, 1, 2,
    )  # fmt: skip
    assert SEVENTEEN.sign is Sign.NEGATIVE
    assert SEVENTEEN.total == sum(SEVENTEEN.elements())


@pytest.mark.parametrize(
    ("d", "least", "length"),
    [(1, 1, 4), (1, 2, 2), (1, 3, 2), (1, -17, 22), (1, 0, 1), (1, 1, 1), (-1, 1, 2), (5, 20, 5), (1, 7, 0)],
)
def test_what_is_no_cycle_from_its_least_element_is_refused(d, least, length):
    with pytest.raises(ContradictionError, match="not the least element"):
        Cycle(3, d, least, length)


@pytest.mark.parametrize(("key", "q"), [("m3", 3), ("m5", 5), ("m181", 181)])
def test_circuits_of_known_cycles(key, q):
    """Numbers of local minima, computed independently; −1, −5 of 3x+1 are circuits by Steiner (1977)."""
    lengths = {-1: 1, -5: 3, -17: 11, 1: 5, 13: 7, 17: 7, 27: 15, 35: 15}
    for least, count in published("CY-08")[key].items():
        assert Cycle(q, 1, int(least), lengths[int(least)]).circuits == count


@given(cells(longest=11))
def test_identities_of_every_cycle(cell):
    """Sum of even elements = sum of odd elements + d·x; no element shares with q a prime that d lacks.

    Chamberland, Butll. Soc. Catalana Mat. 18 (2003), for q = 3: there the even sum is (q − 2)·odd + d·x.
    """
    for least in cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd):
        cycle = Cycle(cell.multiplier, cell.offset, least, cell.length)
        odd = sum(n for n in cycle.elements() if n % 2)
        even = sum(n for n in cycle.elements() if n % 2 == 0)
        assert even == (cell.multiplier - 2) * odd + cell.offset * cycle.odd
        assert cycle.is_primitive == (cycle.gcd == 1)
        assert cycle.lies_in(cell) == (least > cell.above)


def test_findings_refuse_parts_that_do_not_fit():
    good = CellFinding(ITS_CELL, Verdict.FOUND, (SEVENTEEN,), Evidence.COMPUTED, ("sweep",))
    assert good.evidence is Evidence.COMPUTED
    wrong = [
        (Verdict.FOUND, (), Evidence.COMPUTED, ("sweep",)),
        (Verdict.NONE, (SEVENTEEN,), Evidence.COMPUTED, ("sweep",)),
        (Verdict.NONE, (), None, ("sweep",)),
        (Verdict.OPEN, (), Evidence.COMPUTED, ()),
        (Verdict.NONE, (), Evidence.COMPUTED, ()),
        (Verdict.NONE, (), Evidence.CONFIRMED, ("sweep",)),
        (Verdict.FOUND, (Cycle(3, 1, -5, 3),), Evidence.COMPUTED, ("sweep",)),
    ]
    for verdict, cycles, evidence, methods in wrong:
        with pytest.raises(ContradictionError):
            CellFinding(ITS_CELL, verdict, cycles, evidence, methods)
    with pytest.raises(ContradictionError):
        CellFinding(ITS_CELL, Verdict.NONE, (), Evidence.COMPUTED, ("sweep",), contradiction=True)


def test_errors_keep_their_values_over_a_process_border():
    from solverkit.errors import CapacityError, DossierError, FileError, MissingPartError

    for error in (
        InputError("k", -1, "1 or more"),
        CapacityError("m", "r"),
        DossierError("p", "r"),
        FileError("p", "r"),
        MissingPartError("p", "r"),
    ):
        again = pickle.loads(pickle.dumps(error))
        assert isinstance(again, SolverkitError)
        assert (type(again), str(again), again.exit_status) == (type(error), str(error), error.exit_status)


def test_long_or_strange_values_are_shown_short_and_on_one_line():
    assert len(str(InputError("k", "9" * 10**6, "less"))) < 200
    assert "\n" not in str(InputError("k", "a\nb\x1b[31m", "less"))
    assert "\x1b" not in str(InputError("k", "a\nb\x1b[31m", "less"))
