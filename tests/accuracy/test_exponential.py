"""The exact solution against scipy's expm, against mpmath at forty digits and by its own laws."""

from dataclasses import replace

import mpmath
import numpy as np
import pytest
from scipy.linalg import expm

from levelstride.accuracy.exponential import Exponential
from levelstride.column.background import Motion
from levelstride.column.column import Horizontal
from levelstride.errors import CalculationError
from levelstride.operator.bands import Banded
from levelstride.operator.energy import energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from oracles.columns import (
    STAGGERINGS,
    isothermal_air,
    isothermal_column,
    random_column,
    random_wave,
)

DX = 2000.0
WAVE = Wave(2 * np.pi / (12 * DX), Horizontal(DX, "staggered", 2))


def operator_of(column, wave=WAVE):
    air = column.airs[0]
    scale = np.sqrt(energy_weights(column, air, layout_of(column)))
    total = Banded.zeros(layout_of(column).size)
    for term in assemble(column, air, wave).values():
        total = total + term.similar(scale)
    return total


def resting(staggering="charney-phillips", nlev=3, **changes):
    return isothermal_column(
        nlev, 12e3, staggering=staggering, horizontal=WAVE.horizontal, **changes
    )


def carried(column, wind_c, wind_f):
    """The same column in a wind."""
    n = column.levels.nlev
    motion = Motion(wind_c, wind_f, np.zeros(n), np.zeros(n + 1))
    return replace(column, airs=(isothermal_air(column.levels, 250.0, motion),), wind_given=True)


def sheared(staggering):
    column = resting(
        staggering,
        diffusivity_c=np.full(3, 20.0),
        diffusivity_f=np.full(4, 20.0),
        upper_damping_f=np.array([0, 0, 1e-3, 5e-3]),
    )
    levels = column.levels
    return carried(column, 5 + 1e-3 * levels.centres_m, 5 + 1e-3 * levels.interfaces_m)


def states(size, lanes=3):
    rng = np.random.default_rng(size)
    return rng.standard_normal((size, lanes)) + 1j * rng.standard_normal((size, lanes))


def in_forty_digits(operator, time_s, state):
    with mpmath.workdps(40):
        dense = mpmath.matrix((operator.to_dense()).tolist()) * mpmath.mpf(time_s)
        found = mpmath.expm(dense) * mpmath.matrix(state.tolist())
        return np.array(found.tolist(), dtype=np.complex128)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("time_s", [60.0, 3600.0])
def test_at_rest_it_agrees_with_mpmath(staggering, time_s):
    operator = operator_of(resting(staggering))
    flow, start = Exponential(operator), states(operator.size)
    assert flow.is_unitary
    exact = in_forty_digits(operator, time_s, start)
    np.testing.assert_allclose(flow.apply(time_s, start), exact, atol=1e-10, rtol=0)


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_with_shear_and_damping_it_agrees_with_mpmath(staggering):
    operator = operator_of(sheared(staggering))
    flow, start = Exponential(operator), states(operator.size)
    assert not flow.is_unitary
    exact = in_forty_digits(operator, 600.0, start)
    np.testing.assert_allclose(flow.apply(600.0, start), exact, atol=1e-10, rtol=0)


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("everything", [False, True])
def test_it_agrees_with_scipy_on_random_columns(seed, everything):
    column = random_column(seed, everything=everything)
    operator = operator_of(column, random_wave(seed, column))
    time_s = 50.0 / operator.norm_bound
    flow, start = Exponential(operator), states(operator.size)
    found, dense = flow.apply(time_s, start), expm(time_s * operator.to_dense()) @ start
    np.testing.assert_allclose(found, dense, atol=1e-10 * np.abs(dense).max(), rtol=0)
    if everything:
        assert not flow.is_unitary


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_an_hour_at_rest_agrees_with_scipy_and_keeps_the_energy(staggering):
    operator = operator_of(resting(staggering, nlev=20))
    flow, start = Exponential(operator), states(operator.size)
    end = flow.apply(3600.0, start)
    np.testing.assert_allclose(end, expm(3600.0 * operator.to_dense()) @ start, atol=1e-10, rtol=0)
    np.testing.assert_allclose(
        np.linalg.norm(end, axis=0), np.linalg.norm(start, axis=0), rtol=1e-12
    )
    assert 0 < flow.round_off(3600.0) < 1e-11


@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_a_uniform_wind_only_turns_and_damps(staggering):
    """Advection by one wind is a multiple of the identity: exp(c t) times what happens at rest."""
    wind = np.full(4, 12.0)
    moving = operator_of(carried(resting(staggering), wind[1:], wind))
    still = operator_of(resting(staggering))
    flow, start = Exponential(moving), states(moving.size)
    assert flow.is_unitary
    factor = np.exp(WAVE.advection(np.array([12.0]))[0] * 900.0)
    assert 0 < abs(factor) < 1
    expected = factor * Exponential(still).apply(900.0, start)
    np.testing.assert_allclose(flow.apply(900.0, start), expected, atol=1e-11, rtol=0)


def test_times_add_up_and_shapes_are_kept():
    for column in (resting(), sheared("lorenz")):
        operator = operator_of(column)
        flow, start = Exponential(operator), states(operator.size)
        twice = flow.apply(100.0, flow.apply(200.0, start))
        np.testing.assert_allclose(flow.apply(300.0, start), twice, atol=1e-11, rtol=0)
        one = flow.apply(300.0, start[:, 0])
        assert one.shape == (operator.size,)
        np.testing.assert_allclose(one, twice[:, 0], atol=1e-11, rtol=0)
        np.testing.assert_allclose(flow.apply(0.0, start), start, atol=1e-13, rtol=0)


def test_growth_beyond_all_numbers_is_told():
    growing = Banded((0,), np.array([[1.0, 2.0]]))
    with pytest.raises(CalculationError, match="beyond all numbers within 3600 s"):
        Exponential(growing).apply(3600.0, np.ones(2))
