"""The limit of one wave by the growth that full matrices tell: for growth too slow to march."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from levelstride.stability.step_limit import (
    BISECTION,
    SCAN_RATIO,
    SMALLEST_FIRST_STEP,
    Bracket,
    no_step,
)
from levelstride.stability.tolerance import LOG_STRICT, Tolerance
from levelstride.stability.wave_problem import WaveProblem

SHORTEST, LONGEST = 0.3, 0.97
"""Bounds of the factor to the next shorter step."""

EDGE = 0.1
"""Share of a bracket by which a secant keeps away from its ends."""


Excess = Callable[[float], float]
"""Logarithm of growth over what is tolerated at a step; -inf without growth."""


def first_failure(problem: WaveProblem, high: float, tolerance: Tolerance) -> Bracket:
    """Find the limit of one wave below a step that fails.

    Weak growth is a power of the step, so that a secant through the logarithms of growth and step
    needs a few dense eigenvalue problems where bisection needs ten.

    Parameters
    ----------
    problem : WaveProblem
    high : float
        A step that is not stable [s].
    tolerance : Tolerance

    Raises
    ------
    CalculationError
        If no step is stable, however short.
    """
    rate = problem.rate(tolerance)
    found = bracket(problem, high, lambda dt: _log_share(problem.growth(dt), rate))
    if problem.stable(found.low, tolerance):
        return found
    return _by_all_criteria(problem, found.low, tolerance)


def strict_failure(problem: WaveProblem, high: float) -> Bracket:
    """Find the strict limit of one wave below a step that fails; see ``first_failure``."""
    return bracket(problem, high, lambda dt: _log_share(problem.growth(dt) * dt, LOG_STRICT))


def bracket(problem: WaveProblem, high: float, excess: Excess) -> Bracket:
    """Bracket the step at which growth passes what is tolerated, from above."""
    low, below = high, excess(high)
    above = below
    while below > 0:
        high, above = low, below
        low = high * float(np.clip(np.exp(-above / 2), SHORTEST, LONGEST))
        if low < SMALLEST_FIRST_STEP:
            raise no_step(problem.kappa)
        below = excess(low)
    while high / low > BISECTION:
        share = 0.5
        if np.isfinite(below) and np.isfinite(above) and above > below:
            share = float(np.clip(-below / (above - below), EDGE, 1 - EDGE))
        middle = low * (high / low) ** share
        growth = excess(middle)
        if growth > 0:
            high, above = middle, growth
        else:
            low, below = middle, growth
    return Bracket(low, high, problem)


def _log_share(growth: float, allowed: float) -> float:
    return float(np.log(growth / allowed)) if growth > 0 else -np.inf


def _by_all_criteria(problem: WaveProblem, high: float, tolerance: Tolerance) -> Bracket:
    low = high / SCAN_RATIO
    while not problem.stable(low, tolerance):
        high, low = low, low / SCAN_RATIO
        if low < SMALLEST_FIRST_STEP:
            raise no_step(problem.kappa)
    while high / low > BISECTION:
        middle = float(np.sqrt(low * high))
        if problem.stable(middle, tolerance):
            low = middle
        else:
            high = middle
    return Bracket(low, high, problem)
