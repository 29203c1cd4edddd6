import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.column.standard_atmosphere import standard_air
from levelstride.errors import InputError


@pytest.fixture
def hybrid(plain):
    plain["levels"] = {
        "kind": "hybrid-pressure",
        "a": [0.0, 0.02, 0.1, 0.05],
        "b": [1.0, 0.8, 0.3, 0.0],
    }
    plain["air"] = {"kind": "standard"}
    return plain


def test_pressures_come_back(hybrid):
    air = build(hybrid).airs[0]
    expected = 1e5 * np.array([0.0, 0.02, 0.1, 0.05]) + 101325.0 * np.array([1.0, 0.8, 0.3, 0.0])
    np.testing.assert_allclose(air.pressure_f, expected, rtol=1e-12)


def test_ap_is_a_in_pascal_and_either_order(hybrid):
    first = build(hybrid).levels.interfaces_m
    hybrid["levels"] = {
        "kind": "hybrid-pressure",
        "ap": [5000.0, 10000.0, 2000.0, 0.0],
        "b": [0.0, 0.3, 0.8, 1.0],
        "order": "top-down",
    }
    np.testing.assert_allclose(build(hybrid).levels.interfaces_m, first, rtol=1e-12)


def test_the_first_air_and_its_surface_pressure_place_the_levels(hybrid):
    hybrid["air"] = [{"kind": "standard", "surface_pressure_pa": 90000.0}, {"kind": "standard"}]
    hybrid["terrain"] = {"surface_altitude_m": 1000.0}
    column = build(hybrid)
    profile = standard_air(90000.0, 1000.0)
    expected = profile.altitude_of(np.array([90000.0, 74000.0, 37000.0, 5000.0])) - 1000.0
    np.testing.assert_allclose(column.levels.interfaces_m, expected, atol=1e-8)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"a": [0.0, 0.02, 0.1, 0.0]}, "infinitely high; cut that interface"),
        ({"order": "top-down"}, 'write order = "bottom-up"'),
        ({"a": [0.0, 0.02, 0.1]}, "need one per interface"),
        ({"ap": [0.0, 1.0, 2.0, 3.0]}, "exactly one of a [1] and ap [Pa]"),
        ({"b": [1.0, 0.8, 0.9, 0.0]}, "must fall at every interface"),
        ({"b": [0.9, 0.8, 0.3, 0.0]}, "must have a = 0 and b = 1"),
        ({"a": [0.0, 0.02, 0.1, 1e-8]}, "lies above the first air state"),
    ],
)
def test_mistakes(hybrid, change, said):
    hybrid["levels"] |= change
    with pytest.raises(InputError) as caught:
        build(hybrid)
    assert said in str(caught.value)


def test_air_that_never_gets_so_thin(hybrid):
    hybrid["air"] = {
        "kind": "constant-n",
        "surface_temperature_k": 250.0,
        "buoyancy_frequency_per_s": 0.05,
    }
    with pytest.raises(InputError, match=r"never reaches|temperature at the lid"):
        build(hybrid)
