"""Speed factors of this machine: measured once, kept, never needed."""

import json

import pytest

from solverkit.methods import Budget, PieceResult
from solverkit.settle import calibration
from solverkit.settle.calibration import calibrated, factors, measure
from solverkit.settle.choice import default_methods, method_named
from solverkit.window import Cell


@pytest.fixture(autouse=True)
def own_cache(tmp_path, monkeypatch):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.setattr(calibration, "_known", {})
    return tmp_path / "cache"


def test_without_a_measurement_estimates_stand_as_they_are():
    cell = Cell(3, 1, 27, 17)
    sweep = method_named("sweep")
    assert factors() == {}
    assert calibrated(sweep, (cell,)) == sweep.estimate((cell,))


def test_a_measurement_covers_every_default_method_and_is_kept(own_cache, monkeypatch):
    told = dict(measure(default_methods()))
    assert set(told) == {method.name for method in default_methods()}
    assert all(0.125 <= factor <= 8 for factor in told.values())
    monkeypatch.setattr(calibration, "_known", {})
    assert factors() == told
    (kept,) = (own_cache / "solverkit").iterdir()
    assert json.loads(kept.read_text()) == told


def test_a_folder_that_can_not_be_written_costs_the_file_only(own_cache):
    own_cache.write_text("a file where the folder should be")
    assert "census" in measure((method_named("census"),))
    assert "census" in factors()


@pytest.mark.parametrize("content", ["", "[]", '{"sweep": "fast"}', '{"sweep": null}', "null"])
def test_a_damaged_file_is_as_good_as_none(own_cache, content):
    measure((method_named("census"),))
    calibration._known.clear()
    (kept,) = (own_cache / "solverkit").iterdir()
    kept.write_text(content)
    assert factors() == {}


def test_wild_factors_are_clipped(own_cache, monkeypatch):
    class Slow:
        name = "census"

        def refusal(self, cell):
            return None

        def batches(self, cells):
            return [tuple(cells)]

        def pieces(self, batch, seconds):
            return [batch]

        def run(self, piece, budget):
            assert isinstance(budget, Budget)
            return PieceResult

        def estimate(self, cells):
            return 1e9

    assert measure((Slow(),))["census"] == 0.125
