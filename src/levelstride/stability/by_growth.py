"""The limit of one wave by the growth that full matrices tell: for growth too slow to march."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from levelstride.stability.shift_invert import ShiftInvert
from levelstride.stability.step_limit import (
    BISECTION,
    SCAN_RATIO,
    SMALLEST_FIRST_STEP,
    Bracket,
    no_step,
)
from levelstride.stability.tolerance import LOG_STRICT, Tolerance
from levelstride.stability.wave_problem import WaveProblem
from levelstride.tableaux.tableau import Tableau

SHORTEST, LONGEST = 0.3, 0.97
"""Bounds of the factor to the next shorter step."""

EDGE = 0.1
"""Share of a bracket by which a secant keeps away from its ends."""


Excess = Callable[[float, float], float]
"""Logarithm of growth over what is tolerated, of growth [1/s] and step [s]; -inf without growth."""

FOLLOWED_FROM = 250
"""Unknowns from which following an eigenvalue is cheaper than finding all of them."""


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
    if problem.growth(high) <= rate:
        return _by_all_criteria(problem, high, tolerance)
    found = first_growth(problem, high, tolerance)
    if problem.size > FOLLOWED_FROM or problem.stable(found.low, tolerance):
        return found
    return _by_all_criteria(problem, found.low, tolerance)


def first_growth(problem: WaveProblem, high: float, tolerance: Tolerance) -> Bracket:
    """Find where one wave begins to grow too fast, below a step at which it does.

    Raises
    ------
    CalculationError
        If it does at every step, however short.
    """
    rate = problem.rate(tolerance)
    return _bracket(problem, high, lambda growth, _: _log_share(growth, rate))


def strict_failure(problem: WaveProblem, high: float) -> Bracket:
    """Find the strict limit of one wave below a step that fails; see ``first_failure``."""
    return _bracket(problem, high, lambda growth, dt: _log_share(growth * dt, LOG_STRICT))


def _bracket(problem: WaveProblem, high: float, excess: Excess) -> Bracket:
    """Bracket the step at which growth passes what is tolerated, from above.

    With many unknowns the eigenvalue that grows fastest at first is followed, at a fraction of the
    cost, and full matrices are asked about the end.
    """
    if problem.size > FOLLOWED_FROM and isinstance(problem.tableau, Tableau):
        followed = _Followed(problem, high)
        found = _close_in(problem, high, lambda dt: excess(followed.growth(dt), dt))
        if excess(problem.growth(found.low), found.low) <= 0:
            return found
        high = found.low
    return _close_in(problem, high, lambda dt: excess(problem.growth(dt), dt))


class _Followed:
    """The growth of one eigenvalue of R from step to step, by inverse iteration in the stages."""

    def __init__(self, problem: WaveProblem, dt: float) -> None:
        self._problem = problem
        inverse = ShiftInvert(problem.parts, problem.table, dt)
        start = np.random.default_rng(problem.size).standard_normal(problem.size)
        vector = inverse.solve_at(problem.dominant(dt)).matvec(start.astype(complex))
        self._pair = inverse.refine(inverse.pair(vector))

    def growth(self, dt: float) -> float:
        inverse = ShiftInvert(self._problem.parts, self._problem.table, dt)
        self._pair = inverse.refine(inverse.pair(self._pair.vector))
        return float(np.log(abs(self._pair.value)) / dt)


def _close_in(problem: WaveProblem, high: float, excess: Callable[[float], float]) -> Bracket:
    low, below = high, excess(high)
    above, factor = below, LONGEST  # first close below: growth may set in at once
    while below > 0:
        high, above = low, below
        low = high * factor
        if low < SMALLEST_FIRST_STEP:
            raise no_step(problem.kappa)
        below = excess(low)
        factor = float(np.clip(np.exp(-max(below, 0.0) / 2), SHORTEST, LONGEST))
    halve = False  # growth that sets in sharply keeps secants at one end of the bracket
    while (width := np.log(high / low)) > np.log(BISECTION):
        share = 0.5
        if not halve and np.isfinite(below) and np.isfinite(above) and above > below:
            share = float(np.clip(-below / (above - below), EDGE, 1 - EDGE))
        middle = low * (high / low) ** share
        growth = excess(middle)
        if growth > 0:
            high, above = middle, growth
        else:
            low, below = middle, growth
        halve = np.log(high / low) > 0.5 * width
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
