from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.read import build, load
from levelstride.column.variants import with_levels
from levelstride.errors import InputError

SAMPLES = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))
ARRAYS = ("slope_f", "diffusivity_c", "diffusivity_f", "upper_damping_f")
LEVELS = ("levels", "digest", "definition", "airs", "reference", *ARRAYS)


def assert_same_operator(one, two):
    """The same numbers in everything that the operator is made of."""
    np.testing.assert_array_equal(one.levels.interfaces_m, two.levels.interfaces_m)
    assert one.levels.surface_altitude_m == two.levels.surface_altitude_m
    states = list(zip(one.airs, two.airs, strict=True))
    assert (one.reference is None) == (two.reference is None)
    if one.reference is not None:
        states.append((one.reference, two.reference))
    for first, second in states:
        for field in fields(first):
            np.testing.assert_array_equal(getattr(first, field.name), getattr(second, field.name))
    for name in ARRAYS:
        np.testing.assert_array_equal(getattr(one, name), getattr(two, name))
    for field in fields(one):
        if field.name not in (*LEVELS, "horizontal", "advice"):
            assert getattr(one, field.name) == getattr(two, field.name), field.name
    for table in ("horizontal", "advice"):
        for field in fields(getattr(one, table)):
            assert getattr(getattr(one, table), field.name) == getattr(
                getattr(two, table), field.name
            )


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_the_columns_own_levels_make_the_same_operator(path):
    column = load(path)
    same = with_levels(column, column.levels.interfaces_m)
    assert_same_operator(column, same)
    assert same.definition["levels"]["kind"] == "table"
    assert build(same.definition).digest == same.digest
    again = with_levels(same, same.levels.interfaces_m)
    assert again.digest == same.digest
    assert_same_operator(same, again)


@st.composite
def squeezed_columns(draw):
    """Columns over terrain, squeezed or not, with slope, damping and two air states."""
    terrain = {
        "surface_altitude_m": draw(st.floats(-400.0, 4000.0)),
        "compression": draw(st.sampled_from(["linear", "none"])),
        "slope": draw(st.floats(-0.5, 0.5)),
    }
    lowest = draw(st.floats(50.0, 900.0))
    return build(
        {
            "levels": {
                "kind": "geometric",
                "layers": draw(st.integers(4, 30)),
                "top_m": draw(st.floats(9000.0, 30000.0)),
                "lowest_layer_m": lowest,
            },
            "air": [
                {"kind": "isothermal", "temperature_k": 250.0},
                {"kind": "constant-n", "surface_temperature_k": 280.0}
                | {"buoyancy_frequency_per_s": 0.01},
            ],
            "reference": {"kind": "isothermal", "temperature_k": 300.0},
            "wind": {"kind": "linear", "shear_per_s": 1e-3},
            "updraft": {"speed_m_per_s": 1.0},
            "upper_damping": {"rate_per_s": 0.1, "base_m": 3000.0},
            "terrain": terrain,
            "horizontal": {"grid_spacing_m": 1000.0},
        }
    )


@given(squeezed_columns())
def test_compression_is_not_applied_twice(column):
    same = with_levels(column, column.levels.interfaces_m)
    assert_same_operator(column, same)
    assert same.definition["terrain"]["compression"] == "none"
    assert build(same.definition).digest == same.digest


def test_other_levels_are_another_column(plain):
    column = build(plain)
    heights = np.array([0.0, 20.0, 60.0, 500.0, 9000.0])
    made = with_levels(column, heights)
    np.testing.assert_array_equal(made.levels.interfaces_m, heights)
    assert made.digest != column.digest
    assert made.airs[0].theta_c.shape == (4,)
    assert column.definition["levels"]["kind"] == "uniform"
    assert made.advice.splits == column.advice.splits


def test_terms_that_are_left_out_stay_left_out(plain):
    column = replace(build(plain), left_out=frozenset({"buoyancy", "stratification"}))
    heights = np.array([0.0, 20.0, 60.0, 500.0, 9000.0])
    assert with_levels(column, heights).left_out == column.left_out
    assert with_levels(build(plain), heights).left_out == frozenset()


@pytest.mark.parametrize(
    ("heights", "words"),
    [
        ([0.0, 100.0, 50.0, 900.0], "negative thickness"),
        ([10.0, 100.0, 900.0], "lowest interface"),
        ([0.0, 100.0, float("nan")], "finite"),
        ([0.0, 2e6, 3e6], "must"),
    ],
)
def test_heights_that_make_no_level_set(plain, heights, words):
    with pytest.raises(InputError, match=words):
        with_levels(build(plain), np.array(heights))
