"""Closed forms against numerical integration of d ln p/dz = -g/(R T)."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from levelstride.column.profiles import ConstantNAir, PiecewiseLinearAir
from levelstride.column.standard_atmosphere import standard_air
from levelstride.constants import GAS_CONSTANT, GRAVITY, HEAT_CAPACITY

PROFILES = [
    standard_air(),
    standard_air(80000.0, 1900.0),
    PiecewiseLinearAir(np.array([0.0]), np.array([250.0]), 0.0, 1e5),
    PiecewiseLinearAir(
        np.array([100.0, 900.0, 5000.0]), np.array([270.0, 275.0, 240.0]), 50.0, 9.9e4
    ),
    ConstantNAir(500.0, 95000.0, 285.0, 0.01),
    ConstantNAir(0.0, 101325.0, 300.0, 0.0),
    ConstantNAir(0.0, 101325.0, 250.0, 0.03),
]


@pytest.mark.parametrize("profile", PROFILES)
def test_pressure_is_hydrostatic(profile):
    low, high = 600.0, 14000.0
    edges = np.unique([low, 900.0, 5000.0, 11000.0, high])
    total = 0.0
    for start, end in pairwise(edges):
        total += quad(lambda z: 1.0 / profile.temperature(np.array([z]))[0], start, end)[0]
    ratio = profile.pressure(np.array([high]))[0] / profile.pressure(np.array([low]))[0]
    assert np.log(ratio) == pytest.approx(-GRAVITY / GAS_CONSTANT * total, rel=1e-10)


@pytest.mark.parametrize("profile", PROFILES)
def test_altitude_of_pressure_inverts(profile):
    altitudes = np.linspace(-200.0, 18000.0, 301)
    back = profile.altitude_of(profile.pressure(altitudes))
    np.testing.assert_allclose(back, altitudes, atol=1e-7)


def test_anchors():
    assert standard_air(80000.0, 1900.0).pressure(np.array([1900.0]))[0] == pytest.approx(80000.0)
    assert standard_air().pressure(np.array([0.0]))[0] == pytest.approx(101325.0, rel=1e-15)
    air = ConstantNAir(500.0, 95000.0, 285.0, 0.01)
    assert air.pressure(np.array([500.0]))[0] == pytest.approx(95000.0)
    assert air.temperature(np.array([500.0]))[0] == pytest.approx(285.0)


@given(st.floats(0.0, 0.04), st.floats(200.0, 320.0))
def test_constant_n_has_its_frequency(frequency, temperature):
    air = ConstantNAir(0.0, 101325.0, temperature, frequency)
    altitude = np.linspace(0.0, min(10000.0, 0.9 * air.ceiling_m), 50)
    theta = air.temperature(altitude) * (1e5 / air.pressure(altitude)) ** (2.0 / 7.0)
    n_squared = GRAVITY * np.diff(np.log(theta)) / np.diff(altitude)
    np.testing.assert_allclose(n_squared, frequency**2, atol=1e-12)


def test_neutral_air_ends_at_its_ceiling():
    air = ConstantNAir(100.0, 1e5, 300.0, 0.0)
    assert air.ceiling_m == pytest.approx(100.0 + HEAT_CAPACITY * 300.0 / GRAVITY)
    assert air.temperature(np.array([air.ceiling_m]))[0] == pytest.approx(0.0, abs=1e-9)
    assert ConstantNAir(0.0, 1e5, 250.0, 0.03).ceiling_m == np.inf
