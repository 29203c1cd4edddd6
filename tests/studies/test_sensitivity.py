"""Which layers cost the step: derivatives against differences of limits by dense eigenvalues."""

import json

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.column.variants import with_levels
from levelstride.results.export import to_json
from levelstride.splitting import resolve
from levelstride.stability.lost_rows import lost_rows
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem
from levelstride.studies.sensitivity import layer_sensitivity
from levelstride.tableaux.lookup import find

TOLERANCE = Tolerance(86400.0, 1000.0)
THIN = [0.0, 300.0, 700.0, 1200.0, 1800.0, 2500.0, 2600.0, 3500.0, 5000.0, 8000.0]


def column_of(**tables):
    return build(
        {
            "levels": {"kind": "geometric", "layers": 8, "top_m": 12000.0, "lowest_layer_m": 100.0},
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 3000.0},
        }
        | tables
    )


def thicker(column, layer, metres):
    """The layer thicker, everything above it moved up."""
    heights = column.levels.interfaces_m.copy()
    heights[layer + 1 :] += metres
    return with_levels(column, heights)


def wave_limit(column, found, split, tableau):
    """The longest step at which the wave found keeps its growth, by bisection alone."""
    first = found.lost_first[0]
    method, splitting = find(tableau), resolve(split)
    if method.kind == "explicit":
        splitting = splitting.without_implicit()
    air = next(air for air in column.airs if air.name == first.air)
    if first.criterion == "courant":
        rows = lost_rows(column, splitting, method, TOLERANCE.rate, first.step_s / 1.05, 1.1)
        return next(row.step_s for row in rows if row.layer == first.layer)
    problem = WaveProblem(column, air, splitting, method, first.wavenumber_per_m)

    def holds(dt):
        if first.criterion == "transient":
            return not problem.transient_broken(dt, TOLERANCE)
        return problem.growth(dt) <= problem.rate(TOLERANCE)

    low, high = first.step_s / 1.01, first.step_s * 1.01
    assert holds(low)
    assert not holds(high)
    while high / low > 1 + 1e-10:
        middle = np.sqrt(low * high)
        low, high = (middle, high) if holds(middle) else (low, middle)
    return low


SLOPE = {"terrain": {"slope": 0.3}, "horizontal": {"grid_spacing_m": 500.0}}
WIND = {
    "wind": {"kind": "linear", "surface_m_per_s": 2.0, "shear_per_s": 2e-3},
    "rotation": {"latitude_deg": 45.0},
    "upper_damping": {"rate_per_s": 0.05, "base_m": 8000.0},
}
HOT = {
    "kind": "sounding",
    "name": "hot",
    "heights_m": [0.0, 5000.0, 12000.0],
    "temperatures_k": [310.0, 250.0, 240.0],
}
LORENZ = {"column": {"staggering": "lorenz"}}
THINNER = {"kind": "geometric", "layers": 14, "top_m": 12000.0, "lowest_layer_m": 20.0}
RISING = {"heights_m": [0.0, 500.0, 3000.0, 12000.0], "speeds_m_per_s": [0.0, 60.0, 20.0, 0.0]}

CASES = {
    "all explicit": ({}, "RK4", "all-explicit", "spectrum"),
    "implicit sound": ({}, "ARS(2,3,2)", "sound+buoyancy", "spectrum"),
    "slope, lorenz": (SLOPE | LORENZ, "UJ3(1,3,2)", "sound+buoyancy", "spectrum"),
    "wind, rotation": (WIND, "ARS(3,4,3)", "sound+buoyancy", "spectrum"),
    "convection": ({"air": HOT} | WIND, "ARS(2,3,2)", "sound+buoyancy", "spectrum"),
    "reference": (
        {"reference": {"kind": "isothermal", "temperature_k": 260.0}},
        "ARS(2,3,2)",
        "sound+buoyancy+divergence",
        "spectrum",
    ),
    "two airs": (
        {"air": [{"kind": "isothermal", "temperature_k": 230.0}, HOT]},
        "ARS(2,3,2)",
        "all-explicit",
        "spectrum",
    ),
    "powers": ({"levels": THINNER}, "UJ3(1,3,2)", "sound+divergence", "transient"),
    "rows": ({"updraft": RISING}, "ARS(3,4,3)", "sound+buoyancy", "courant"),
    "rows after the step": (
        {"diffusion": {"vertical_m2_per_s": 2000.0}},
        "ARS(3,4,3)",
        {"name": "all-implicit", "vertical-diffusion": "after-step"},
        "courant",
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_derivatives_are_those_of_the_limit(name):
    tables, tableau, split, criterion = CASES[name]
    column = column_of(**tables)
    found = layer_sensitivity(column, tableau=tableau, split=split)
    assert found.lost_first[0].criterion == criterion
    assert found.lost_first[0].step_s == pytest.approx(found.stable_step_s, rel=2e-3)
    expected = []
    for layer in found.layers:
        move = 5e-4 * layer.thickness_m
        limits = [
            wave_limit(thicker(column, layer.layer, sign * move), found, split, tableau)
            for sign in (1, -1)
        ]
        expected.append((limits[0] - limits[1]) / (2 * move))
    expected = np.array(expected)
    got = np.array([layer.step_per_m for layer in found.layers])
    assert np.abs(expected).max() > 0
    # the transient limit is bisected to fewer digits
    floor = 1e-2 if criterion == "transient" else 2e-4
    np.testing.assert_allclose(got, expected, rtol=0.02, atol=floor * np.abs(expected).max())


def test_the_full_search_sees_the_same():
    """The search brackets to 0.1 %, so a difference over 6 % is sharp to some percent."""
    column = column_of()
    found = layer_sensitivity(column, tableau="RK4", split="all-explicit")
    layer = max(found.layers, key=lambda one: one.log_sensitivity)
    steps = [
        ColumnVerdict(
            thicker(column, layer.layer, change * layer.thickness_m),
            resolve("all-explicit"),
            find("RK4"),
        )
        .stable_step(TOLERANCE)
        .step_s
        for change in (0.03, -0.03)
    ]
    assert np.log(steps[0] / steps[1]) / 0.06 == pytest.approx(layer.log_sensitivity, rel=0.04)


def test_one_table_hangs_together():
    column = column_of(levels={"kind": "table", "heights_m": THIN})
    found = layer_sensitivity(column, tableau="ARS(2,3,2)", split="all-explicit")
    thickness = np.diff(THIN)
    assert [layer.thickness_m for layer in found.layers] == pytest.approx(thickness.tolist())
    by_layer = np.array([layer.step_per_m for layer in found.layers])
    by_interface = np.array([face.step_per_m for face in found.interfaces])
    # a layer thicker and the next one thinner is one interface moved
    np.testing.assert_allclose(
        by_layer[:-1] - by_layer[1:], by_interface, atol=1e-12 * np.abs(by_layer).max()
    )
    assert [face.interface for face in found.interfaces] == list(range(1, 9))
    ratios = [layer.ratio_to_next for layer in found.layers]
    assert ratios[:-1] == [face.ratio for face in found.interfaces]
    assert ratios[-1] is None
    assert ratios[4] == pytest.approx(100 / 700)
    for layer in found.layers:
        assert layer.log_sensitivity == pytest.approx(
            layer.step_per_m * layer.thickness_m / found.stable_step_s
        )
        assert layer.step_per_m_thicker <= layer.step_per_m <= layer.step_per_m_thinner
    assert max(found.layers, key=lambda layer: layer.step_per_m).layer == 5
    assert len(json.loads(to_json(found))["layers"]) == 9
    assert "first-order perturbation" in found.method


def test_with_the_lid_kept_the_other_layers_give_way():
    column = column_of()
    found = layer_sensitivity(column, tableau="RK4", split="all-explicit")
    for layer in (found.layers[1], found.layers[-1]):
        limits = []
        for sign in (1, -1):
            thickness = column.levels.thickness_m.copy()
            thickness[layer.layer] += sign * 1e-3 * layer.thickness_m
            rest = np.arange(thickness.size) != layer.layer
            thickness[rest] *= (column.levels.top_m - thickness[layer.layer]) / thickness[
                rest
            ].sum()
            heights = np.concatenate([[0.0], np.cumsum(thickness)])
            limits.append(wave_limit(with_levels(column, heights), found, "all-explicit", "RK4"))
        expected = (limits[0] - limits[1]) / (2e-3 * layer.thickness_m)
        assert layer.step_per_m_lid_kept == pytest.approx(expected, rel=0.02)


def test_where_two_states_cross_either_side_has_its_own_derivative():
    """Two thin layers far apart in air of one temperature: to thicken one alone gains nothing."""
    column = column_of(
        levels={
            "kind": "table",
            "heights_m": [0.0, 800.0, 1000.0, 1800.0, 2600.0, 3400.0, 3600.0, 4400.0],
        },
        air={"kind": "isothermal", "temperature_k": 250.0},
    )
    found = layer_sensitivity(column, tableau="RK4", split="all-explicit")
    assert len(found.lost_first) == 2
    assert {state.wavenumber_per_m for state in found.lost_first} == {
        found.lost_first[0].wavenumber_per_m
    }
    steps = [state.step_s for state in found.lost_first]
    assert steps[0] < steps[1] < 1.005 * steps[0]
    for thin in (1, 5):
        layer = found.layers[thin]
        assert layer.step_per_m_thicker < 0.05 * layer.step_per_m_thinner

        def step(change, layer=layer):
            other = thicker(column, layer.layer, change * layer.thickness_m)
            verdict = ColumnVerdict(other, resolve("all-explicit"), find("RK4"))
            return verdict.stable_step(TOLERANCE).step_s

        assert step(0.1) < 1.01 * found.stable_step_s
        lost = layer.step_per_m_thinner * 0.1 * layer.thickness_m
        assert found.stable_step_s - step(-0.1) == pytest.approx(lost, rel=0.1)


def test_what_is_known_of_the_column_is_taken_up():
    column = column_of()
    known = ColumnVerdict(column, resolve("sound"), find("ARS(2,3,2)")).stable_step(TOLERANCE)
    given = layer_sensitivity(column, tableau="ARS(2,3,2)", split="sound", found=known)
    own = layer_sensitivity(column, tableau="ARS(2,3,2)", split="sound")
    assert given == own


def test_nothing_bites_and_nothing_has_a_derivative():
    column = column_of()
    found = layer_sensitivity(column, tableau="ARS(2,3,2)", split="all-implicit")
    assert found.stable_step_s is None
    assert found.lost_first == ()
    assert len(found.layers) == 8
    assert all(layer.step_per_m is None for layer in found.layers)
    assert all(face.step_per_m is None for face in found.interfaces)


def test_air_that_ends_at_the_lid_is_moved_one_way():
    """The standard atmosphere ends at 84.852 km."""
    column = column_of(
        levels={"kind": "geometric", "layers": 8, "top_m": 84852.0, "lowest_layer_m": 2000.0}
    )
    found = layer_sensitivity(column, tableau="RK4", split="all-explicit")
    assert found.layers[0].log_sensitivity > 0.1
    assert np.isfinite(found.layers[-1].step_per_m)
