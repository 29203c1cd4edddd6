"""How far one quantity may go: held against full searches and against textbook limits."""

import pytest

from examples import records
from levelstride.column import knobs
from levelstride.column.read import build
from levelstride.column.variants import with_levels
from levelstride.errors import CalculationError, InputError
from levelstride.operator.terms import CATALOGUE
from levelstride.results.headroom import UNITS
from levelstride.splitting.splitting import resolve
from levelstride.stability.courant import courant_limit, rows_hold
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies import headroom as study
from levelstride.studies import holding
from levelstride.studies.headroom import headroom, room
from levelstride.studies.level_families import Family
from levelstride.studies.quantities import QUANTITIES
from levelstride.studies.stretched_levels import NoMemberError
from levelstride.tableaux.lookup import find

TINY = {
    "levels": {"kind": "geometric", "layers": 5, "top_m": 8000.0, "lowest_layer_m": 400.0},
    "air": {"kind": "isothermal", "temperature_k": 260.0},
    "horizontal": {"grid_spacing_m": 2000.0},
}
TABLEAU, SPLIT = "ARS(2,3,2)", "sound+buoyancy"
TOLERANCE = Tolerance(86400.0, 1000.0)


def stable_step(column, tableau=TABLEAU, split=SPLIT):
    found = [
        ColumnVerdict(one, resolve(split), find(tableau)).stable_step(TOLERANCE).step_s
        for one in knobs.lowest_slope_gradients(column)
    ]
    return min(10_000.0 if step is None else step for step in found)


@pytest.fixture(name="column", scope="module")
def _column():
    return build(TINY)


@pytest.fixture(name="step_s", scope="module")
def _step_s(column):
    return 0.8 * stable_step(column)


@pytest.mark.parametrize("quantity", ["slope", "grid_spacing_m"])
def test_the_step_holds_on_one_side_and_not_on_the_other(column, step_s, quantity):
    found = room(column, quantity, tableau=TABLEAU, split=SPLIT, step_s=step_s)
    assert found.reason is None
    assert not found.unbounded
    assert max(found.carried / found.lost, found.lost / found.carried) <= 1.01
    changed = QUANTITIES[quantity].changed
    assert stable_step(changed(column, found.carried)) * 1.001 >= step_s
    assert stable_step(changed(column, found.lost)) < 1.001 * step_s
    assert found.criterion
    assert found.wavelength_m is not None


def test_columns_that_march_are_bracketed_as_well():
    levels = {"kind": "geometric", "layers": 27, "top_m": 8000.0, "lowest_layer_m": 100.0}
    many = build(TINY | {"levels": levels})
    asked = {"tableau": TABLEAU, "split": SPLIT, "step_s": 2.0, "holds_now": True}
    found = room(many, "grid_spacing_m", **asked)
    assert found.carried <= 1.01 * found.lost
    finer = knobs.with_grid_spacing(many, found.carried)
    assert 2.0 <= 1.001 * stable_step(finer) < 2.04
    assert found.criterion


@pytest.mark.parametrize("layers", [5, 27])
def test_a_wave_that_grows_is_found_among_many(layers):
    levels = {"kind": "geometric", "layers": layers, "top_m": 8000.0, "lowest_layer_m": 100.0}
    verdict = ColumnVerdict(build(TINY | {"levels": levels}), resolve(SPLIT), find(TABLEAU))
    problems = verdict.search.problems()
    waves = holding.Waves(verdict, TOLERANCE)
    for dt in (2.0, 4.0, 40.0):
        growing = [problem for problem in problems if not problem.stable(dt, TOLERANCE)]
        found = waves.growing(problems, dt)
        assert found in growing if growing else found is None
        assert all(waves.surely_stable(p, dt) == (p not in growing) for p in problems[:3])


def test_the_lowest_layer_is_that_of_the_family_of_level_sets(column):
    step_s = 0.8 * stable_step(column, split="all-explicit")
    found = room(column, "lowest_layer_m", tableau=TABLEAU, split="all-explicit", step_s=step_s)
    assert found.carried < found.present == 400.0
    for lowest_m, holds in ((found.carried, True), (found.lost, False)):
        changed = with_levels(column, Family(column.levels.interfaces_m).at(lowest_m))
        assert changed.levels.thickness_m[0] == pytest.approx(lowest_m)
        assert (stable_step(changed, split="all-explicit") * 1.001 >= step_s) == holds


def alone_explicit(term):
    return {name: "explicit" if name == term else "implicit" for name in CATALOGUE}


def test_explicit_diffusion_ends_at_the_real_axis_limit():
    # K dt/dz^2 = 2.5127/4 with a three-stage explicit part of third order (textbook)
    column = build(TINY | {"levels": {"kind": "uniform", "layers": 5, "top_m": 5000.0}})
    found = room(
        column,
        "vertical_diffusion_m2_per_s",
        tableau="ARS(2,3,3)",
        split=alone_explicit("vertical-diffusion"),
        step_s=100.0,
    )
    assert found.criterion == "courant"
    assert found.carried == pytest.approx(2.5127 / 4 * 1000.0**2 / 100.0, rel=0.02)


def test_an_upwind_updraft_after_the_step_ends_at_courant_number_one():
    # W dt/dz = 1 with forward Euler (textbook)
    updraft = {"heights_m": [1000.0, 4000.0], "speeds_m_per_s": [0.5, 0.5], "scheme": "upwind-1"}
    levels = {"kind": "uniform", "layers": 5, "top_m": 5000.0}
    found = room(
        build(TINY | {"levels": levels, "updraft": updraft}),
        "updraft_m_per_s",
        tableau="ARS(2,3,3)",
        split=alone_explicit("") | {"vertical-advection": "after-step"},
        step_s=50.0,
    )
    assert found.present == 0.5
    assert "courant" in found.criterion
    assert found.carried == pytest.approx(1000.0 / 50.0, rel=0.02)


def test_what_is_implicit_is_unbounded(column):
    found = room(
        column, "vertical_diffusion_m2_per_s", tableau=TABLEAU, split="all-implicit", step_s=20.0
    )
    assert (found.carried, found.unbounded, found.tried_to) == (None, True, 1e4)


def test_a_step_that_does_not_hold_now_has_no_headroom(column, step_s):
    found = room(column, "slope", tableau=TABLEAU, split=SPLIT, step_s=4 * step_s)
    assert (found.carried, found.unbounded) == (None, False)
    assert "does not hold at the present value" in found.reason


def test_all_quantities_come_in_one_record(column, monkeypatch):
    monkeypatch.setattr(study, "room", records.room)
    found = headroom(column, tableau="ars232", split="sound + buoyancy", step_s=3.0)
    assert [room.quantity for room in found.rooms] == list(QUANTITIES) == list(UNITS)
    assert (found.tableau, found.split) == (TABLEAU, SPLIT)
    assert (found.step_s, found.efolding_s) == (3.0, 86400.0)


def test_a_step_must_be_positive(column):
    with pytest.raises(InputError, match="must be above 0"):
        room(column, "slope", tableau=TABLEAU, split=SPLIT, step_s=0.0)


class Question:
    """A question about made-up columns: plain numbers, refused from a number on."""

    step_s, tolerance = 1.0, TOLERANCE

    def __init__(self, cheap, full):
        self._cheap, self._full = cheap, full
        self._refuses_beyond = float("inf")
        self.asked, self.proofs = [], 0

    def trial(self, column):
        return column

    def holds(self, value, every=1):
        self.asked.append(value)
        if value > self._cheap:
            self._refuses_beyond = min(self._refuses_beyond, self._cheap)
        return value <= self._refuses_beyond

    def refusal(self, value):
        self.asked.append(value)
        return "a wave" if value > self._refuses_beyond else None

    def objection(self, value):
        self.proofs += 1
        if value <= self._full:
            return None
        self._refuses_beyond = min(self._refuses_beyond, self._full)
        return holding.Objection("spectrum", 1.0)


def bracketing(question, present=0.0, end=100.0, changed=lambda _, value: value):
    varied = study.Quantity(lambda _: present, changed, lambda _: end, 1.0)
    return study._Bracketing(present, "made up", varied, question).run()


@pytest.mark.parametrize(("limit", "present"), [(13.7, 0.0), (13.7, 5.0), (0.02, 0.0), (90.0, 0.0)])
def test_a_bracket_holds_the_limit(limit, present, monkeypatch):
    monkeypatch.setattr(study._Bracketing, "_refusal", lambda *_: None)
    question = Question(limit, limit)
    found = bracketing(question, present)
    assert found.carried <= limit <= found.lost <= 1.01 * found.carried
    assert question.proofs == 1
    assert len(question.asked) < 25


@pytest.mark.parametrize("full", [13.6, 13.0, 9.2, 0.3])
def test_what_the_full_search_refuses_is_bisected_again(full, monkeypatch):
    monkeypatch.setattr(study._Bracketing, "_refusal", lambda *_: None)
    question = Question(13.7, full)
    found = bracketing(question)
    assert found.carried <= full <= found.lost <= 1.02 * found.carried
    assert question.proofs <= 3


def test_the_end_of_the_range_is_proven_too(monkeypatch):
    monkeypatch.setattr(study._Bracketing, "_refusal", lambda *_: None)
    assert bracketing(Question(1e9, 1e9)).tried_to == 100.0
    found = bracketing(Question(1e9, 30.0))
    assert found.carried <= 30.0 <= found.lost <= 1.02 * found.carried


def test_where_nothing_is_carried_it_says_so():
    found = bracketing(Question(-1.0, -1.0))
    assert found.carried is None
    assert "too much" in found.reason


def test_a_value_that_no_column_can_have_ends_the_range():
    def changed(_, value):
        if value > 10.0:
            raise InputError("too large")
        return value

    assert bracketing(Question(1e9, 1e9), changed=changed).tried_to == 8.0
    found = bracketing(Question(1e9, 1e9), present=9.0, changed=changed)
    assert found.reason == "no other value is possible: too large"
    at_the_end = bracketing(Question(1e9, 1e9), present=100.0)
    assert at_the_end.reason == "no other value is possible: the range ends there"


def test_a_level_set_that_the_family_has_not_ends_the_range():
    def changed(_, value):
        if value > 10.0:
            raise NoMemberError("no power does")
        return value

    assert bracketing(Question(1e9, 1e9), changed=changed).tried_to == 8.0


def test_frozen_rows_are_asked_at_one_step_as_at_all():
    column = build(
        TINY
        | {"updraft": {"speed_m_per_s": 2.0}, "diffusion": {"vertical_m2_per_s": 50.0}}
        | {"wind": {"kind": "uniform", "speed_m_per_s": 20.0}}
    )
    asked = (column, column.airs[0], resolve(SPLIT), find(TABLEAU), TOLERANCE.rate)
    limit = courant_limit(*asked, 1e4).step_s
    assert rows_hold(*asked, 0.995 * limit)
    assert not rows_hold(*asked, 1.005 * limit)


def test_a_search_that_finds_no_step_objects(column, monkeypatch):
    def none(*_):
        raise CalculationError("no step down to 1e-12 s")

    monkeypatch.setattr(holding.ColumnVerdict, "stable_step", none)
    question = holding.StepQuestion(resolve(SPLIT), find(TABLEAU), TOLERANCE, 1.0)
    assert question.objection(question.trial(column)).criterion == "spectrum"
