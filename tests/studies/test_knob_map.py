"""Maps over numbers of the column file, checked against searches of single columns."""

import pytest

from levelstride.accuracy.by_kind import step_wave_errors
from levelstride.column.knobs import with_value
from levelstride.column.read import build
from levelstride.errors import CalculationError, InputError
from levelstride.execution.serial import serial
from levelstride.results.kept import KeptItems
from levelstride.splitting.splitting import resolve
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies import knob_map as module
from levelstride.studies.knob_map import knob_map
from levelstride.tableaux.lookup import find

COLUMN = build({
    "title": "six layers",
    "levels": {"kind": "geometric", "layers": 6, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 3000.0},
})  # fmt: skip
ONE = {"tableaux": ["ars232"], "splits": ["sound+buoyancy"]}
TOLERANCE = Tolerance(86400.0, 1000.0)


@pytest.fixture(name="kept")
def _kept(tmp_path):
    return KeptItems(tmp_path / "out")


def single(key, value):
    column = with_value(COLUMN, key, value)
    verdict = ColumnVerdict(column, resolve("sound+buoyancy"), find("ars232"))
    return column, verdict.stable_step(TOLERANCE).step_s


def test_every_point_is_what_its_own_column_gives():
    found = knob_map(COLUMN, vary={"horizontal.grid_spacing_m": "1500:3000:2:log"}, **ONE)
    (row,) = found.rows
    assert (row.tableau, row.split) == ("ARS(2,3,2)", "sound+buoyancy")
    assert found.share_of_stable == COLUMN.advice.safety
    assert found.knobs[0].present == 3000.0
    for point in row.points:
        column, stable_s = single("horizontal.grid_spacing_m", point.values[0])
        assert point.stable_step_s == stable_s
        assert point.step_s == 0.9 * stable_s
        assert point.binds.startswith("spectrum")
        errors = step_wave_errors(
            column, resolve("sound+buoyancy"), find("ars232"), point.step_s, resolved_only=True
        )
        assert point.frequency_error == pytest.approx(errors.resolved.frequency_error)
        assert point.amplitude_change_per_hour == errors.resolved.worst_change_per_hour


def test_two_knobs_at_a_given_step():
    found = knob_map(
        COLUMN,
        vary={"terrain.slope": [0.0, 0.4], "horizontal.grid_spacing_m": [1000.0, 3000.0]},
        step_s=3.0,
        **ONE,
    )
    points = found.rows[0].points
    assert [point.values for point in points] == [
        (0.0, 1000.0), (0.0, 3000.0), (0.4, 1000.0), (0.4, 3000.0),
    ]  # fmt: skip
    assert [point.stable for point in points] == [False, True, False, True]
    assert {point.step_s for point in points} == {3.0}
    assert found.share_of_stable is None
    assert points[1].stable_step_s == single("horizontal.grid_spacing_m", 3000.0)[1]


def test_points_are_shared_out_and_kept(kept, monkeypatch):
    told = []
    asked = {"vary": {"terrain.slope": "0:0.2:3"}, "kept": kept, **ONE}
    with serial() as executor:
        first = knob_map(
            COLUMN, executor=executor, progress=lambda *what: told.append(what), **asked
        )
    assert told[0] == (0, 3, "ARS(2,3,2) with sound+buoyancy, terrain.slope 0")
    assert told[-1] == (3, 3, "")

    def never(item):
        raise AssertionError("asked again")

    monkeypatch.setattr(module, "find_point", never)
    again = knob_map(COLUMN, **asked)
    assert again.rows == first.rows
    asked["vary"] = {"terrain.slope": "0:0.1:2"}
    assert knob_map(COLUMN, **asked).rows[0].points == first.rows[0].points[:2]
    with pytest.raises(AssertionError, match="asked again"):
        knob_map(COLUMN, step_s=1.0, **asked)


def test_a_point_without_a_stable_step_says_why(monkeypatch):
    def fail(self, tolerance):
        raise CalculationError("no step is stable")

    monkeypatch.setattr(ColumnVerdict, "stable_step", fail)
    asked = {"vary": {"terrain.slope": [0.0, 0.1]}, **ONE}
    for point in knob_map(COLUMN, **asked).rows[0].points:
        assert (point.problem, point.step_s) == ("no step is stable", None)
    for point in knob_map(COLUMN, step_s=2.0, **asked).rows[0].points:
        assert (point.problem, point.stable) == ("no step is stable", False)
        assert point.frequency_error > 0.0


def test_values_that_make_no_column_are_told():
    with pytest.raises(InputError) as caught:
        knob_map(
            COLUMN,
            vary={"upper_damping.base_m": [5000.0, 8000.0], "levels.top_m": [7000.0, 9000.0]},
            **ONE,
        )
    assert caught.value.problems
    with pytest.raises(InputError, match="more than 10000 points"):
        knob_map(
            COLUMN,
            vary={"terrain.slope": "0:1:200", "horizontal.grid_spacing_m": "500:900:200"},
            **ONE,
        )
    with pytest.raises(InputError, match="step: received -1"):
        knob_map(COLUMN, vary={"terrain.slope": "0:1:2"}, step_s=-1.0, **ONE)
