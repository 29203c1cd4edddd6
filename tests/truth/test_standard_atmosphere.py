"""U.S. Standard Atmosphere, 1976 (NOAA-S/T 76-1562).

Pressure ratios at the layer boundaries follow from its equations (33a) and (33b) with its
constants; they are printed to 13 decimals by R. Carmichael, "Properties of the U.S. Standard
Atmosphere 1976" (Public Domain Aeronautical Software). State at 10 km geopotential altitude: its
table I. The ``ambiance`` package (geometric heights, ICAO 1993, R = 287.05287 J/(kg K)) computes
the same layers independently.
"""

import ambiance
import numpy as np
import pytest

from levelstride.column.standard_atmosphere import standard_air
from levelstride.constants import GAS_CONSTANT, HEAT_CAPACITY_RATIO

BOUNDARIES = [
    (11.0, 216.65, 0.2233611050922, 1e-12),
    (20.0, 216.65, 0.0540329501078, 2e-12),
    (32.0, 228.65, 0.0085666783593, 1e-11),
    (47.0, 270.65, 0.0010945601338, 1e-10),
    (51.0, 270.65, 0.0006606353133, 1e-10),
    (71.0, 214.65, 0.0000390468337, 2e-9),
]


@pytest.mark.parametrize(("altitude_km", "temperature", "ratio", "printed"), BOUNDARIES)
def test_layer_boundaries(altitude_km, temperature, ratio, printed):
    air = standard_air()
    at = np.array([altitude_km * 1000.0])
    assert air.temperature(at)[0] == pytest.approx(temperature, rel=1e-14)
    assert air.pressure(at)[0] / 101325.0 == pytest.approx(ratio, rel=printed)


def test_ten_kilometres():
    air = standard_air()
    at = np.array([10000.0])
    temperature, pressure = air.temperature(at)[0], air.pressure(at)[0]
    assert temperature == pytest.approx(223.15, abs=1e-10)
    assert pressure / (GAS_CONSTANT * temperature) == pytest.approx(0.4127, abs=5e-5)
    speed = np.sqrt(HEAT_CAPACITY_RATIO * GAS_CONSTANT * temperature)
    assert speed == pytest.approx(299.463, abs=5e-4)


def test_top_of_the_constant_composition_part():
    assert standard_air().temperature(np.array([84852.0]))[0] == pytest.approx(186.946, abs=5e-4)


def test_ambiance_agrees():
    geometric = np.linspace(0.0, 80000.0, 161)
    theirs = ambiance.Atmosphere(geometric)
    ours = standard_air()
    np.testing.assert_allclose(ours.temperature(theirs.H), theirs.temperature, rtol=1e-5)
    np.testing.assert_allclose(ours.pressure(theirs.H), theirs.pressure, rtol=1e-5)
    speed = np.sqrt(HEAT_CAPACITY_RATIO * GAS_CONSTANT * ours.temperature(theirs.H))
    np.testing.assert_allclose(speed, theirs.speed_of_sound, rtol=1e-5)
