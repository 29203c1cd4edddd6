import json
from dataclasses import replace
from math import exp, inf

import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.read import build
from levelstride.column.variants import with_levels
from levelstride.errors import CalculationError, InputError
from levelstride.execution.processes import processes
from levelstride.execution.serial import serial
from levelstride.results.export import to_json
from levelstride.results.stretching import Binding, StretchPoint
from levelstride.results.wording import CAUTION
from levelstride.splitting import resolve
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies import stretch_point
from levelstride.studies.level_families import Family
from levelstride.studies.limit import NO_WIND
from levelstride.studies.stretch import stretch
from levelstride.studies.stretch_between import changes, close_in
from levelstride.studies.stretch_point import Members, carries
from levelstride.tableaux import find

TINY = {
    "title": "tiny",
    "levels": {"kind": "table", "heights_m": [0.0, 1500.0, 3600.0, 7000.0]},
    "air": {"kind": "isothermal", "temperature_k": 250.0},
    "horizontal": {"grid_spacing_m": 1000.0},
}
TOLERANCE = Tolerance(86400.0, 1000.0)
ONE = {"tableaux": ["ars232"], "splits": ["all-explicit"]}


def binds(**changed):
    plain = {
        "criterion": "spectrum",
        "air": "dry",
        "kind": "sound",
        "wavenumber_per_m": 3e-3,
        "wavelength_m": 2000.0,
        "layer_lowest": 0,
        "layer_highest": 3,
        "bottom_m": 0.0,
        "top_m": 140.0,
    }
    return Binding(**(plain | changed))


def point(lowest_layer_m, stable_step_s, **changed):
    plain = {
        "ratio": 1.2,
        "unbounded": False,
        "layers": 3,
        "lid_m": 7000.0,
        "own": False,
        "binds": binds(),
    }
    return StretchPoint(
        lowest_layer_m=lowest_layer_m, stable_step_s=stable_step_s, **(plain | changed)
    )


@pytest.fixture(name="column", scope="module")
def _column():
    return build(TINY)


@pytest.fixture(name="steps")
def _steps(monkeypatch):
    """Let members have made-up steps: a function of lowest layer or lid that is put in here."""
    made = {}

    def at(self, coordinate, *_, turn=0):
        column = with_levels(self.column, self.family.at(coordinate))
        step, binding = made["up"](coordinate)
        return point(
            column.levels.interfaces_m[1],
            step if step != inf else None,
            unbounded=step == inf,
            lid_m=column.levels.top_m,
            layers=column.levels.nlev,
            own=coordinate == self.family.own,
            binds=binding if step not in (inf, None) else None,
        )

    monkeypatch.setattr(Members, "at", at)
    return made


class TestCloseIn:
    @staticmethod
    def found(step_of, target_s, thick=1000.0, thin=1.0):
        asked = []

        def at(lowest, *_):
            asked.append(lowest)
            return point(lowest, step_of(lowest))

        last, lost = close_in(
            at,
            lambda one: one.lowest_layer_m,
            point(thick, step_of(thick)),
            point(thin, step_of(thin)),
            target_s=target_s,
        )
        return last, lost, len(asked)

    @given(st.floats(0.1, 3.0), st.floats(0.02, 0.98))
    def test_a_power_of_the_thickness_takes_two_looks(self, power, place):
        step_of = lambda lowest: lowest**power  # noqa: E731
        where = 1000.0**place
        last, lost, looks = self.found(step_of, step_of(where))
        assert lost.lowest_layer_m < where * (1.0 + 1e-9)
        assert last.lowest_layer_m > where * (1.0 - 1e-9)
        assert last.lowest_layer_m / lost.lowest_layer_m <= 1.01 * (1.0 + 1e-9)
        assert looks <= 4

    @given(st.floats(1.5, 900.0), st.floats(0.05, 4.0), st.floats(0.0, 4.0))
    def test_kinks_and_jumps_are_bracketed(self, kink, below, above):
        def step_of(lowest):
            return (lowest / kink) ** (above if lowest > kink else below)

        for target in (1.0, step_of(30.0), 0.5 * (step_of(1.0) + step_of(1000.0))):
            if not step_of(1.0) < target <= step_of(1000.0):
                continue
            last, lost, looks = self.found(step_of, target)
            assert last.stable_step_s >= target > lost.stable_step_s
            assert last.lowest_layer_m / lost.lowest_layer_m <= 1.01 * (1.0 + 1e-9)
            assert looks <= 2 * 10 + 4

    def test_no_step_and_no_limit_are_halved(self):
        last, lost, looks = self.found(lambda lowest: 5.0 if lowest > 20.0 else None, 1.0)
        assert lost.lowest_layer_m <= 20.0 < last.lowest_layer_m <= 1.01 * lost.lowest_layer_m
        assert looks <= 11

    def test_neighbours_of_a_curve_take_two_looks(self):
        step_of = lambda lowest: 4.0 / (1.0 + 30.0 / lowest)  # noqa: E731
        last, lost, looks = self.found(step_of, 1.3, thick=16.5, thin=12.7)
        exact = 30.0 / (4.0 / 1.3 - 1.0)
        assert lost.lowest_layer_m < exact <= last.lowest_layer_m <= 1.01 * lost.lowest_layer_m
        assert looks == 2


@pytest.mark.parametrize(
    ("changed", "named"),
    [
        ({}, ()),
        ({"criterion": "transient"}, ()),
        ({"wavelength_m": 2600.0}, ()),
        ({"bottom_m": 130.0, "top_m": 300.0}, ()),
        ({"wavelength_m": 9000.0}, ("wavenumber",)),
        ({"kind": "gravity"}, ("kind",)),
        ({"air": "moist"}, ("air",)),
        ({"bottom_m": 140.0, "top_m": 900.0}, ("layers",)),
        ({"criterion": "courant", "kind": "transport"}, ("criterion", "kind")),
        ({"wavelength_m": None}, ("wavenumber",)),
    ],
)
def test_what_counts_as_another_wave(changed, named):
    assert changes(binds(), binds(**changed), 1000.0) == named
    assert changes(binds(**changed), binds(), 1000.0) == named


def test_long_waves_take_turns():
    assert not changes(binds(wavelength_m=8000.0), binds(wavelength_m=64e3), 1000.0)
    assert changes(binds(wavelength_m=7000.0), binds(wavelength_m=64e3), 1000.0)
    assert changes(None, binds(), 1000.0) == ("criterion",)
    assert not changes(None, None, 1000.0)


class TestMadeUpCurves:
    def test_the_target_is_bracketed_and_crossings_are_named(self, column, steps):
        long, short = binds(wavelength_m=64e3, kind="gravity"), binds()

        def up(lowest):
            sound, gravity = 2.0 * (lowest / 1e3) ** 0.1, 2.2 * (lowest / 1e3) ** 0.6
            return (sound, short) if sound < gravity else (gravity, long)

        steps["up"] = up
        found = stretch(column, target_step_s=1.85, points=8, **ONE)
        (row,) = found.rows
        exact = 1e3 * (1.85 / 2.2) ** (1.0 / 0.6)
        assert row.lost.lowest_layer_m < exact <= row.thinnest_lowest_layer_m
        assert row.thinnest_lowest_layer_m <= 1.01 * row.lost.lowest_layer_m
        assert not row.never_bites
        assert "1.85 s is carried to a lowest layer of 7" in row.verdict
        assert "gravity wave of 64.0 km" in row.verdict
        (crossing,) = row.crossings
        meet = 1e3 * (2.0 / 2.2) ** 2.0
        assert crossing.below_lowest_layer_m <= meet <= crossing.above_lowest_layer_m
        assert crossing.above_lowest_layer_m <= 1.05 * 1.0001 * crossing.below_lowest_layer_m
        assert set(crossing.changes) == {"kind", "wavenumber"}
        assert "gravity wave of 64.0 km" in crossing.sentence
        assert "takes over from sound wave of 2.0 km" in crossing.sentence

    def test_a_target_that_is_never_lost(self, column, steps):
        steps["up"] = lambda lowest: (2.0 + 1e-4 * lowest, binds())
        (row,) = stretch(column, target_step_s=1.9, points=6, **ONE).rows
        assert row.never_bites
        assert row.lost is None
        assert row.thinnest_lowest_layer_m == row.curve[-1].lowest_layer_m
        assert "over the whole range" in row.verdict
        assert "does not limit the step" in row.verdict
        assert "by spectrum: sound wave of 2.0 km, layers 0-3 (0-140 m)" in row.verdict

    def test_nothing_bites_at_all(self, column, steps):
        steps["up"] = lambda _: (inf, None)
        (row,) = stretch(column, target_step_s=1e3, points=5, **ONE).rows
        assert row.never_bites
        assert "nothing bites" in row.verdict
        assert all(one.unbounded and one.stable_step_s is None for one in row.curve)
        assert row.crossings == ()

    def test_no_set_carries_the_target(self, column, steps):
        steps["up"] = lambda lowest: (lowest**0.1, binds())
        (row,) = stretch(column, target_step_s=100.0, points=5, **ONE).rows
        assert row.thinnest_lowest_layer_m is row.largest_ratio is row.lost is None
        assert not row.never_bites
        assert row.interfaces_m == ()
        assert "no set of the family carries 100 s" in row.verdict
        assert "a lowest layer of 2.333 km" in row.verdict

    def test_no_step_is_stable_on_some_sets(self, column, steps):
        steps["up"] = lambda lowest: (2.0 if lowest > 1000.0 else None, binds())
        (row,) = stretch(column, target_step_s=1.0, points=6, **ONE).rows
        assert 1000.0 < row.thinnest_lowest_layer_m <= 1010.0
        assert "no step is stable, however short" in row.verdict

    def test_the_own_set_fails_but_a_coarser_one_does_not(self, column, steps):
        steps["up"] = lambda lowest: (1.0 if lowest < 2000.0 else 3.0, binds())
        (row,) = stretch(column, target_step_s=2.0, points=8, **ONE).rows
        assert 2000.0 <= row.thinnest_lowest_layer_m <= 2020.0
        assert "the user's own set does not carry it" in row.verdict

    def test_a_step_that_comes_back_is_not_recommended(self, column, steps):
        steps["up"] = lambda lowest: (1.0 if 900.0 < lowest < 1200.0 else 3.0, binds())
        (row,) = stretch(column, target_step_s=2.0, points=12, **ONE).rows
        assert 1200.0 <= row.thinnest_lowest_layer_m <= 1212.0
        assert "carry it again, not recommended" in row.verdict

    def test_a_moving_lid_is_bracketed_by_the_lid(self, column, steps):
        steps["up"] = lambda lid: (exp(-lid / 7000.0), binds())
        found = stretch(
            column, target_step_s=exp(-10.0 / 7.0), points=7, keep="lowest-layers", **ONE
        )
        (row,) = found.rows
        assert found.lowest == 1
        assert row.lid_m <= 10e3 < row.lost.lid_m <= 1.01 * row.lid_m
        assert row.thinnest_lowest_layer_m == 1500.0
        assert "a lid at" in row.verdict
        assert row.interfaces_m[-1] == row.lid_m

    def test_the_row_at_the_top_is_that_of_the_thinnest_layer(self, column, steps):
        steps["up"] = lambda lowest: (lowest**0.1, binds())
        found = stretch(
            column, tableaux=["ars232", "ars343"], splits=["sound", "sound+buoyancy"],
            target_step_s=2.0, points=4,
        )  # fmt: skip
        assert len(found.rows) == 4
        assert found.best == 0
        plain = json.loads(to_json(found))
        for key in ("target_step_s", "tableau", "split", "thinnest_lowest_layer_m", "curve"):
            assert plain[key] == plain["rows"][0][key]
        assert {"lowest_layer_m", "ratio", "stable_step_s"} <= plain["curve"][0].keys()
        assert plain["caution"] == CAUTION
        assert any(NO_WIND in note for note in found.notes)

    def test_progress_ends_with_all_done(self, column, steps):
        steps["up"] = lambda lowest: (lowest**0.1, binds())
        told = []
        stretch(
            column, target_step_s=2.0, points=4,
            progress=lambda *news: told.append(news), **ONE,
        )  # fmt: skip
        assert told[0] == (0, 4, "ARS(2,3,2) with all-explicit")
        assert told[-1][:2] == (5, 5)


@pytest.fixture(name="found", scope="module")
def _found(column):
    with serial() as executor:
        return stretch(column, target_step_s=1.8, points=4, executor=executor, **ONE)


def plain_step(column, lowest_m):
    """Stable step of a member, searched afresh [s]."""
    heights = Family(column.levels.interfaces_m).at(lowest_m)
    verdict = ColumnVerdict(with_levels(column, heights), resolve("all-explicit"), find("ars232"))
    return verdict.stable_step(TOLERANCE).step_s


def test_bracket_and_curve_are_those_of_plain_searches(column, found):
    (row,) = found.rows
    assert not row.never_bites
    for one in row.curve:
        assert one.stable_step_s == plain_step(column, one.lowest_layer_m)
    assert plain_step(column, row.thinnest_lowest_layer_m) >= 1.8
    assert plain_step(column, row.thinnest_lowest_layer_m / 1.01) < 1.8
    own = next(one for one in row.curve if one.own)
    assert own.lowest_layer_m == 1500.0
    assert row.own_stable_step_s == own.stable_step_s
    assert row.interfaces_m[1] == pytest.approx(row.thinnest_lowest_layer_m, rel=1e-12)
    assert own.binds.kind == "sound"


def test_every_executor_gives_the_same_answer(column, found):
    with processes(2) as executor:
        again = stretch(column, target_step_s=1.8, points=4, executor=executor, **ONE)
    alone = stretch(column, target_step_s=1.8, points=4, **ONE)
    for other in (again, alone):
        provenance = replace(other.provenance, created_utc=found.provenance.created_utc)
        assert replace(other, provenance=provenance) == found


def test_the_target_is_the_advised_step_by_default(column):
    asked = build(TINY | {"advice": {"divides_s": [60.0]}})
    (row,) = stretch(asked, points=3, **ONE).rows
    assert 60.0 / row.target_step_s == pytest.approx(round(60.0 / row.target_step_s))
    assert row.target_step_s <= 0.9 * row.own_stable_step_s
    assert row.target_reason != "given"
    assert carries(next(one for one in row.curve if one.own), row.target_step_s)


def test_the_air_that_binds_is_named():
    cold, warm = (
        {"kind": "isothermal", "temperature_k": k, "name": name}
        for k, name in ((230.0, "cold"), (300.0, "warm"))
    )
    column = build(TINY | {"air": [cold, warm]})
    (row,) = stretch(column, target_step_s=1.0, points=3, **ONE).rows
    assert {one.binds.air for one in row.curve} == {"warm"}
    assert 'air "warm"' in row.verdict


def test_layers_and_mending_are_work_too(column, monkeypatch):
    asked = []

    def fake(what):
        def work(_, **options):
            asked.append((what, options))
            raise CalculationError("not found, for once")

        return work

    monkeypatch.setattr("levelstride.studies.stretch_asides.mend", fake("mend"))
    monkeypatch.setattr("levelstride.studies.stretch_asides.layer_sensitivity", fake("layers"))
    found = stretch(
        column, target_step_s=1.7, points=3, layers=True, mend=True, keep_lowest=True,
        largest_ratio=1.4, **ONE,
    )  # fmt: skip
    assert found.rows[0].mended is found.rows[0].layer_costs is None
    assert {what for what, _ in asked} == {"mend", "layers"}
    options = dict(asked)["mend"]
    assert (options["target_step_s"], options["keep_lowest"], options["largest_ratio"]) == (
        1.7, True, 1.4,
    )  # fmt: skip
    assert sum("not found, for once" in note for note in found.notes) == 2


def test_a_lid_below_the_absorbing_layer_is_left_out(monkeypatch):
    column = build(TINY | {"upper_damping": {"rate_per_s": 0.1, "base_m": 5000.0}})
    monkeypatch.setattr(
        stretch_point.ColumnVerdict,
        "stable_step",
        lambda *_: stretch_point.StableStep(None, None, None),
    )
    found = stretch(column, target_step_s=1.0, points=5, keep="lowest-layers", **ONE)
    assert len(found.curve) == 5
    assert 5000.0 < found.curve[0].lid_m < 5020.0
    assert any("upper_damping.base_m" in note for note in found.notes)


def test_defaults_are_those_of_the_file_or_a_short_list(column, steps):
    steps["up"] = lambda lowest: (lowest**0.1, binds())

    def names(of):
        rows = stretch(of, target_step_s=1.0, points=3).rows
        return [row.tableau for row in rows], {row.split for row in rows}

    tableaux, splits = names(column)
    assert len(tableaux) == 6
    assert splits == {"sound+buoyancy", "sound+buoyancy+divergence"}
    listed = {"tableaux": ["ars343"], "splits": ["sound"]}
    assert names(build(TINY | {"advice": listed})) == (["ARS(3,4,3)"], {"sound"})
    split = {"buoyancy": "implicit", "stratification": "after-step"}
    tableaux, splits = names(build(TINY | {"split": split}))
    assert splits == {"all-explicit, buoyancy implicit, stratification after-step"}
    assert len(tableaux) == 3


def test_the_lowest_slope_gradient_is_told_and_can_be_chosen(steps):
    steps["up"] = lambda lowest: (lowest**0.1, binds())
    column = build(TINY | {"terrain": {"slope": 0.1}})
    found = stretch(column, target_step_s=1.0, points=3, **ONE)
    assert found.lowest_slope_gradient == "half"
    assert any("lowest slope gradient is taken as half" in note for note in found.notes)
    found = stretch(column, target_step_s=1.0, points=3, lowest_slope_gradient="full", **ONE)
    assert found.lowest_slope_gradient == "full"


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"target_step_s": 0.0}, "target step: received 0.0 s"),
        ({"target_step_s": float("nan")}, "target step: received nan s"),
        ({"points": 2}, "points: received 2"),
        ({"efolding_s": 0.0}, "e-folding time: received 0.0 s"),
        ({"keep": "everything"}, "keep: unknown 'everything'"),
        ({"keep": "lowest-layers", "lowest": 3}, "lowest: received 3; with 3 layers"),
        ({"tableaux": ["ars322"]}, "ars322"),
        ({"splits": ["sond"]}, "sond"),
    ],
)
def test_bad_input(column, options, words):
    with pytest.raises(InputError, match=words):
        stretch(column, **(ONE | options))
