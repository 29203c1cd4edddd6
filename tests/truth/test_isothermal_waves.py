"""Waves of an isothermal atmosphere at rest between ground and lid, textbook formulas.

Dispersion relation of acoustic-gravity waves:
w^4 - w^2 (c^2 (k^2 + m^2 + G^2) + N^2) + N^2 c^2 k^2 = 0 with m = j pi/D, 1/H = g/(R T) and
G = 1/(2 H) - g/c^2; and the Lamb wave w = c k with no vertical wind.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.accuracy import normal_modes
from levelstride.column.column import Horizontal
from levelstride.column.levels import Levels
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from oracles.columns import (
    GRADIENTS,
    STAGGERINGS,
    column_of,
    isothermal_air,
    isothermal_column,
    seeds,
)

G, R, CP = 9.80665, 8314.32 / 28.9644, 3.5 * 8314.32 / 28.9644
TEMPERATURE, TOP = 250.0, 20e3


def exact_frequencies(k, j):
    """(sound, gravity) [1/s] of vertical order j."""
    c2, n2 = 1.4 * R * TEMPERATURE, G**2 / (CP * TEMPERATURE)
    m, gamma = j * np.pi / TOP, G / (2 * R * TEMPERATURE) - G / c2
    b, c = c2 * (k**2 + m**2 + gamma**2) + n2, n2 * c2 * k**2
    high = (b + np.sqrt(b**2 - 4 * c)) / 2
    return np.sqrt(high), np.sqrt(c / high)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("stretch", [1.0, 3.0])
@pytest.mark.parametrize("wavelength", [5e3, 40e3])
def test_discrete_frequencies_converge_at_second_order(staggering, stretch, wavelength):
    k, errors = 2 * np.pi / wavelength, []
    for nlev in (30, 60, 120):
        column = isothermal_column(
            nlev,
            TOP,
            TEMPERATURE,
            stretch ** (1 / nlev),
            staggering=staggering,
            horizontal=Horizontal(1000.0, "exact", 1),
        )
        modes = normal_modes(column, column.airs[0], Wave(k, column.horizontal))
        found = []
        for j in (1, 2, 3):
            for kind, exact in zip(("sound", "gravity"), exact_frequencies(k, j), strict=True):
                here = (modes.kind == kind) & (modes.vertical_order == j)
                found.append(np.abs(modes.frequency[here]) / exact - 1)
        errors.append(np.array(found))
    assert errors[0].shape == (6, 2)
    assert np.all(np.abs(errors[-1]) < 2e-3)
    moved = np.abs(errors[-1]) > 1e-9
    orders = np.log2(np.abs(errors[1] / errors[2]))[moved]
    assert orders.size >= 8
    assert np.all((orders > 1.9) & (orders < 2.1)), orders


@settings(max_examples=10, deadline=None)
@given(seed=seeds, angle=st.floats(0.02, 3.0), directions=st.sampled_from([1, 2]))
@pytest.mark.parametrize("gradient", GRADIENTS)
@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_lamb_wave_is_exact_on_any_grid(staggering, gradient, seed, angle, directions):
    rng = np.random.default_rng(seed)
    thickness = np.exp(rng.uniform(np.log(20), np.log(2000), int(rng.integers(2, 25))))
    levels = Levels(np.concatenate([[0.0], np.cumsum(thickness)]))
    largest = 1.7e-3 if gradient == "given" else None
    horizontal = Horizontal(1500.0, gradient, directions, largest)
    air = isothermal_air(levels, TEMPERATURE)
    column = column_of(levels, [air], horizontal=horizontal, staggering=staggering)
    wave = Wave(angle / 1500.0, horizontal)
    speed = np.sqrt(1.4 * R * TEMPERATURE)
    layout = layout_of(column)
    state = np.zeros(layout.size, dtype=complex)
    state[layout.pi] = 1.0
    state[layout.u] = -1j * -CP * air.theta_c / speed * np.sign(wave.gradient)
    omega = speed * abs(wave.gradient)
    tendency = sum(term.apply(state) for term in assemble(column, air, wave).values())
    assert np.abs(tendency[layout.w]).max() == 0.0
    assert np.abs(tendency[layout.theta]).max() == 0.0
    for field in ("u", "pi"):
        places = layout.places(field)
        ratio = tendency[places] / state[places]
        assert np.abs(ratio - ratio[0]).max() <= 1e-12 * omega
        assert abs(abs(ratio[0]) - omega) <= 1e-12 * omega


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("angle", [0.05, 0.5, 2.0])
def test_lamb_mode_is_found_with_its_exact_frequency(staggering, angle):
    horizontal = Horizontal(3000.0, "staggered", 2)
    column = isothermal_column(
        40, TOP, TEMPERATURE, 1.1, staggering=staggering, horizontal=horizontal
    )
    wave = Wave(angle / 3000.0, horizontal)
    modes = normal_modes(column, column.airs[0], wave)
    lamb = modes.select(modes.kind == "Lamb")
    expected = np.sqrt(1.4 * R * TEMPERATURE) * wave.gradient
    np.testing.assert_allclose(np.sort(lamb.frequency), [-expected, expected], rtol=1e-11)
    assert np.abs(lamb.vectors[modes.layout.w]).max() < 1e-9
