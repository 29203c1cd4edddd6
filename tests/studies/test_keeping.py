"""What is kept is found again, and only what a change touches is done again."""

import copy

import pytest

from examples import records
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.execution.serial import serial
from levelstride.results.kept import KeptItems
from levelstride.studies import best_row, headroom, keys, work_item
from levelstride.studies.advise import CurrentConfiguration, advise, advise_plans, count_parts_left
from levelstride.studies.best_row import PARTS
from levelstride.studies.gather import count_kept
from levelstride.studies.plan import plan_advice

TINY = {
    "title": "tiny",
    "levels": {"kind": "geometric", "layers": 6, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
    "advice": {
        "tableaux": ["ARS(2,3,2)", "ars233"],
        "splits": ["sound", "sound+buoyancy"],
        "divides_s": [600.0],
    },
}


@pytest.fixture(name="searched", autouse=True)
def _searched(monkeypatch):
    """Let every search answer at once; returns which were made."""
    made = []

    def limit(column, *, tableau, split, what_if, certify=False):
        made.append((column.title, tableau, split))
        return records.limit(
            tableau=tableau, split=split, stable_step_s=3.0, lowest_slope_gradient=None
        )

    monkeypatch.setattr(work_item, "limit", limit)
    monkeypatch.setattr(best_row, "ask_what_if", lambda column, found, *_: found)
    monkeypatch.setattr(headroom, "room", records.room)
    return made


def changed(path, value):
    definition = copy.deepcopy(TINY)
    *tables, key = path.split(".")
    place = definition
    for table in tables:
        place = place.setdefault(table, {})
    place[key] = value
    return build(definition)


def rows(advice):
    return [(row.tableau, row.split, row.advised_step_s, row.stable_step_s) for row in advice.rows]


def test_the_same_question_is_answered_from_what_was_kept(tmp_path, searched):
    kept, column = KeptItems(tmp_path), build(TINY)
    first = advise(column, kept=kept)
    assert len(searched) == 4
    assert count_kept(plan_advice(column).items, kept) == 4
    second = advise(column, kept=KeptItems(tmp_path))
    assert len(searched) == 4
    assert rows(second) == rows(first)


@pytest.mark.parametrize(
    ("path", "value", "searches", "done"),
    [
        ("title", "another", 0, 0),
        ("advice.cost_solve", 2.0, 0, 0),
        ("advice.tableaux", ["ARS(2,3,2)", "ars233", "ars343"], 2, 2),
        ("advice.splits", ["sound", "sound+divergence"], 2, 2),
        ("advice.tableaux", ["ars233"], 0, 0),
        ("split", {"name": "sound"}, 0, 0),
        ("advice.divides_s", [900.0], 0, 4),
        ("advice.safety", 0.8, 0, 4),
        ("advice.frequency_error", 0.02, 0, 4),
        ("advice.efolding_s", 3600.0, 4, 4),
        ("advice.transient_limit", 100.0, 4, 4),
        ("air.temperature_k", 261.0, 4, 4),
        ("levels.layers", 7, 4, 4),
        ("terrain.slope", 0.01, 8, 4),
    ],
)
def test_a_change_invalidates_exactly_what_it_touches(
    tmp_path, searched, path, value, searches, done
):
    kept = KeptItems(tmp_path)
    advise(build(TINY), kept=kept)
    searched.clear()
    column = changed(path, value)
    items = plan_advice(column).items
    assert len(items) - count_kept(items, kept) == done
    advise(column, kept=kept)
    assert len(searched) == searches
    assert count_kept(plan_advice(build(TINY)).items, kept) == 4


def test_a_certified_limit_is_another_answer(tmp_path, searched):
    kept, column = KeptItems(tmp_path), build(TINY)
    advise(column, kept=kept)
    searched.clear()
    items = plan_advice(column, certify=True).items
    assert all(planned.item.certify for planned in items)
    assert count_kept(items, kept) == 0
    advise(column, kept=kept, certify=True)
    assert len(searched) == 4
    assert count_kept(items, kept) == count_kept(plan_advice(column).items, kept) == 4


def test_another_version_keeps_nothing(tmp_path, monkeypatch):
    kept = KeptItems(tmp_path)
    advise(build(TINY), kept=kept)
    monkeypatch.setattr(keys, "__version__", "99")
    assert count_kept(plan_advice(build(TINY)).items, kept) == 0


def test_a_changed_tableau_of_the_user_is_another_one(tmp_path):
    text = (
        '[[tableau]]\nname = "Mine"\norder = 1\na_explicit = [["0", "0"], ["1", "0"]]\n'
        'b_explicit = ["1", "0"]\na_implicit = [["0", "0"], ["0", "1"]]\nb_implicit = ["0", "1"]\n'
    )
    found = []
    for name, content in (
        ("one", text),
        ("two", text),
        ("three", text.replace('"0", "1"]]', '"1/4", "3/4"]]')),
    ):
        (tmp_path / f"{name}.toml").write_text(content)
        advice = TINY["advice"] | {"tableaux": ["mine"], "tableau_file": f"{name}.toml"}
        plan = plan_advice(build(TINY | {"advice": advice}, folder=tmp_path))
        found.append([planned.of_limit for planned in plan.items])
    assert found[0] == found[1] != found[2]


def test_the_current_step_is_judged_under_a_kept_limit(tmp_path, searched):
    kept = KeptItems(tmp_path)
    advise(build(TINY), kept=kept)
    searched.clear()
    for step_s in (2.4, 2.5):
        found = advise(
            build(TINY), kept=kept, current=CurrentConfiguration(step_s, "ars232", "sound")
        )
        assert found.current.share_of_limit == pytest.approx(step_s / 3.0)
    assert not searched


def test_items_are_kept_the_moment_they_end(tmp_path, monkeypatch, searched):
    kept = KeptItems(tmp_path)
    answer = work_item.limit

    def break_off(column, **asked):
        if len(searched) == 3:
            raise KeyboardInterrupt
        return answer(column, **asked)

    monkeypatch.setattr(work_item, "limit", break_off)
    with serial() as executor, pytest.raises(KeyboardInterrupt):
        advise(build(TINY), kept=kept, executor=executor)
    assert count_kept(plan_advice(build(TINY)).items, kept) == 3


def test_progress_begins_with_what_was_kept(tmp_path):
    kept, seen = KeptItems(tmp_path), []
    advise(build(TINY), tableaux=["ars232"], kept=kept)
    advise(build(TINY), kept=kept, progress=lambda *told: seen.append(told))
    assert seen[0] == (2, 4 + PARTS, "ARS(2,3,3) with sound")
    assert seen[-1] == (4 + PARTS, 4 + PARTS, "")


def test_many_columns_share_the_work_and_one_that_fails_stops_no_other(monkeypatch, searched):
    answer = work_item.limit

    def fail(column, **asked):
        if column.title == "bad":
            raise InputError("mend this")
        if column.title == "worse":
            raise RuntimeError("a fault")
        return answer(column, **asked)

    monkeypatch.setattr(work_item, "limit", fail)
    titles = ("one", "bad", "worse", "two")
    plans = [plan_advice(changed("title", title)) for title in titles]
    seen = []
    with serial() as executor:
        found = dict(
            advise_plans(plans, executor=executor, progress=lambda *told: seen.append(told))
        )
    assert found[0].title == "one"
    assert found[3].title == "two"
    assert isinstance(found[1], InputError)
    assert isinstance(found[2], RuntimeError)
    assert not isinstance(found[1], CalculationError)
    total = 4 * (4 + PARTS)
    assert seen[0] == (0, total, "one: ARS(2,3,2) with sound")
    assert seen[-1][:2] == (total, total)


def test_the_headroom_of_the_best_row_is_kept_by_step(tmp_path, monkeypatch):
    asked, answer = [], headroom.room

    def count(column, quantity, **options):
        asked.append((quantity, options["step_s"]))
        return answer(column, quantity, **options)

    monkeypatch.setattr(headroom, "room", count)
    kept = KeptItems(tmp_path)
    plan = plan_advice(build(TINY))
    assert count_parts_left(plan, kept) == 4 + PARTS
    first = advise(build(TINY), kept=kept)
    assert len(asked) == PARTS - 1
    assert count_parts_left(plan, kept) == 0
    assert advise(build(TINY), kept=kept).rows[0].headroom == first.rows[0].headroom
    assert len(asked) == PARTS - 1
    advise(changed("advice.safety", 0.5), kept=kept)
    assert len(asked) == 2 * (PARTS - 1)
    for path in (tmp_path / "kept").glob("*.json"):
        path.unlink()
    assert count_parts_left(plan, kept) == 4 + PARTS


def test_a_calibration_changes_the_choice_and_not_the_limit(tmp_path, searched):
    kept = KeptItems(tmp_path)
    advise(build(TINY), kept=kept)
    searched.clear()
    seen = records.safety_factor(lower=0.7)
    items = plan_advice(build(TINY), calibration=seen).items
    assert count_kept(items, kept) == 0
    advise(build(TINY), kept=kept, calibration=seen)
    assert not searched
    assert count_kept(items, kept) == 4
