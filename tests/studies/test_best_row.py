"""The best row of an advice, and only it, is asked what if; what was found is kept."""

from dataclasses import replace

import pytest

from examples import records
from levelstride.column.read import build
from levelstride.errors import CalculationError
from levelstride.results.kept import KeptItems
from levelstride.studies import best_row, headroom, work_item
from levelstride.studies.advise import advise

TINY = {
    "title": "tiny",
    "levels": {"kind": "geometric", "layers": 6, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
    "terrain": {"slope": 0.05},
    "advice": {"tableaux": ["ARS(2,3,2)"], "splits": ["sound", "sound+buoyancy"]},
}


@pytest.fixture(name="looked")
def _looked(monkeypatch):
    """Let searches and what-ifs answer at once; returns the columns and splittings asked about."""
    asked = []

    def limit(column, *, tableau, split, what_if, certify=False):
        assert not what_if
        return records.limit(
            tableau=tableau,
            split=split,
            stable_step_s={"half": 3.0, "full": 2.0}[column.lowest_slope_gradient],
            lowest_slope_gradient=column.lowest_slope_gradient,
            cause="sound",
            counterfactuals=(),
            stable_step_by_air=(),
        )

    def ask_what_if(column, found, splitting, tableau, tolerance):
        asked.append((column.lowest_slope_gradient, splitting.name, tableau.name))
        whole = records.limit()
        return replace(
            found,
            cause="slopes",
            counterfactuals=whole.counterfactuals,
            stable_step_by_air=whole.stable_step_by_air,
        )

    monkeypatch.setattr(work_item, "limit", limit)
    monkeypatch.setattr(best_row, "ask_what_if", ask_what_if)
    monkeypatch.setattr(headroom, "room", records.room)
    return asked


def test_only_the_best_row_is_asked_and_with_the_slope_gradient_that_binds(looked):
    found = advise(build(TINY))
    best = found.rows[found.best]
    assert looked == [("full", best.split, "ARS(2,3,2)")]
    assert best.cause == "slopes"
    assert [one.change for one in best.counterfactuals] == ["implicit", "absent"]
    assert [one.air for one in best.stable_step_by_air] == ["standard", "hot"]
    (other,) = (row for row in found.rows if row is not best)
    assert (other.cause, other.counterfactuals) == ("sound", ())


def test_what_was_found_is_kept(looked, tmp_path):
    first = advise(build(TINY), kept=KeptItems(tmp_path))
    second = advise(build(TINY), kept=KeptItems(tmp_path))
    assert len(looked) == 1
    assert second.rows[second.best].counterfactuals == first.rows[first.best].counterfactuals


def test_what_cannot_be_found_is_an_error(looked, monkeypatch):
    def fail(*_):
        raise CalculationError("no answer")

    monkeypatch.setattr(best_row, "ask_what_if", fail)
    with pytest.raises(CalculationError, match="no answer"):
        advise(build(TINY))
