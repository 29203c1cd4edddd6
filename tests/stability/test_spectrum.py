"""Which waves are looked at."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.column import Horizontal
from levelstride.operator.wave import Wave
from levelstride.stability.spectrum import (
    sampled_wavenumbers,
    steepest_gradient,
    steepest_wavenumber,
)
from oracles.columns import GRADIENTS


def horizontal_of(gradient, spacing_m=3000.0, directions=1):
    largest = 2e-3 if gradient == "given" else None
    return Horizontal(spacing_m, gradient, directions, largest)


@pytest.mark.parametrize("gradient", GRADIENTS)
@given(spacing_m=st.floats(1.0, 1e6), directions=st.sampled_from([1, 2]))
def test_sixteen_waves_from_128_cells_to_two_and_the_steepest(gradient, spacing_m, directions):
    horizontal = horizontal_of(gradient, spacing_m, directions)
    waves = sampled_wavenumbers(horizontal)
    assert waves[0] * spacing_m == pytest.approx(np.pi / 64)
    assert waves[-1] * spacing_m == pytest.approx(np.pi)
    assert np.all(np.diff(waves) > 0)
    steepest = steepest_wavenumber(horizontal)
    assert np.min(np.abs(waves - steepest)) < 1e-9 * steepest
    others = waves[np.abs(waves - steepest) > 1e-9 * steepest]
    plain = others if waves.size == 17 else waves
    assert plain.size == 16
    assert np.ptp(np.diff(np.log(plain))) < 1e-9


@pytest.mark.parametrize("gradient", GRADIENTS)
@pytest.mark.parametrize("directions", [1, 2])
def test_no_wave_is_steeper_than_the_steepest(gradient, directions):
    horizontal = horizontal_of(gradient, directions=directions)
    dense = np.linspace(1e-3, np.pi, 20001) / horizontal.grid_spacing_m
    largest = max(abs(Wave(float(kappa), horizontal).gradient) for kappa in dense)
    assert steepest_gradient(horizontal) == pytest.approx(largest, rel=1e-7)
    assert steepest_gradient(horizontal) >= largest * (1 - 1e-12)


def test_more_samples_on_demand():
    assert sampled_wavenumbers(horizontal_of("staggered"), 400).size == 400
