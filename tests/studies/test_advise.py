import pickle
from concurrent.futures import BrokenExecutor, Future

import pytest

from examples import quick, records
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.execution.serial import serial
from levelstride.results.export import to_json
from levelstride.results.headroom import UNITS
from levelstride.studies import best_row, headroom, work_item
from levelstride.studies.advise import CurrentConfiguration, advise
from levelstride.studies.best_row import PARTS
from levelstride.studies.methods import pairs_of
from levelstride.studies.rows import best_row as best_of
from levelstride.studies.work_item import WorkItem, carry_out, smaller

TINY = {
    "title": "tiny",
    "levels": {"kind": "geometric", "layers": 6, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
    "advice": {
        "tableaux": ["ARS(2,3,2)", "ars233"],
        "splits": ["sound", "sound+buoyancy"],
        "divides_s": [600.0, 900.0],
    },
}


@pytest.fixture(name="column", scope="module")
def _column():
    return build(TINY)


@pytest.fixture(name="limits")
def _limits(monkeypatch):
    """Let every pair have a made-up limit; what is put in here by name wins."""
    limits = {}

    def limit(column, *, tableau, split, what_if, certify=False):
        made_up = records.limit(
            tableau=tableau, split=split, stable_step_s=3.0, lowest_slope_gradient=None
        )
        found = limits.get((tableau, split), made_up) if isinstance(split, str) else made_up
        if isinstance(found, Exception):
            raise found
        return found(column) if callable(found) else found

    monkeypatch.setattr(work_item, "limit", limit)
    monkeypatch.setattr(best_row, "ask_what_if", lambda column, found, *_: found)
    monkeypatch.setattr(headroom, "room", records.room)
    return limits


def test_rows_are_sorted_by_cost_and_cost_follows_from_the_step(column, limits):
    limits["ARS(2,3,3)", "sound"] = records.limit(
        tableau="ARS(2,3,3)", split="sound", stable_step_s=4.0
    )
    found = advise(column)
    assert [(row.tableau, row.split) for row in found.rows[:1]] == [("ARS(2,3,3)", "sound")]
    costs = [row.cost_per_hour for row in found.rows]
    assert costs == sorted(costs)
    assert found.best == 0
    for row in found.rows:
        assert row.steps_per_hour == pytest.approx(3600 / row.advised_step_s)
        assert row.explicit_evaluations_per_hour == pytest.approx(3 * row.steps_per_hour)
        assert row.solves_per_hour == pytest.approx(2 * row.steps_per_hour)
        assert row.exchanges_per_hour == pytest.approx(3 * row.steps_per_hour)
        assert row.measured_s_per_hour > 0.0
        for steps, interval in zip(row.steps_per_interval, (600.0, 900.0), strict=True):
            assert steps * row.advised_step_s == pytest.approx(interval, rel=1e-14)
        assert abs(row.amplitude_change_per_period) < 0.05
        assert 0.0 <= row.frequency_error < 0.01
    assert found.wind_note == "no wind was given, the limit is for air at rest"
    assert found.provenance.column_sha256 == column.digest
    assert found.column.layers == 6


def test_a_pair_without_a_stable_step_comes_last_and_stops_nothing(column, limits):
    limits["ARS(2,3,2)", "sound"] = CalculationError("no step down to 1e-12 s will do")
    limits["ARS(2,3,2)", "sound+buoyancy"] = records.limit(stable_step_s=None, split="sound")
    found = advise(column)
    assert [row.advised_step_s is None for row in found.rows] == [False, False, True, True]
    assert found.best == 0
    assert any("no step down to 1e-12 s will do" in row.binding for row in found.rows[2:])
    to_json(found)


def test_where_nothing_can_be_advised_there_is_no_best_row(column, limits):
    limits["ARS(2,3,2)", "sound"] = records.limit(stable_step_s=None)
    found = advise(column, tableaux=["ars232"], splits=["sound"])
    assert found.best is None


def test_a_narrow_window_of_instability_is_seen_at_the_step_itself(column, limits):
    limits["ARS(2,3,2)", "sound"] = records.limit(stable_step_s=60.0, split="sound")
    found = advise(column, tableaux=["ars232"], splits=["sound"])
    row = found.rows[0]
    assert row.advised_step_s is not None
    assert row.advised_step_s < 30.0
    assert row.binding.startswith("stability: grows at")


def test_accuracy_shortens_the_step_and_says_so(limits):
    advice = TINY["advice"] | {"amplitude_loss_per_period": 1e-5}
    found = advise(build(TINY | {"advice": advice}), tableaux=["ars232"], splits=["sound"])
    row = found.rows[0]
    assert row.advised_step_s < 0.8 * 3.0
    assert row.binding.startswith("amplitude of gravity waves")
    assert row.binding.endswith("0.001 % allowed")
    assert abs(row.amplitude_change_per_period) <= 1e-5


def test_the_current_step_is_judged_beside_the_rows(column, limits):
    found = advise(
        column,
        tableaux=["ars233"],
        splits=["sound"],
        current=CurrentConfiguration(2.4, "ars232", {"name": "sound", "buoyancy": "implicit"}),
    )
    assert len(found.rows) == 1
    assert found.current.share_of_limit == pytest.approx(0.8)
    assert found.current.stable is True
    assert found.current.verdict.startswith("your step is at 80 % of the limit of 3 s (spectrum")
    assert found.current.limit.tableau == "ARS(2,3,2)"


def test_a_current_step_beyond_the_limit_is_too_long(column, limits):
    found = advise(column, current=CurrentConfiguration(4.0, "ars232", "sound"))
    assert len(found.rows) == 4
    assert found.current.stable is False
    assert found.current.verdict.endswith("too long")
    assert "133 %" in found.current.verdict


@pytest.mark.parametrize("step_s", [0.0, -1.0, float("nan"), float("inf")])
def test_a_current_step_must_be_a_step(column, limits, step_s):
    with pytest.raises(InputError, match="current step"):
        advise(column, current=CurrentConfiguration(step_s, "ars232", "sound"))


def test_progress_counts_every_pair(column, limits):
    seen = []
    with serial() as executor:
        advise(column, executor=executor, progress=lambda *counts: seen.append(counts))
    counted = [counts[:2] for counts in seen]
    assert counted == sorted(counted)
    assert list(dict.fromkeys(counted)) == [(done, 4 + PARTS) for done in range(4 + PARTS + 1)]
    assert seen[0][2] == "ARS(2,3,2) with sound"
    assert any(counts[2].endswith("headroom of grid spacing") for counts in seen)
    assert seen[-1][2] == ""


def test_a_worker_that_dies_is_a_calculation_that_cannot_be_finished(column):
    class Dead:
        def submit(self, *_):
            future = Future()
            future.set_exception(BrokenExecutor("gone"))
            return future

    with pytest.raises(CalculationError, match="a worker ended"):
        advise(column, executor=Dead())


def test_over_a_slope_both_gradients_are_searched_and_the_smaller_taken(limits):
    sloping = build(TINY | {"terrain": {"slope": 0.05}})
    looked_at = []

    def answer(column):
        looked_at.append(column.lowest_slope_gradient)
        step_s = {"half": 3.0, "full": 2.0}[column.lowest_slope_gradient]
        return records.limit(
            stable_step_s=step_s,
            split="sound",
            lowest_slope_gradient=column.lowest_slope_gradient,
        )

    limits["ARS(2,3,2)", "sound"] = answer
    row = advise(sloping, tableaux=["ars232"], splits=["sound"]).rows[0]
    assert looked_at == ["half", "full"]
    assert (row.stable_step_s, row.lowest_slope_gradient) == (2.0, "full")
    assert row.advised_step_s <= 1.8


def test_the_smaller_limit_is_the_one_without_a_step_then_the_shorter():
    none, short, long = (records.limit(stable_step_s=s) for s in (None, 2.0, 3.0))
    assert smaller([long, short]) is short
    assert smaller([long, none, short]) is none
    assert smaller([records.unbounded(), long]) is long


def test_the_best_row_is_one_whose_solve_stays_in_the_column():
    coupled = records.row(couples_columns=True)
    assert best_of([records.without_step(), coupled, records.row()]) == 2
    assert best_of([records.without_step(), coupled]) == 1
    assert best_of([records.without_step()]) is None
    assert best_of([]) is None


def test_pairs_are_named_once_and_an_explicit_method_comes_unsplit(column):
    pairs = pairs_of(column, ["ars232", "ARS(2,3,2)", "RK4"], ["sound", "buoyancy + sound"])
    names = [(tableau.name, splitting.name) for tableau, splitting in pairs]
    assert names == [
        ("RK4", "all-explicit"),
        ("ARS(2,3,2)", "sound"),
        ("ARS(2,3,2)", "buoyancy+sound"),
    ]


def test_all_unknown_names_come_at_once(column):
    with pytest.raises(InputError) as caught:
        pairs_of(column, ["ars322", "ars232"], ["sond", "bouyancy"])
    assert len(caught.value.problems) == 3
    with pytest.raises(InputError, match="nothing to try"):
        pairs_of(column, [], ["sound"])


def test_a_tableau_of_the_users_own_file_can_be_advised(tmp_path, limits):
    own = tmp_path / "own.toml"
    own.write_text(
        '[[tableau]]\nname = "Mine"\norder = 1\na_explicit = [["0", "0"], ["1", "0"]]\n'
        'b_explicit = ["1", "0"]\na_implicit = [["0", "0"], ["0", "1"]]\nb_implicit = ["0", "1"]\n'
    )
    advice = TINY["advice"] | {"tableaux": ["mine"], "splits": ["sound"]}
    column = build(TINY | {"advice": advice | {"tableau_file": "own.toml"}}, folder=tmp_path)
    limits["Mine", "sound"] = records.limit(tableau="Mine", split="sound", stable_step_s=1e-3)
    assert [row.tableau for row in advise(column).rows] == ["Mine"]


def test_work_items_are_plain_data(column):
    item = WorkItem(pickle.dumps(column), "ARS(2,3,2)", "sound")
    assert pickle.loads(pickle.dumps(item)) == item


def test_the_whole_path():
    found = advise(build(quick.DEFINITION))
    for row in found.rows:
        assert row.advised_step_s <= 0.9 * row.stable_step_s
        assert row.strict_step_s <= row.stable_step_s
        assert row.bites is not None
        assert row.binding
    assert len(found.rows) == quick.PAIRS
    assert found.rows[0].headroom is not None


def test_the_best_row_says_how_far_the_column_may_change(column, limits):
    found = advise(column)
    best, *others = found.rows
    assert best.headroom.step_s == best.advised_step_s
    assert (best.headroom.tableau, best.headroom.split) == (best.tableau, best.split)
    assert [room.quantity for room in best.headroom.rooms] == list(UNITS)
    assert all(row.headroom is None for row in others)


def test_headroom_that_cannot_be_found_stops_nothing(column, limits, monkeypatch):
    def fail(*_, **__):
        raise CalculationError("no step is stable")

    monkeypatch.setattr(headroom, "room", fail)
    rooms = advise(column).rows[0].headroom.rooms
    assert {room.reason for room in rooms} == {"no step is stable"}
    assert [room.present for room in rooms][-2:] == [3000.0, pytest.approx(600.0)]


def test_where_nothing_is_advised_there_is_no_headroom(column, limits):
    limits["ARS(2,3,2)", "sound"] = records.limit(stable_step_s=None)
    found = advise(column, tableaux=["ars232"], splits=["sound"])
    assert found.rows[0].headroom is None


def test_a_calibration_takes_the_place_of_safety(column, limits):
    seen = records.safety_factor(tableau="ARS(2,3,2)", split="sound", lower=0.5, upper=1.1)
    plain, found = advise(column), advise(column, calibration=seen)
    for row in found.rows:
        assert row.safety == 0.5
        assert row.advised_step_s <= 0.5 * row.stable_step_s
    assert all(row.safety == 0.9 for row in plain.rows)
    assert found.provenance.tolerances["calibrated_lower"] == 0.5
    assert "calibrated_lower" not in plain.provenance.tolerances


def test_a_calibrated_share_that_binds_is_named(limits):
    advice = {key: value for key, value in TINY["advice"].items() if key != "divides_s"}
    seen = records.safety_factor(tableau="ARS(2,3,2)", split="sound", lower=0.95, upper=None)
    found = advise(build(TINY | {"advice": advice}), calibration=seen)
    bound = {(row.tableau, row.split): row for row in found.rows}
    own, other = bound["ARS(2,3,2)", "sound"], bound["ARS(2,3,3)", "sound"]
    assert own.advised_step_s == pytest.approx(0.95 * 3.0)
    assert own.binding.endswith("; at most 95 % of it, as calibrated")
    assert other.advised_step_s <= 0.9 * 3.0


def test_a_calibration_with_another_tolerance_is_refused(column, limits):
    seen = records.safety_factor(efolding_s=3600.0, transient_limit=10.0)
    with pytest.raises(InputError) as caught:
        advise(column, calibration=seen)
    assert len(caught.value.problems) == 2
    assert "efolding_s = 3600" in caught.value.problems[0]


def test_an_item_is_carried_out_alike_twice(column, limits):
    item = WorkItem(pickle.dumps(column), "ARS(2,3,2)", "sound", 2.0)
    assert carry_out(item) == carry_out(item)
