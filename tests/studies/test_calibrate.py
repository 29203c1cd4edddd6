"""Which assumptions explain observations: a synthetic truth, and made-up limits for the rest."""

import pickle
from dataclasses import replace
from math import inf

import pytest

from levelstride.column.knobs import largest_slope, largest_wind, lowest_slope_gradients
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.execution.serial import serial
from levelstride.results.calibration_file import read_safety_factor, write_calibration
from levelstride.results.wording import CAUTION
from levelstride.splitting.splitting import resolve
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies import assumptions, calibration_setup
from levelstride.studies import calibrate as study
from levelstride.studies.assumptions import ASSUMPTIONS
from levelstride.studies.calibrate import Observed, agreement, calibrate
from levelstride.studies.calibration_setup import LimitItem, stable_step
from levelstride.tableaux.lookup import find

TINY = {
    "title": "tiny",
    "levels": {"kind": "geometric", "layers": 5, "top_m": 8000.0, "lowest_layer_m": 100.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 1000.0},
}
TABLEAU, SPLIT = "ARS(2,3,2)", "sound+buoyancy"


def column(**tables):
    return build(TINY | tables)


def sloping(slope):
    return column(terrain={"slope": slope})


def item(of):
    return LimitItem(pickle.dumps(of), TABLEAU, resolve(SPLIT).treatment, 86400.0)


def test_a_slope_that_the_file_has_too_small_is_found(monkeypatch):
    monkeypatch.setattr(assumptions, "FACTORS", (1.0, 2.0, 4.0))
    monkeypatch.setattr(study, "EDGE", 1.2)
    small = {
        "levels": {"kind": "geometric", "layers": 3, "top_m": 8000.0, "lowest_layer_m": 200.0},
        "horizontal": {"grid_spacing_m": 1000.0, "directions": 1},
    }
    truth, file = (build(TINY | small | {"terrain": {"slope": slope}}) for slope in (0.8, 0.4))
    truth_s, file_s = stable_step(item(truth)), stable_step(item(file))
    assert truth_s < 0.8 * file_s
    seen = Observed(file, held_s=(0.5 * truth_s, 0.95 * truth_s), failed_s=(1.05 * truth_s,))
    found = calibrate([seen], tableau=TABLEAU, split=SPLIT, vary=["slope"])
    assert not found.agrees
    (slope,) = found.assumptions
    assert slope.explains
    (agreeing,) = slope.ranges
    assert 0.4 < agreeing.from_value <= 0.8 <= agreeing.to_value < 1.6
    assert found.factor_lower == pytest.approx(0.95 * truth_s / file_s)
    assert found.factor_upper == pytest.approx(1.05 * truth_s / file_s)
    assert found.verdict.startswith("the gap is explained by slope (")
    assert found.caution == CAUTION


@pytest.fixture(name="limits")
def _limits(monkeypatch):
    """Let every limit be a function of what is asked, 4 s until it is changed."""
    made = {"step": lambda column, asked: 4.0}
    monkeypatch.setattr(
        study, "stable_step", lambda asked: made["step"](pickle.loads(asked.column), asked)
    )
    return made


def seen(held=(), failed=(), of=None):
    return Observed(of or sloping(0.2), tuple(held), tuple(failed))


def asked(*observed, vary=None, **options):
    return calibrate(list(observed), tableau=TABLEAU, split=SPLIT, vary=vary, **options)


def named(found, name):
    return next(one for one in found.assumptions if one.name == name)


def test_where_theory_agrees_there_is_no_gap(limits):
    found = asked(seen([3.0], [5.0]))
    assert found.agrees
    assert "no gap to explain" in found.verdict
    assert (found.factor_lower, found.factor_upper) == (0.75, 1.25)
    assert found.safety_factor.lower == 0.75
    assert [one.name for one in found.assumptions] == list(ASSUMPTIONS)


def test_the_ends_of_a_range_are_found_to_a_percent(limits):
    limits["step"] = lambda column, _: 1.0 / max(largest_slope(column), 0.01)
    found = asked(seen([2.0], [3.0]), vary=["slope"])
    (agreeing,) = named(found, "slope").ranges
    assert agreeing.from_value == pytest.approx(1 / 3, rel=0.01)
    assert agreeing.to_value == pytest.approx(1 / 2, rel=0.01)
    values = [trial.value for trial in named(found, "slope").trials]
    assert values == sorted(values)


def test_a_range_narrower_than_what_is_tried_first_is_found(limits):
    limits["step"] = lambda column, _: 1.0 / max(largest_slope(column), 0.01)
    found = asked(seen([2.0], [2.06]), vary=["slope"])
    (agreeing,) = named(found, "slope").ranges
    assert 1 / 2.06 < agreeing.from_value <= agreeing.to_value <= 1 / 2.0 * 1.001


def test_values_between_are_searched_near_and_the_ends_told_in_full(limits):
    """A search near a known step finds 2 % too much here: what is told is not led astray."""
    asked_near = []

    def step(column, asked):
        true = 1.0 / max(largest_slope(column), 0.01)
        asked_near.append(asked.near_s)
        return true if asked.near_s is None else 1.02 * true

    limits["step"] = step
    found = named(asked(seen([2.0], [3.0]), vary=["slope"]), "slope")
    (agreeing,) = found.ranges
    assert 1 / 3 < agreeing.from_value <= agreeing.to_value <= 1 / 2 * 1.001
    assert agreeing.to_value == pytest.approx(1 / 2, rel=0.03)
    told = {trial.value: trial.stable_steps_s for trial in found.trials}
    for end in (agreeing.from_value, agreeing.to_value):
        assert told[end] == (1.0 / end,)
    assert all(near is None or 1.0 < near < 5.0 for near in asked_near)
    assert len([near for near in asked_near if near is not None]) > 8


def test_a_search_near_a_step_finds_what_the_full_one_finds():
    levels = {"kind": "geometric", "layers": 27, "top_m": 8000.0, "lowest_layer_m": 60.0}
    windy = column(levels=levels, wind={"kind": "uniform", "speed_m_per_s": 10.0})
    whole = stable_step(item(windy))
    for off in (0.8, 1.3):
        near = stable_step(replace(item(windy), near_s=off * whole))
        assert near == pytest.approx(whole, rel=2e-3)


def test_over_a_slope_the_harder_gradient_counts():
    levels = {"kind": "uniform", "layers": 3, "top_m": 3000.0}
    steep = column(levels=levels, terrain={"slope": 0.6})
    both = [
        ColumnVerdict(one, resolve(SPLIT), find(TABLEAU)).stable_step(Tolerance(86400.0, 1000.0))
        for one in lowest_slope_gradients(steep)
    ]
    assert stable_step(item(steep)) == min(found.step_s for found in both)


def test_two_ranges_stay_two(limits):
    limits["step"] = lambda column, _: 4.0 if 5.0 < largest_wind(column) < 30.0 else 2.0
    found = asked(seen([1.0], [3.0]), vary=["wind"])
    low, high = named(found, "wind").ranges
    assert low.from_value == 0.0
    assert low.to_value == pytest.approx(5.0, rel=0.011)
    assert high.from_value == pytest.approx(30.0, rel=0.011)


def test_every_assumption_changes_what_it_says(limits):
    told = []

    def step(column, asked):
        reference = column.reference and float(column.reference.temperature_c[0])
        treated = {how for how in asked.treatment.values() if how.startswith("after")}
        told.append((reference, largest_wind(column), largest_slope(column), asked.efolding_s))
        return 4.0 if not treated else 2.0

    limits["step"] = step
    mixed = column(terrain={"slope": 0.2}, diffusion={"vertical_m2_per_s": 5.0})
    found = asked(seen([1.0], [3.0], mixed))
    assert {one[0] for one in told} >= {None, 200.0, 320.0}
    assert {one[1] for one in told} >= {0.0, 80.0}
    assert {one[2] for one in told} >= {0.0, 0.2, 0.8}
    assert {one[3] for one in told} >= {600.0, 864000.0}
    moved = named(found, "once-per-step")
    assert moved.consistent == (
        "vertical-diffusion after-step",
        "vertical-diffusion after-step-implicit",
    )
    assert [one.name for one in found.assumptions if one.explains] == ["once-per-step"]


def test_terms_once_per_step_are_moved_into_the_stages(limits):
    mixed = column(
        diffusion={"vertical_m2_per_s": 5.0}, divergence_damping={"coefficient_m2_per_s": 100.0}
    )
    treatment = {"name": "sound", "vertical-diffusion": "after-step"}
    found = calibrate(
        [seen([1.0], [5.0], mixed)], tableau=TABLEAU, split=treatment, vary=["once-per-step"]
    )
    (moved,) = found.assumptions
    assert moved.present == "vertical-diffusion after-step"
    labels = {trial.label for trial in moved.trials}
    assert {"vertical-diffusion explicit", "vertical-diffusion implicit"} <= labels
    assert {"divergence-damping after-step", "all explicit", "all after-step-implicit"} <= labels
    assert "divergence-damping explicit" not in labels


def test_several_columns_are_scaled_by_one_factor(limits):
    limits["step"] = lambda column, _: 1.0 / largest_slope(column) if column.slope_f[0] else inf
    steep, gentle = seen([0.9], [1.1], sloping(0.5)), seen([3.0], [3.67], sloping(0.15))
    found = asked(steep, gentle, vary=["slope"])
    slope = named(found, "slope")
    assert slope.unit == "times the file's"
    assert slope.present == "0.5, 0.15"
    (agreeing,) = slope.ranges
    assert agreeing.from_value < 2.0 < agreeing.to_value
    assert len(slope.trials[0].stable_steps_s) == 2
    assert slope.trials[0].stable_steps_s == (None, None)


def test_observations_of_one_column_are_put_together(limits):
    found = asked(seen([3.0, 2.0]), seen([], [5.0]), seen([3.5], [4.5]), vary=["slope"])
    (one,) = found.columns
    assert (one.held_s, one.failed_s) == ((2.0, 3.0, 3.5), (4.5, 5.0))


def test_observations_that_contradict_one_another_are_told(limits):
    found = asked(seen([5.0], [4.5]))
    assert found.contradictions == ("<memory>: 5 s held and 4.5 s failed",)
    assert "contradict one another" in found.verdict
    assert found.assumptions == ()
    assert found.safety_factor is None


def test_observations_that_contradict_every_assumption_are_told(limits):
    found = asked(seen([6.0], [7.0]))
    assert "contradict every assumption" in found.verdict
    assert not any(one.explains for one in found.assumptions)
    assert (found.factor_lower, found.factor_upper) == (1.5, 1.75)


def test_columns_that_no_one_factor_fits_are_told(limits):
    limits["step"] = lambda column, _: 4.0
    found = asked(seen([4.4]), seen([], [3.6], sloping(0.3)), vary=["growth-tolerance"])
    assert found.safety_factor is None
    assert "no one safety factor fits" in found.verdict


def test_a_column_without_a_limit_bounds_no_factor(limits):
    limits["step"] = lambda column, _: inf
    found = asked(seen([4.4]), vary=["growth-tolerance"])
    assert found.agrees
    assert found.columns[0].stable_step_s is None
    assert found.safety_factor is None
    assert "there is no safety factor" in found.verdict


def test_what_cannot_matter_is_not_varied(limits):
    found = calibrate([seen([3.0], [5.0])], tableau="RK4", split=SPLIT, vary=["reference"])
    assert "nothing is implicit" in found.assumptions[0].note
    found = asked(seen([3.0], [5.0]), vary=["once-per-step"])
    assert "no advection" in found.assumptions[0].note


def test_agreement_leaves_room_for_the_bisection():
    one = [seen([4.0], [5.0])]
    assert agreement(one, [4.0 / 1.0005]) == "agrees"
    assert agreement(one, [3.9]) == "too low"
    assert agreement(one, [5.0]) == "too high"
    assert agreement([*one, *one], [3.0, 6.0]) == "both"


def test_mistakes_come_one_line_each(limits):
    with pytest.raises(InputError) as caught:
        asked(seen([-1.0], [0.0]))
    assert len(caught.value.problems) == 2
    with pytest.raises(InputError, match="no step was observed"):
        asked(seen())
    with pytest.raises(InputError, match="unknown 'winds'; known are"):
        asked(seen([1.0]), vary=["winds"])
    other = build(TINY | {"advice": {"transient_limit": 10.0}})
    with pytest.raises(InputError, match="transient_limit differs"):
        asked(seen([1.0]), seen([1.0], of=other))
    with pytest.raises(InputError, match="e-folding"):
        asked(seen([1.0]), efolding_s=0.0)


def test_progress_and_executors(limits):
    told = []
    with serial() as executor:
        found = asked(
            seen([3.0], [5.0]),
            vary=["slope"],
            executor=executor,
            progress=lambda *a: told.append(a),
        )
    assert found == replace(asked(seen([3.0], [5.0]), vary=["slope"]), provenance=found.provenance)
    assert told[-1][0] == told[-1][1] > 5
    assert told[0][2] == "the columns as they are"


def test_a_search_that_finds_no_step_counts_as_none(monkeypatch):
    def none(*_, **__):
        raise CalculationError("no step")

    monkeypatch.setattr(calibration_setup.ColumnVerdict, "stable_step", none)
    assert stable_step(item(sloping(0.1))) == 0.0


class TestFile:
    def test_the_factor_comes_back(self, limits, tmp_path):
        found = asked(seen([3.0], [5.0]), vary=["slope"])
        write_calibration(found, tmp_path / "one.json")
        assert read_safety_factor(tmp_path / "one.json") == found.safety_factor
        assert [path.name for path in tmp_path.iterdir()] == ["one.json"]

    def test_without_a_factor_nothing_is_written(self, limits, tmp_path):
        with pytest.raises(InputError, match="no safety factor"):
            write_calibration(asked(seen([5.0], [4.0])), tmp_path / "one.json")
        assert not list(tmp_path.iterdir())

    @pytest.mark.parametrize(
        ("spoil", "named"),
        [
            (lambda text: text[:200], "is no calibration file"),
            (lambda text: "[]", "is no calibration file"),
            (lambda text: "[" * 100_000, "is no calibration file"),
            (lambda text: text.replace('"version": 1', '"version": 7', 1), "version = 7"),
            (lambda text: text.replace('"lower"', '"lowest"', 1), "is damaged"),
            (lambda text: text.replace('"lower": 0.75', '"lower": 2.75'), "lower below upper"),
            (lambda text: text.replace('"lower": 0.75', '"lower": -1.0'), "above 0"),
        ],
    )
    def test_what_is_none_is_told(self, limits, tmp_path, spoil, named):
        path = tmp_path / "one.json"
        write_calibration(asked(seen([3.0], [5.0]), vary=["slope"]), path)
        path.write_text(spoil(path.read_text()))
        with pytest.raises(InputError, match=named):
            read_safety_factor(path)

    def test_a_file_that_is_not_there(self, tmp_path):
        with pytest.raises(InputError, match="cannot be read"):
            read_safety_factor(tmp_path / "missing.json")
        with pytest.raises(InputError, match="cannot be read"):
            read_safety_factor(tmp_path)


def test_the_share_to_advise(limits):
    both = asked(seen([3.0], [5.0]), vary=["slope"]).safety_factor
    assert both.share(TABLEAU, SPLIT, 0.9) == 0.75
    assert both.share("RK4", "all-explicit", 0.9) == 0.75
    assert both.share("RK4", "all-explicit", 0.5) == 0.5
    beyond = replace(both, lower=1.4, upper=None)
    assert beyond.share(TABLEAU, SPLIT, 0.9) == 1.0
    assert beyond.share("RK4", SPLIT, 0.9) == 0.9
    failed = replace(both, lower=None, upper=0.8)
    assert failed.share(TABLEAU, SPLIT, 0.9) == pytest.approx(0.72)
