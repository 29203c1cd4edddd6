"""The background on the levels follows the design to the letter."""

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.constants import GAS_CONSTANT, GRAVITY, HEAT_CAPACITY_RATIO


def test_plain_differences(plain):
    plain["air"] = {"kind": "standard"}
    plain["levels"] = {"kind": "geometric", "layers": 30, "top_m": 20000.0, "lowest_layer_m": 50.0}
    column = build(plain)
    air, levels = column.airs[0], column.levels
    assert levels.nlev == 30
    assert levels.spacing_m.shape == (29,)
    for f in range(1, 30):
        expected = (air.theta_c[f] - air.theta_c[f - 1]) / (
            levels.centres_m[f] - levels.centres_m[f - 1]
        )
        assert air.dtheta_dz_f[f - 1] == pytest.approx(expected, rel=1e-10)
        assert air.n_squared_f[f - 1] == pytest.approx(GRAVITY * expected / air.theta_f[f])
    for j in range(30):
        expected = (air.theta_f[j + 1] - air.theta_f[j]) / levels.thickness_m[j]
        assert air.dtheta_dz_c[j] == pytest.approx(expected, rel=1e-10)
        assert air.n_squared_c[j] == pytest.approx(GRAVITY * expected / air.theta_c[j])


def test_gas_law_and_sound(plain):
    air = build(plain).airs[0]
    np.testing.assert_allclose(air.pressure_c, air.density_c * GAS_CONSTANT * air.temperature_c)
    np.testing.assert_allclose(
        air.sound_speed_squared_f, HEAT_CAPACITY_RATIO * GAS_CONSTANT * air.temperature_f
    )
    assert air.pressure_f[0] == pytest.approx(101325.0, rel=1e-14)


def test_temperature_is_taken_at_altitude(plain):
    plain["air"] = {"kind": "standard"}
    plain["terrain"] = {"surface_altitude_m": 2000.0, "compression": "none"}
    column = build(plain)
    assert column.airs[0].temperature_f[0] == pytest.approx(288.15 - 13.0)
    assert column.airs[0].pressure_f[0] == pytest.approx(79495.0, rel=1e-4)
    assert column.levels.top_m == 10000.0
    plain["air"]["surface_pressure_pa"] = 78000.0
    assert build(plain).airs[0].pressure_f[0] == pytest.approx(78000.0)


def test_compression(plain):
    plain["terrain"] = {"surface_altitude_m": 2000.0}
    column = build(plain)
    np.testing.assert_allclose(column.levels.thickness_m, 800.0)
    assert column.levels.surface_altitude_m == 2000.0


def test_slope(plain):
    plain["terrain"] = {"slope": 0.3}
    np.testing.assert_allclose(build(plain).slope_f, 0.3 * (1.0 - np.arange(11) / 10.0), atol=1e-16)
    plain["terrain"] = {"slope": 0.3, "decay": "exponential", "decay_height_m": 2000.0}
    np.testing.assert_allclose(build(plain).slope_f, 0.3 * np.exp(-np.arange(11) / 2.0))


def test_upper_damping(plain):
    plain["upper_damping"] = {"rate_per_s": 0.2, "base_m": 5000.0}
    rate = build(plain).upper_damping_f
    assert np.all(rate[:6] == 0.0)
    assert rate[10] == pytest.approx(0.2)
    assert rate[7] == pytest.approx(0.2 * np.sin(0.5 * np.pi * 0.4) ** 2)


def test_wind_kinds(plain):
    assert not build(plain).wind_given
    plain["wind"] = {"kind": "uniform", "speed_m_per_s": 7.0, "advection": "centred-4"}
    column = build(plain)
    assert column.wind_given
    assert column.horizontal.advection == "centred-4"
    np.testing.assert_array_equal(column.airs[0].wind_f, 7.0)
    plain["wind"] = {"kind": "linear", "surface_m_per_s": 2.0, "shear_per_s": 0.001}
    np.testing.assert_allclose(build(plain).airs[0].wind_c, 2.0 + (np.arange(10) + 0.5))
    plain["wind"] = {
        "kind": "table",
        "heights_m": [1000.0, 3000.0],
        "speeds_m_per_s": [2.0, 6.0],
    }
    np.testing.assert_allclose(build(plain).airs[0].wind_f[:5], [2.0, 2.0, 4.0, 6.0, 6.0])


def test_updraft_is_zero_at_both_ends(plain):
    plain["updraft"] = {"speed_m_per_s": 2.0, "scheme": "centred"}
    column = build(plain)
    assert column.vertical_advection == "centred"
    assert column.airs[0].updraft_f[[0, -1]].tolist() == [0.0, 0.0]
    assert column.airs[0].updraft_f[5] == pytest.approx(2.0)
    plain["updraft"] = {"heights_m": [0.0, 5000.0], "speeds_m_per_s": [1.0, 1.0]}
    air = build(plain).airs[0]
    np.testing.assert_allclose(air.updraft_f, np.minimum(np.arange(11), 10 - np.arange(11)) / 5.0)


def test_diffusion_rotation_reference_and_several_airs(plain):
    plain["air"] = [
        {"kind": "isothermal", "temperature_k": 250.0},
        {"kind": "isothermal", "temperature_k": 280.0},
    ]
    plain["reference"] = {"kind": "isothermal", "temperature_k": 300.0}
    plain["wind"] = {"kind": "uniform", "speed_m_per_s": 3.0}
    plain["diffusion"] = {
        "heights_m": [0.0, 2000.0],
        "values_m2_per_s": [4.0, 2.0],
        "horizontal_coefficient": 5.0,
        "horizontal_order": 2,
    }
    plain["rotation"] = {"latitude_deg": 30.0}
    column = build(plain)
    assert [air.name for air in column.airs] == ["isothermal", "isothermal 2"]
    assert column.reference is not None
    assert column.reference.temperature_c[0] == 300.0
    assert column.reference.wind_c[0] == 3.0
    np.testing.assert_allclose(column.diffusivity_f[:3], [4.0, 3.0, 2.0])
    assert column.horizontal_diffusion_order == 2
    assert column.coriolis_per_s == pytest.approx(7.292115e-5)


def test_arrays_refuse_to_be_written(plain):
    column = build(plain)
    for array in (column.levels.interfaces_m, column.airs[0].theta_c, column.slope_f):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1.0
