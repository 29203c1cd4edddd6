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
    "upper_damping": {"rate_per_s": 0.1, "base_m": 2000.0},
    "rotation": {"coriolis_per_s": 1e-4},
}


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
    step_s, answers = resting
    one = answers[HORIZONTAL, "absent"]
    assert one.gain > 5.0
    wide = build(PLAIN | {"horizontal": {"grid_spacing_m": 1e9, "gradient": "exact"}})
    assert one.stable_step_s == pytest.approx(step_of(wide, "sound"), rel=5e-3)


def test_a_change_that_does_not_matter_leaves_the_step(resting):
    step_s, answers = resting
    assert answers[BUOYANCY, "implicit"].gain == pytest.approx(1.0, abs=5e-3)


@pytest.mark.parametrize(
    ("table", "terms"),
    [
        ("wind", ("horizontal-advection",)),
        ("updraft", ("vertical-advection",)),
        ("terrain", SLOPE),
        ("divergence_damping", ("divergence-damping",)),
    ],
)
def test_absent_is_the_step_of_the_column_without_it(table, terms):
    tables = {name: MOVING[name] for name in {table, "terrain"}}
    _, answers = asked(column_of(**tables), "sound+buoyancy")
    del tables[table]
    expected = step_of(column_of(**tables), "sound+buoyancy")
    assert answers[terms, "absent"].stable_step_s == pytest.approx(expected, rel=5e-3)


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
    column = column_of(diffusion=MOVING["diffusion"] | {"vertical_m2_per_s": 2e4})
    found = limit(column, tableau="ARS(2,3,2)", split="sound+buoyancy")
    assert found.criterion == "courant"
    assert found.cause.startswith("explicit vertical diffusion, layer ")
    one = {(c.terms, c.change): c for c in found.counterfactuals}
    freed = one[("vertical-diffusion",), "implicit"]
    expected = step_of(column, "sound+buoyancy+mixing")
    assert freed.stable_step_s == pytest.approx(expected, rel=5e-3)
    assert one[("vertical-diffusion",), "absent"].gain > 1.5


def test_an_explicit_method_can_only_leave_terms_out():
    step_s, answers = asked(column_of(), "sound", "RK4")
    assert {change for _, change in answers} == {"absent"}
    assert answers[("vertical-pressure-gradient", "vertical-divergence"), "absent"].gain > 1.5


def test_a_reference_state_can_be_taken_away():
    column = column_of(reference={"kind": "isothermal", "temperature_k": 180.0})
    step_s, answers = asked(column, "sound+buoyancy")
    one = answers[("reference-state",), "absent"]
    expected = step_of(replace(column, reference=None), "sound+buoyancy")
    assert one.stable_step_s == pytest.approx(expected, rel=5e-3)


def test_a_step_that_never_bites_has_no_counterfactuals():
    assert asked(column_of(), "all-implicit", "ARS(1,1,1)") == (None, {})


def test_every_air_state_has_its_own_step_and_the_shortest_binds():
    airs = [
        {"kind": "isothermal", "name": name, "temperature_k": kelvin}
        for name, kelvin in (("cold", 210.0), ("hot", 310.0), ("mild", 260.0))
    ]
    found = limit(column_of(air=airs), tableau="ARS(2,3,2)", split="sound")
    steps = {one.air: one.stable_step_s for one in found.stable_step_by_air}
    assert list(steps) == ["cold", "hot", "mild"]
    assert (found.air, steps["hot"]) == ("hot", found.stable_step_s)
    for air in airs:
        alone = limit(column_of(air=air), tableau="ARS(2,3,2)", split="sound", what_if=False)
        assert steps[air["name"]] == pytest.approx(alone.stable_step_s, rel=5e-3)
    assert min(steps.values()) == found.stable_step_s


def test_one_air_state_is_not_searched_again_and_nothing_without_being_asked():
    found = limit(column_of(), tableau="ARS(2,3,2)", split="sound", what_if=False)
    assert found.stable_step_by_air == ()
    assert found.counterfactuals == ()
    assert found.cause.startswith("Lamb wave, layers 0-")
