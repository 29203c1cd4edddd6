"""Damping and phase of every mode with everything implicit, textbook formulas.

A mode exp(i w t) is multiplied in one step by 1/(1 - z) with backward Euler and by
(1 + z/2)/(1 - z/2) with the trapezoidal rule, z = i w dt: the first damps it by
(1 + (w dt)^2)^(-1/2) a step and turns it by arctan(w dt), the second keeps its size and turns it by
2 arctan(w dt / 2).
"""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.accuracy.matched_errors import matched_errors
from levelstride.accuracy.matching import FAINT, Follower
from levelstride.accuracy.wave_errors import all_waves
from levelstride.column.column import Horizontal
from levelstride.operator.wave import Wave
from levelstride.splitting import resolve
from levelstride.tableaux import find
from oracles.columns import STAGGERINGS, random_column, seeds

HORIZONTAL = Horizontal(2000.0, "staggered", 1)
WAVE = Wave(2 * np.pi / 30e3, HORIZONTAL)


def stepped(seed, staggering, tableau, dt):
    column = replace(random_column(seed), horizontal=HORIZONTAL, staggering=staggering)
    (waves,) = all_waves(column, column.airs[0], [WAVE])
    follower = Follower(waves.parts(resolve("all-implicit")), find(tableau))
    found = matched_errors(waves, follower, dt)
    moving = found.frequency > 0
    assert found.matched.all()
    return found, moving


def assert_errors(found, expected, turn):
    """Round-off of a phase counts relative to the turn that it is divided by."""
    assert np.all(np.abs(found - expected) <= 1e-5 * expected + 1e-9 / turn)


@settings(max_examples=6, deadline=None)
@given(seed=seeds, dt=st.floats(0.5, 2000.0))
@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_backward_euler_damps_every_mode(staggering, seed, dt):
    found, moving = stepped(seed, staggering, "ARS(1,1,1)", dt)
    turn = found.frequency[moving] * dt
    size = 1 / np.sqrt(1 + turn**2)
    np.testing.assert_allclose(np.abs(found.factor[moving]), size, rtol=1e-6)
    expected = np.expm1(-np.log1p(turn**2) * np.pi / turn)
    np.testing.assert_allclose(found.per_period[moving], expected, rtol=1e-5, atol=1e-7)
    hour = np.expm1(-np.log1p(turn**2) * 1800 / dt)
    np.testing.assert_allclose(found.per_hour[moving], hour, rtol=1e-5, atol=1e-7)
    sure = np.abs(size / FAINT - 1) > 1e-6
    assert np.array_equal(found.faint[moving][sure], (size < FAINT)[sure])
    held = ~found.faint[moving]
    error = np.abs(np.arctan(turn) / turn - 1)[held]
    assert_errors(found.frequency_error[moving][held], error, turn[held])


@settings(max_examples=6, deadline=None)
@given(seed=seeds, dt=st.floats(0.5, 2000.0))
@pytest.mark.parametrize("staggering", STAGGERINGS)
def test_trapezoidal_rule_keeps_every_mode_and_slows_it(staggering, seed, dt):
    found, moving = stepped(seed, staggering, "H-CN(2,2,2)", dt)
    np.testing.assert_allclose(np.abs(found.factor), 1.0, rtol=1e-8)
    assert not found.faint.any()
    turn = found.frequency[moving] * dt
    error = np.abs(2 * np.arctan(turn / 2) / turn - 1)
    assert_errors(found.frequency_error[moving], error, turn)
    assert found.growth_per_s * dt < 1e-8
