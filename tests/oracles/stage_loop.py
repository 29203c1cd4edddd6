"""Slow twin: an additive Runge-Kutta step written out stage by stage, and problems to take it on.

The parts of every problem do not commute, so that a wrong coupling of the two tables shows.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.integrate import solve_ivp
from scipy.linalg import expm


@dataclass(frozen=True)
class Problem:
    """q' = slow(q) + fast(q), with the Jacobian of fast for the stage's Newton iteration."""

    slow: Callable[[np.ndarray], np.ndarray]
    fast: Callable[[np.ndarray], np.ndarray]
    fast_jacobian: Callable[[np.ndarray], np.ndarray]
    start: np.ndarray
    end_time: float
    end: np.ndarray


def take_step(tableau, problem, q, dt):
    """One step by the definition; no stage is skipped and nothing is reused."""
    slow_stages, fast_stages = [], []
    for i in range(tableau.nstage):
        known = q.copy()
        for j in range(i):
            known = known + dt * tableau.a_explicit[i, j] * slow_stages[j]
            known = known + dt * tableau.a_implicit[i, j] * fast_stages[j]
        stage = solve_stage(problem, known, dt * tableau.a_implicit[i, i])
        slow_stages.append(problem.slow(stage))
        fast_stages.append(problem.fast(stage))
    for i in range(tableau.nstage):
        q = q + dt * tableau.b_explicit[i] * slow_stages[i]
        q = q + dt * tableau.b_implicit[i] * fast_stages[i]
    return q


def solve_stage(problem, known, weight):
    """Y with Y = known + weight fast(Y), by Newton iteration."""
    stage = known.copy()
    if weight == 0.0:
        return stage
    for _ in range(50):
        residual = stage - known - weight * problem.fast(stage)
        matrix = np.eye(stage.size) - weight * problem.fast_jacobian(stage)
        correction = np.linalg.solve(matrix, residual)
        stage = stage - correction
        if np.abs(correction).max() < 1e-15:
            break
    return stage


def error_after(tableau, problem, steps):
    """Largest error at the end time after so many equal steps."""
    q = problem.start
    for _ in range(steps):
        q = take_step(tableau, problem, q, problem.end_time / steps)
    return np.abs(q - problem.end).max()


def measured_order(tableau, problem, steps):
    """Slope of the error between `steps` and twice as many."""
    return np.log2(error_after(tableau, problem, steps) / error_after(tableau, problem, 2 * steps))


def linear_pair():
    """Two 3 x 3 matrices that do not commute; the exact solution is a matrix exponential."""
    slow = np.array([[0.1, 1.2, -0.4], [-1.0, 0.0, 0.7], [0.5, -0.6, -0.2]])
    fast = np.array([[-0.8, 0.3, 1.1], [0.2, -1.3, -0.9], [-1.2, 0.8, -0.4]])
    assert np.abs(slow @ fast - fast @ slow).max() > 0.5
    start = np.array([1.0, -0.5, 0.25])
    end_time = 1.5
    return Problem(
        slow=lambda q: slow @ q,
        fast=lambda q: fast @ q,
        fast_jacobian=lambda q: fast,
        start=start,
        end_time=end_time,
        end=expm(end_time * (slow + fast)) @ start,
    )


def nonlinear_pair():
    """A spinning body (slow) with a nonlinear pull (fast); scipy solves it to 13 digits."""

    def slow(q):
        return np.array([0.9 * q[1] * q[2], -1.1 * q[0] * q[2], 0.4 * q[0] * q[1] + 0.3 * q[2]])

    def fast(q):
        return np.array([-np.sin(q[0]) + q[1] ** 2, -q[1] * q[0] - q[1], np.cos(q[1]) - q[2] ** 2])

    def fast_jacobian(q):
        return np.array(
            [
                [-np.cos(q[0]), 2.0 * q[1], 0.0],
                [-q[1], -q[0] - 1.0, 0.0],
                [0.0, -np.sin(q[1]), -2.0 * q[2]],
            ]
        )

    start = np.array([0.8, 1.1, -0.3])
    end_time = 1.5
    solution = solve_ivp(
        lambda _, q: slow(q) + fast(q), (0.0, end_time), start, "DOP853", rtol=3e-14, atol=1e-15
    )
    return Problem(slow, fast, fast_jacobian, start, end_time, solution.y[:, -1])
