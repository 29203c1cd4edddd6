"""What levels do to gravity waves under both staggerings.

On uniform levels of thickness d a hydrostatic wave sin(m z) is seen by two-point differences as
m' = (2/d) sin(m d/2). With theta' at the interfaces (Charney-Phillips) buoyancy and stratification
are local, so the frequency N k/m becomes N k/m', too high by (m d/2)/sin(m d/2). With theta' in the
layers (Lorenz) w is averaged to the layers and theta' back, each time a factor cos(m d/2), so that
N^2 becomes N^2 cos^2: the frequency is that times cos, too low by (m d/2)/tan(m d/2). (Textbook:
insert the wave into the differences.) That Lorenz levels slow short gravity waves down and carry a
computational mode beside, while Charney-Phillips levels do not, is the comparison of Thuburn and
Woollings 2005, Journal of Computational Physics 203, 386-404 (from memory).
"""

import numpy as np
import pytest

import levelstride
from levelstride.accuracy.isothermal import IsothermalWaves, isothermal_waves
from levelstride.accuracy.modes import normal_modes
from levelstride.column.column import Horizontal
from levelstride.operator.wave import Wave
from oracles.columns import STAGGERINGS, isothermal_column

LAYERS, TOP = 40, 10e3


@pytest.fixture(name="found", scope="module")
def _found():
    column = levelstride.build(
        {
            "levels": {"kind": "uniform", "layers": LAYERS, "top_m": TOP},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": 40e3, "gradient": "exact"},
        }
    )
    return levelstride.modes(column, wavenumbers_per_m=[2 * np.pi / 1000e3], kinds=["gravity"])


def on_grid(found, staggering):
    (wave,) = found.waves
    order = np.array([mode.vertical_order for mode in wave.modes])
    grids = [next(g for g in mode.grids if g.staggering == staggering) for mode in wave.modes]
    return order, grids


def test_charney_phillips_levels_make_short_gravity_waves_too_fast(found):
    order, grids = on_grid(found, "charney-phillips")
    half = order * np.pi / LAYERS / 2
    ratio = np.array([grid.to_isothermal for grid in grids])
    short = order >= 4
    np.testing.assert_allclose(ratio[short], (half / np.sin(half))[short], rtol=3e-3)
    assert np.all(ratio[short] > 1.0)
    finer = np.array([grid.to_finer for grid in grids])
    np.testing.assert_allclose(
        finer[short], (half / np.sin(half) / (half / 4 / np.sin(half / 4)))[short], rtol=3e-3
    )


def test_lorenz_levels_make_short_gravity_waves_too_slow(found):
    order, grids = on_grid(found, "lorenz")
    half = order * np.pi / LAYERS / 2
    ratio = np.array([grid.to_isothermal for grid in grids])
    short = order >= 4
    np.testing.assert_allclose(ratio[short], (half / np.tan(half))[short], rtol=3e-3, atol=2e-3)
    assert np.all(ratio[short] < 1.0)
    finer = np.array([grid.to_finer for grid in grids])
    np.testing.assert_allclose(
        finer[short],
        (half / np.tan(half) / (half / 4 / np.tan(half / 4)))[short],
        rtol=3e-3,
        atol=2e-3,
    )


def test_only_lorenz_levels_carry_a_computational_mode():
    for staggering in STAGGERINGS:
        column = isothermal_column(12, staggering=staggering)
        modes = normal_modes(column, column.airs[0], Wave(1e-4, column.horizontal))
        still = np.abs(modes.frequency) < 1e-12
        assert still.sum() == (staggering == "lorenz")
        assert set(modes.kind[still]) == ({"computational"} if staggering == "lorenz" else set())


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_frequencies_approach_the_closed_form_at_second_order(staggering):
    wave, errors = Wave(2 * np.pi / 20e3, Horizontal(1000.0, "staggered", 2)), []
    for nlev in (30, 60):
        column = isothermal_column(
            nlev, 20e3, 250.0, 3.0 ** (1 / nlev), staggering=staggering, horizontal=wave.horizontal
        )
        exact = isothermal_waves(column, column.airs[0])
        modes = normal_modes(column, column.airs[0], wave)
        errors.append(
            [
                modes.frequency[
                    (modes.kind == kind) & (modes.vertical_order == order) & (modes.frequency > 0)
                ][0]
                / exact.frequency(kind, order, wave.gradient)
                - 1
                for kind in ("sound", "gravity")
                for order in (1, 2, 3)
            ]
        )
    orders = np.log2(np.abs(np.array(errors[0]) / np.array(errors[1])))
    assert np.all((orders > 1.8) & (orders < 2.2)), orders


def test_closed_form_solves_its_equations():
    """The roots put into the eliminated pair of equations of the docstring, mode by mode."""
    air, k = IsothermalWaves(260.0, 12e3), 3e-4
    c2, n2, decay = air.sound_speed_squared, air.n_squared, air.decay_per_m
    z = np.linspace(0.0, 12e3, 2001)
    for order in (1, 4, 30):
        m = order * np.pi / 12e3
        w, dw, ddw = np.sin(m * z), m * np.cos(m * z), -(m**2) * np.sin(m * z)
        for omega in air.sound_and_gravity(k, order):
            p = 1j * c2 * omega / (omega**2 - c2 * k**2) * (dw + decay * w)
            dp = 1j * c2 * omega / (omega**2 - c2 * k**2) * (ddw + decay * dw)
            left = 1j * w * (omega**2 - n2) / omega
            np.testing.assert_allclose(left, -(dp - decay * p), atol=1e-9 * np.abs(left).max())
    assert air.frequency("Lamb", 0, k) == pytest.approx(np.sqrt(1.4 * 287.05307 * 260) * k)
    assert air.frequency("computational", 0, k) is None
