"""The strict step of large columns: no radius beyond one but for round-off.

Growth of 1e-8 a step shows in no march. The frozen layers, whose radii are exact, say where below
the stable step waves may lose it; full matrices are asked there, and about every wave at the
answer.
"""

from __future__ import annotations

import numpy as np

from levelstride.stability.by_growth import strict_failure
from levelstride.stability.step_limit import SCAN_RATIO, Bracket, StepSearch
from levelstride.stability.tolerance import LOG_STRICT
from levelstride.stability.wave_problem import WaveProblem

STRIDE = 12
"""Steps of the scan from one look at frozen layers to the next."""

REACH = 1e3
"""How far below the stable step frozen layers are looked at, as a factor."""


def strict_step(waves: StepSearch, found: Bracket | None) -> float | None:
    """Find the longest step at which no radius is beyond one but for round-off.

    Parameters
    ----------
    waves : StepSearch
        Holds the waves.
    found : Bracket or None
        The stable step for spectrum and transient criterion, None if these do not bite.

    Returns
    -------
    float or None
        None if no wave is found to lose it [s].

    Raises
    ------
    CalculationError
        If every step loses it.
    """
    problems = waves.problems()
    highest = waves.largest_s if found is None else found.low
    losing = {id(problem): _first_loss(problem, highest) for problem in problems}
    best = np.inf if found is None else found.low
    for problem in sorted(problems, key=lambda problem: losing[id(problem)]):
        for step in (losing[id(problem)], min(best, highest)):
            if step <= min(best, highest) and problem.growth(step) * step > LOG_STRICT:
                best = min(best, strict_failure(problem, step).low)
                break
    return float(best) if np.isfinite(best) else None


def _first_loss(problem: WaveProblem, highest: float) -> float:
    """First step at which frozen layers grow by more than round-off; inf if none does [s]."""
    count = 1 + int(np.log(REACH) / (STRIDE * np.log(SCAN_RATIO)))
    steps = np.geomspace(highest / REACH, highest, count)
    lost = problem.local_screen.growth(steps) * steps > LOG_STRICT
    return float(steps[np.argmax(lost)]) if lost.any() else np.inf
