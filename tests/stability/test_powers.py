"""Norms of powers by repeated squaring, against powers multiplied out."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.stability.powers import (
    PowerNorms,
    ScaledMatrix,
    bounded,
    power_norms,
    power_peak,
    radius_within,
)

seeds = st.integers(0, 2**32 - 1)


def random_step(seed, radius=0.999):
    """A random matrix of size 6, far from normal, with this spectral radius."""
    rng = np.random.default_rng(seed)
    matrix = np.triu(rng.standard_normal((6, 6)) * 2, 1) + np.diag(rng.uniform(-1, 1, 6))
    matrix[2, 2] = rng.choice([-1, 1])
    matrix *= radius / np.abs(np.diag(matrix)).max()
    turn, _ = np.linalg.qr(rng.standard_normal((6, 6)))
    return turn @ matrix @ turn.T


def norms_of(matrix):
    return PowerNorms(lambda: matrix)


@given(seeds)
@settings(max_examples=30, deadline=None)
def test_power_norms_are_the_norms_of_the_powers(seed):
    matrix = random_step(seed)
    asked = dict(power_norms(matrix, 24))
    assert list(asked) == [1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48]
    for steps, log_norm in asked.items():
        direct = np.linalg.norm(np.linalg.matrix_power(matrix, steps), 2)
        assert log_norm == pytest.approx(np.log(direct), abs=1e-7)


@given(seeds)
@settings(max_examples=20, deadline=None)
def test_frobenius_norms_of_the_squarings(seed):
    matrix = random_step(seed)
    norms = norms_of(matrix)
    for k in (0, 3, 1, 5):
        direct = np.linalg.norm(np.linalg.matrix_power(matrix, 2**k))
        assert norms.log_norm(k) == pytest.approx(np.log(direct), abs=1e-9)
    kept = list(norms.logs)
    norms.forget()
    assert norms.log_norm(6) == pytest.approx(
        np.log(np.linalg.norm(np.linalg.matrix_power(matrix, 64))), abs=1e-9
    )
    assert norms.logs[: len(kept)] == kept


@given(seeds, st.floats(0.5, 200.0))
@settings(max_examples=40, deadline=None)
def test_the_peak_is_the_largest_of_the_asked_powers(seed, horizon):
    matrix, dt, rate = random_step(seed), 0.5, 0.01
    last = 2 ** int(np.ceil(max(0.0, np.log2(horizon / dt))))
    steps = [1, 2, *(m for k in range(1, 10) for m in (3 * 2 ** (k - 1), 2 ** (k + 1)))]
    values = {
        m: np.log(np.linalg.norm(np.linalg.matrix_power(matrix, m), 2)) - m * dt * rate
        for m in steps
        if m <= 1.5 * last
    }
    peak = power_peak(matrix, dt, rate, horizon)
    assert peak.log_value == pytest.approx(max(values.values()), abs=1e-6)
    assert values[peak.steps] == pytest.approx(peak.log_value, abs=1e-6)
    assert peak.log_norm == pytest.approx(peak.log_value + peak.steps * dt * rate, abs=1e-6)


@given(seeds, st.floats(0.9, 1.1), st.floats(-2.0, 6.0))
@settings(max_examples=150, deadline=None)
def test_what_power_norms_decide_is_true(seed, radius, log_limit):
    matrix, dt, rate, horizon = random_step(seed, radius), 1.0, 0.02, 200.0
    decided = bounded(norms_of(matrix), 6, dt, rate, log_limit, horizon)
    peak = power_peak(matrix, dt, rate, horizon).log_value
    grows = np.log(np.abs(np.linalg.eigvals(matrix)).max()) > rate * dt * (1 + 1e-9)
    if decided is True:
        assert peak <= log_limit
        assert not grows
    if decided is False:
        # beyond the horizon only growth can have refuted it
        assert peak > log_limit or grows


def test_clear_cases_are_decided():
    turn, _ = np.linalg.qr(np.random.default_rng(3).standard_normal((6, 6)))
    normal = turn @ np.diag([1.0, -1, 1, 0.5, 0.2, 0]) @ turn.T
    assert bounded(norms_of(normal), 6, 1.0, 0.01, 3.0, 100.0) is True
    assert bounded(norms_of(1.1 * normal), 6, 1.0, 0.01, 3.0, 100.0) is False
    jordan = np.eye(6) + 10 * np.diag(np.ones(5), 1)
    assert bounded(norms_of(jordan), 6, 1.0, 0.01, 3.0, 1000.0) is False


@given(seeds, st.floats(-0.2, 0.2))
@settings(max_examples=100, deadline=None)
def test_radius_within_is_true_where_it_decides(seed, log_radius):
    matrix = random_step(seed, 1.02)
    decided = radius_within(norms_of(matrix), log_radius)
    if decided is not None:
        assert decided == (np.log(1.02) <= log_radius)
    else:
        assert abs(np.log(1.02) / log_radius - 1) < 1  # norms alone do not tell so near


def test_radius_within_sees_eight_digits_behind_one():
    turn, _ = np.linalg.qr(np.random.default_rng(5).standard_normal((6, 6)))
    unitary = turn @ np.diag([1.0, -1, 1, 0.5, 0.2, 0]) @ turn.T
    allowed = float(np.log1p(1e-8))
    assert radius_within(norms_of(unitary), allowed) is True
    assert radius_within(norms_of((1 + 2e-8) * unitary), allowed) is False


def test_no_power_overflows():
    norms = norms_of(np.full((3, 3), 1e200))
    assert norms.log_norm(40) == pytest.approx(2.0**40 * np.log(3e200), rel=1e-12)
    assert bounded(norms, 3, 1.0, 1e-5, 7.0, 1e6) is False
    assert power_peak(np.full((3, 3), 1e200), 1.0, 1e-5, 1e6).log_value > 7


def test_no_power_underflows():
    assert norms_of(np.full((3, 3), 1e-200)).log_norm(40) == pytest.approx(
        2.0**40 * np.log(3e-200), rel=1e-12
    )


def test_a_nilpotent_matrix_ends_in_nothing():
    nilpotent = np.diag(np.full(3, 1e6), 1)
    norms = norms_of(nilpotent)
    assert norms.log_norm(2) == -np.inf
    assert norms.log_norm(3) is None
    assert norms.ended
    assert list(power_norms(nilpotent, 1e9))[-1][1] == -np.inf
    # short-lived, but a million million is more than anything allowed
    assert bounded(norms_of(nilpotent), 4, 1.0, 1e-5, 7.0, 1e6) is False
    assert bounded(norms_of(1e-6 * nilpotent), 4, 1.0, 1e-5, 7.0, 1e6) is True
    assert radius_within(norms_of(nilpotent), 0.0) is True


def test_zero_and_infinite_matrices():
    zero = np.zeros((3, 3))
    assert ScaledMatrix.of(zero).log_norm() == -np.inf
    assert bounded(norms_of(zero), 3, 1.0, 1e-5, 7.0, 1e6) is True
    assert power_peak(zero, 1.0, 1e-5, 1e6).log_value == -np.inf
    infinite = np.full((3, 3), np.inf)
    assert ScaledMatrix.of(infinite).log_norm() == np.inf
    assert bounded(norms_of(infinite), 3, 1.0, 1e-5, 7.0, 1e6) is False
