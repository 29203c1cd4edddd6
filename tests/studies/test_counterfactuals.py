"""What if: every counterfactual is the limit of the column or splitting that it stands for."""

from dataclasses import replace

import pytest

from levelstride.column.read import build
from levelstride.splitting import resolve
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.studies.counterfactuals import counterfactuals, explicit_groups
from levelstride.studies.limit import limit
from levelstride.tableaux.lookup import find

TOLERANCE = Tolerance(86400.0, 1000.0)
BUOYANCY = ("buoyancy", "stratification")
HORIZONTAL = ("horizontal-pressure-gradient", "horizontal-divergence")
SLOPE = ("slope-pressure-gradient", "slope-divergence")
PLAIN = {
    "levels": {"kind": "geometric", "layers": 4, "top_m": 4000.0, "lowest_layer_m": 200.0},
    "air": {"kind": "isothermal", "temperature_k": 250.0},
    "horizontal": {"grid_spacing_m": 2000.0, "directions": 1, "gradient": "exact"},
}
MOVING = {
    "wind": {"kind": "uniform", "speed_m_per_s": 20.0},
    "updraft": {"speed_m_per_s": 2.0},
    "terrain": {"slope": 0.2},
    "diffusion": {"vertical_m2_per_s": 200.0, "horizontal_coefficient": 1e4},
    "divergence_damping": {"coefficient_m2_per_s": 1e4},
    "upper_damping": {"rate_per_s": 0.1, "base_m": 1000.0},
    "rotation": {"coriolis_per_s": 1e-4},
}

WITHOUT = {
    "wind": ("horizontal-advection",),
    "updraft": ("vertical-advection",),
    "terrain": SLOPE,
    "divergence_damping": ("divergence-damping",),
}
"""Tables of a column file and the terms that are zero without them."""


def column_of(**tables):
    return build(PLAIN | tables)


def step_of(column, split, tableau="ARS(2,3,2)"):
    return ColumnVerdict(column, resolve(split), find(tableau)).stable_step(TOLERANCE).step_s


def asked(column, split, tableau="ARS(2,3,2)"):
    splitting, method = resolve(split), find(tableau)
    found = ColumnVerdict(column, splitting, method).stable_step(TOLERANCE)
    answers = counterfactuals(column, splitting, method, TOLERANCE, found)
    return found.step_s, {(one.terms, one.change): one for one in answers}


@pytest.fixture(scope="module")
def resting():
    return asked(column_of(), "sound")


def test_terms_that_do_nothing_are_left_out_and_partners_come_together(resting):
    assert [terms for terms, change in resting[1] if change == "absent"] == [
        ("buoyancy",), ("stratification",), BUOYANCY,
        ("horizontal-pressure-gradient",), ("horizontal-divergence",), HORIZONTAL,
    ]  # fmt: skip
    assert [terms for terms, change in resting[1] if change == "implicit"] == [
        terms for terms, change in resting[1] if change == "absent"
    ]


@pytest.mark.parametrize(
    ("terms", "split"),
    [
        (BUOYANCY, "sound+buoyancy"),
        (("horizontal-divergence",), "sound+horizontal-divergence"),
        (("stratification",), "sound+stratification"),
    ],
)
def test_implicit_is_the_step_of_that_splitting(resting, terms, split):
    step_s, answers = resting
    one = answers[terms, "implicit"]
    assert one.stable_step_s == pytest.approx(step_of(column_of(), split), rel=5e-3)
    assert one.gain == pytest.approx(one.stable_step_s / step_s)
    assert not one.unbounded


def test_without_the_horizontal_terms_only_buoyancy_is_left(resting):
    """Sound is implicit, so that the explicit buoyancy bites, at the scale of sqrt(3)/N."""
    _, answers = resting
    one = answers[HORIZONTAL, "absent"]
    assert one.gain > 5.0
    wide = build(PLAIN | {"horizontal": {"grid_spacing_m": 1e8, "gradient": "exact"}})
    assert one.stable_step_s == pytest.approx(step_of(wide, "sound"), rel=5e-3)


def test_a_change_that_does_not_matter_leaves_the_step(resting):
    _, answers = resting
    assert answers[BUOYANCY, "implicit"].gain == pytest.approx(1.0, abs=5e-3)


@pytest.fixture(scope="module")
def moving():
    tables = {name: MOVING[name] for name in WITHOUT}
    return asked(column_of(**tables), "sound+buoyancy")[1]


@pytest.mark.parametrize("table", WITHOUT)
def test_absent_is_the_step_of_the_column_without_it(moving, table):
    tables = {name: MOVING[name] for name in WITHOUT if name != table}
    expected = step_of(column_of(**tables), "sound+buoyancy")
    assert moving[WITHOUT[table], "absent"].stable_step_s == pytest.approx(expected, rel=5e-3)


def test_all_that_acts_is_found_in_groups():
    column = column_of(**MOVING)
    assert explicit_groups(column, resolve("all-explicit")) == [
        ("vertical-pressure-gradient", "vertical-divergence"), BUOYANCY, HORIZONTAL, SLOPE,
        ("horizontal-advection",), ("vertical-advection",), ("vertical-diffusion",),
        ("upper-damping",), ("divergence-damping",), ("horizontal-diffusion",), ("rotation",),
    ]  # fmt: skip
    split = {"name": "sound+divergence+buoyancy", "vertical-diffusion": "after-step-implicit",
             "upper-damping": "after-step"}  # fmt: skip
    assert explicit_groups(column, resolve(split)) == [
        ("horizontal-pressure-gradient",), ("slope-pressure-gradient",),
        ("horizontal-advection",), ("vertical-advection",), ("upper-damping",),
        ("divergence-damping",), ("horizontal-diffusion",), ("rotation",),
    ]  # fmt: skip


def test_a_frozen_row_that_binds_is_freed_by_its_own_term():
    column = column_of(
        levels={"kind": "uniform", "layers": 4, "top_m": 400.0},
        diffusion={"vertical_m2_per_s": 100.0},
    )
    split = {"name": "all-implicit", "vertical-diffusion": "explicit"}
    found = limit(column, tableau="ARS(1,1,1)", split=split)
    assert found.criterion == "courant"
    assert found.cause.startswith("explicit vertical diffusion, layer ")
    assert found.cause.endswith(
        "; with the vertical diffusion implicit the step would be above 1000 s"
    )
    changes = [(one.terms, one.change, one.unbounded) for one in found.counterfactuals]
    assert changes == [
        (("vertical-diffusion",), "implicit", True),
        (("vertical-diffusion",), "absent", True),
    ]
    for one in found.counterfactuals:
        assert one.scanned_to_s == 20.0 * found.stable_step_s
        assert one.gain is None


def test_steep_slopes_are_to_blame():
    column = column_of(
        levels=PLAIN["levels"] | {"lowest_layer_m": 40.0},
        terrain={"slope": 0.6},
        horizontal={"grid_spacing_m": 2000.0, "directions": 2, "gradient": "exact"},
    )
    found = limit(column, tableau="ARS(2,3,2)", split="sound+buoyancy")
    assert found.cause.startswith("explicit slope terms, layers 0-")
    assert ", shortest wave along the grid diagonal; with the slope terms implicit" in found.cause
    freed = step_of(column, "sound+buoyancy+slope")
    (one,) = (c for c in found.counterfactuals if (c.terms, c.change) == (SLOPE, "implicit"))
    assert one.stable_step_s == pytest.approx(freed, rel=5e-3)


def test_an_explicit_method_can_only_leave_terms_out():
    _, answers = asked(column_of(), "sound", "RK4")
    assert {change for _, change in answers} == {"absent"}
    assert answers[("vertical-pressure-gradient", "vertical-divergence"), "absent"].gain > 1.5


def test_a_reference_state_can_be_taken_away():
    column = column_of(reference={"kind": "isothermal", "temperature_k": 180.0})
    _, answers = asked(column, "sound+buoyancy")
    one = answers[("reference-state",), "absent"]
    expected = step_of(replace(column, reference=None), "sound+buoyancy")
    assert one.stable_step_s == pytest.approx(expected, rel=5e-3)


def test_a_step_that_never_bites_has_no_counterfactuals():
    assert asked(column_of(), "all-implicit", "ARS(1,1,1)") == (None, {})


def test_every_air_state_has_its_own_step_and_the_shortest_binds():
    airs = [
        {"kind": "isothermal", "name": name, "temperature_k": kelvin}
        for name, kelvin in (("cold", 210.0), ("hot", 310.0))
    ]
    found = limit(column_of(air=airs), tableau="RK4", split="all-explicit")
    steps = {one.air: one.stable_step_s for one in found.stable_step_by_air}
    assert list(steps) == ["cold", "hot"]
    assert (found.air, steps["hot"]) == ("hot", found.stable_step_s)
    for air in airs:
        alone = step_of(column_of(air=air), "all-explicit", "RK4")
        assert steps[air["name"]] == pytest.approx(alone, rel=5e-3)
    assert steps["cold"] > 1.1 * steps["hot"]


def test_one_air_state_is_not_searched_again_and_nothing_without_being_asked():
    found = limit(column_of(), tableau="ARS(2,3,2)", split="sound", what_if=False)
    assert found.stable_step_by_air == ()
    assert found.counterfactuals == ()
    assert found.cause.startswith("Lamb wave, layers 1-3 (200-4000 m), ")
