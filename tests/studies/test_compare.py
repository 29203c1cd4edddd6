"""Rows side by side on small columns, checked against the studies of single rows."""

from dataclasses import replace

import pytest

from levelstride.accuracy.by_kind import step_wave_errors
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.execution.processes import processes
from levelstride.results.comparison import Weights
from levelstride.results.kept import KeptItems
from levelstride.splitting.splitting import resolve
from levelstride.studies import compare as module
from levelstride.studies import compared_row
from levelstride.studies.compare import compare
from levelstride.studies.limit import limit
from levelstride.studies.plan import plan_advice
from levelstride.studies.work_item import carry_out
from levelstride.studies.work_precision import work_precision
from levelstride.tableaux.lookup import find

TABLES = {
    "title": "six layers",
    "levels": {"kind": "geometric", "layers": 6, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
    "advice": {
        "tableaux": ["ARS(2,3,2)", "ARS(3,4,3)"],
        "splits": ["sound+buoyancy"],
        "divides_s": [600.0],
    },
}
COLUMN = build(TABLES)
SPLITTING = resolve("sound+buoyancy")


@pytest.fixture(name="found", scope="module")
def _found():
    return compare(COLUMN)


@pytest.fixture(name="kept")
def _kept(tmp_path):
    return KeptItems(tmp_path)


def untimed(rows):
    return [replace(row, measured_s_per_hour=None) for row in rows]


def test_stable_steps_and_advised_steps_are_those_of_limit_and_advise(found):
    plan = plan_advice(COLUMN)
    choices = [carry_out(planned.item).choice for planned in plan.items]
    advice = {pair[0].name: choice for pair, choice in zip(plan.pairs, choices, strict=True)}
    for row in found.rows:
        alone = limit(COLUMN, tableau=row.tableau, split="sound+buoyancy", brief=True)
        assert row.stable_step_s == alone.stable_step_s
        assert (row.criterion, row.air, row.path) == (alone.criterion, alone.air, alone.path)
        assert row.accurate_step_s == row.stable_step_s
        assert row.accurate_reason == row.stable_reason
        assert row.advised_step_s == row.step_s == advice[row.tableau].step_s
        assert row.advised_step_fraction == str(advice[row.tableau].fraction)
        assert row.advised_reason == advice[row.tableau].binding


def test_errors_are_those_of_matched_waves_at_that_step(found):
    for row in found.rows:
        alone = step_wave_errors(COLUMN, SPLITTING, find(row.tableau), row.step_s)
        errors = row.errors
        assert errors.frequency_error == pytest.approx(alone.resolved.frequency_error)
        assert errors.amplitude_change_per_period == pytest.approx(
            alone.resolved.worst_change_per_period
        )
        assert errors.amplitude_change_per_hour == pytest.approx(
            alone.resolved.worst_change_per_hour
        )
        assert errors.worst_wave.vertical_order == alone.worst_resolved.vertical_order
        assert errors.matched == alone.resolved.modes
        assert errors.sound.wavelength_m == pytest.approx(8 * 3000.0)
        assert errors.sound.mean_change_per_period < errors.amplitude_change_per_period <= 0.0


def test_costs_are_counts_times_weights(found):
    row = found.rows[0]
    assert row.tableau == "ARS(2,3,2)"
    assert row.explicit_evaluations_per_hour == pytest.approx(3 * 3600.0 / row.step_s)
    assert row.solves_per_hour == pytest.approx(2 * 3600.0 / row.step_s)
    assert row.exchanges_per_hour == pytest.approx(3 * 3600.0 / row.step_s)
    assert row.cost_per_hour == pytest.approx((3 + 2 + 1.5) * 3600.0 / row.step_s)
    assert row.measured_s_per_hour > 0.0


def test_packet_errors_are_those_of_work_precision(found):
    for row in found.rows:
        alone = work_precision(
            COLUMN, tableau=row.tableau, split="sound+buoyancy", stable_step_s=row.step_s
        )
        assert row.errors.packet_error == alone.points[0].error
        assert [point.error for point in row.curve] == [point.error for point in alone.points]
        assert [p.cost_per_hour for p in row.curve] == pytest.approx(
            [p.cost_per_hour for p in alone.points]
        )
        assert row.error_at_equal_cost == pytest.approx(
            alone.error_at_cost(found.equal_cost_per_hour)
        )
    dearest = max(found.rows, key=lambda row: row.cost_per_hour)
    assert found.equal_cost_per_hour == dearest.cost_per_hour


def test_the_cheapest_comes_first_and_the_answer_is_told(found):
    costs = [row.cost_per_hour for row in found.rows]
    assert costs == sorted(costs)
    assert found.cheapest == 0
    assert found.verdict.startswith("cheapest is row 1, ARS(2,3,2) with sound+buoyancy")
    assert set(found.undominated) == {i for i, row in enumerate(found.rows) if not row.dominated_by}
    assert found.notes == ("no wind was given, the limit is for air at rest",)


def test_all_at_one_step(found):
    between = sum(row.stable_step_s for row in found.rows) / 2
    at_one = compare(COLUMN, step_s=between, work_precision=False)
    usable = {row.tableau: row.usable for row in at_one.rows}
    stable = {row.tableau: row.stable_step_s for row in at_one.rows}
    assert usable == {name: step >= between for name, step in stable.items()}
    assert sorted(usable.values()) == [False, True]
    good, bad = at_one.rows
    assert (good.step_s, bad.step_s) == (between, between)
    assert bad.cost_per_hour is None
    assert bad.errors.frequency_error is not None
    assert good.errors.packet_error is None
    assert at_one.equal_cost_per_hour is None
    assert at_one.verdict.count("least frequency error has row 1") == 1


def test_other_weights_turn_the_order_and_search_nothing_again(kept, monkeypatch):
    first = compare(COLUMN, kept=kept)

    def never(item):
        raise AssertionError("asked again")

    monkeypatch.setattr(module, "find_row", never)
    weights = Weights(explicit=0.0, solve=10.0, exchange=0.0)
    again = compare(COLUMN, weights=weights, equal_cost=30000.0, kept=kept)
    assert again.weights == weights
    assert again.equal_cost_reason == "given"
    solves = {row.tableau: row.solves_per_hour for row in first.rows}
    assert {row.tableau: row.cost_per_hour / 10 for row in again.rows} == pytest.approx(solves)
    with pytest.raises(AssertionError, match="asked again"):
        compare(COLUMN, step_s=1.0, kept=kept)


def test_another_step_needs_no_other_search(kept, monkeypatch):
    compare(COLUMN, kept=kept, work_precision=False)

    def never(*_, **__):
        raise AssertionError("searched again")

    monkeypatch.setattr(compared_row, "limit", never)
    found = compare(COLUMN, step_s=1.0, kept=kept, work_precision=False)
    assert [row.usable for row in found.rows] == [True, True]
    loose = build(TABLES | {"advice": TABLES["advice"] | {"frequency_error": 0.5}})
    compare(loose, kept=kept, work_precision=False)
    hotter = build(TABLES | {"air": {"kind": "isothermal", "temperature_k": 280.0}})
    with pytest.raises(AssertionError, match="searched again"):
        compare(hotter, kept=kept, work_precision=False)


def test_processes_find_the_same(found):
    with processes(2) as executor:
        shared = compare(COLUMN, executor=executor)
    assert untimed(shared.rows) == untimed(found.rows)


def test_accuracy_may_limit_a_step_before_stability():
    strict = build(TABLES | {"advice": TABLES["advice"] | {"amplitude_loss_per_period": 1e-5}})
    (row,) = compare(strict, tableaux=["ars232"], work_precision=False).rows
    assert row.accurate_step_s < 0.9 * row.stable_step_s
    assert row.accurate_reason.startswith("amplitude of gravity waves")
    assert row.advised_step_s <= row.accurate_step_s
    assert abs(row.errors.amplitude_change_per_period) <= 1e-5


def test_a_row_that_cannot_be_searched_stops_no_other(monkeypatch):
    def fail(column, *, tableau, split, brief):
        if tableau == "ARS(3,4,3)":
            raise CalculationError("no step is stable")
        return limit(column, tableau=tableau, split=split, brief=brief)

    monkeypatch.setattr(compared_row, "limit", fail)
    good, bad = compare(COLUMN, work_precision=False).rows
    assert good.usable
    assert (bad.tableau, bad.stable_step_s, bad.step_s) == ("ARS(3,4,3)", None, None)
    assert bad.stable_reason == "no step is stable"
    assert not bad.usable


def test_air_without_gravity_waves_has_no_packet():
    neutral = build(
        TABLES
        | {
            "air": {
                "kind": "constant-n",
                "surface_temperature_k": 290.0,
                "buoyancy_frequency_per_s": 0.0,
            }
        }
    )
    (row,) = compare(neutral, tableaux=["ars232"]).rows
    assert row.curve == ()
    assert any(note.startswith("no packet error: ") for note in row.notes)


def test_without_names_a_short_list_is_tried():
    plain = build({key: table for key, table in TABLES.items() if key != "advice"})
    plan = module.plan_comparison(plain)
    assert len(plan.tasks) == 6
    own = build({**TABLES, "split": {"name": "sound"}, "advice": {}})
    assert {splitting.name for _, splitting in module.plan_comparison(own).pairs} == {"sound"}


def test_both_lowest_slope_gradients():
    steep = build(TABLES | {"terrain": {"slope": 0.6}})
    rows = {}
    for gradient in ("half", "full"):
        found = compare(
            steep, tableaux=["ars232"], work_precision=False, lowest_slope_gradient=gradient
        )
        assert found.lowest_slope_gradient == gradient
        assert any(f"taken as {gradient}" in note for note in found.notes)
        rows[gradient] = found.rows[0].stable_step_s
    assert rows["half"] > rows["full"]


@pytest.mark.parametrize(
    ("asked", "told"),
    [
        ({"step_s": 0.0}, "step: received 0.0 s"),
        ({"step_s": float("nan")}, "step: received nan s"),
        ({"equal_cost": -1.0}, "equal cost: received -1.0 per hour"),
        ({"weights": Weights(explicit=-1.0, solve=1.0, exchange=0.0)}, "received -1/1/0"),
        ({"weights": Weights(explicit=0.0, solve=0.0, exchange=0.0)}, "received 0/0/0"),
        ({"tableaux": ["ars999"]}, "ars999"),
        ({"splits": ["sond"]}, "sond"),
    ],
)
def test_what_makes_no_sense_is_told(asked, told):
    with pytest.raises(InputError, match=told):
        compare(COLUMN, **asked)
