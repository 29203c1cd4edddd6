"""How long a step stays accurate: bisected, where an advice tries every step on its way down."""

from dataclasses import replace
from math import inf, sqrt
from typing import Final

from levelstride.results.dataset import Limit
from levelstride.studies.advised_step import SHORTEST, Check, Choice, StepCheck, choose_step

EDGE: Final = 1.002
"""Ratio of the shortest step known to fail to the longest known to pass, at most."""

NARROWER: Final = 2.0
"""Ratio of steps that are tried until one passes."""


class EdgeCheck:
    """Examines steps, and takes accuracy to be lost once on the way to longer ones.

    The first step that fails has the edge bisected below it; longer steps than that count as
    failing. Shorter ones are examined, each itself.

    Parameters
    ----------
    check : callable
        Examines one step, given in s.
    """

    def __init__(self, check: Check) -> None:
        self._check = check
        self._seen: dict[float, StepCheck] = {}
        self._lost_s = inf
        self._lost: StepCheck | None = None

    def examine(self, step_s: float) -> StepCheck:
        """Say what speaks against a step."""
        if self._lost is not None and step_s > self._lost_s:
            return self._lost
        found = self._look(step_s)
        if found.failure is not None and self._lost is None:
            self._bisect(step_s, found)
        return found

    def holds(self, step_s: float) -> bool:
        """Whether a step is short of where accuracy is lost, as far as is known."""
        return step_s <= self._lost_s

    def _look(self, step_s: float) -> StepCheck:
        if step_s not in self._seen:
            self._seen[step_s] = self._check(step_s)
        return self._seen[step_s]

    def _bisect(self, step_s: float, failing: StepCheck) -> None:
        """Find the edge below a step that fails; without one every step fails."""
        high, low = step_s, step_s / NARROWER
        while (found := self._look(low)).failure is not None:
            high, failing, low = low, found, low / NARROWER
            if low < SHORTEST * step_s:
                self._lost_s, self._lost = high, failing
                return
        while high > EDGE * low:
            middle = sqrt(high * low)
            found = self._look(middle)
            if found.failure is None:
                low = middle
            else:
                high, failing = middle, found
        self._lost_s, self._lost = high, failing


def accurate_and_advised(
    found: Limit,
    *,
    safety: float,
    intervals_s: tuple[float, ...],
    check: Check,
    check_stable: Check | None = None,
) -> tuple[Choice, Choice]:
    """Find the longest accurate step up to the stable one, and the step to advise.

    Parameters
    ----------
    found : Limit
        The limit.
    safety : float
        Share of the stable step to advise at most [1].
    intervals_s : tuple of float
        Intervals that hold whole advised steps [s].
    check : callable
        Examines one step, given in s.
    check_stable : callable, optional
        Examines a step between the safe and the stable one, more cheaply.

    Returns
    -------
    accurate, advised : Choice
        With the reasons that bind.
    """
    edge = EdgeCheck(check)
    advised = choose_step(found, safety=safety, intervals_s=intervals_s, check=edge.examine)
    if found.unbounded or found.stable_step_s is None:
        if not intervals_s:
            return advised, advised
        return choose_step(found, safety=1.0, intervals_s=(), check=edge.examine), advised
    safe_s = safety * found.stable_step_s
    above = EdgeCheck(check_stable or check) if edge.holds(safe_s) else edge

    def within_safety(step_s: float) -> StepCheck:
        return above.examine(step_s) if step_s > safe_s else StepCheck(None)

    accurate = choose_step(found, safety=1.0, intervals_s=(), check=within_safety)
    if accurate.step_s is not None and accurate.step_s > safe_s:
        return accurate, advised
    if intervals_s:
        below = replace(found, stable_step_s=safe_s)
        accurate = choose_step(below, safety=1.0, intervals_s=(), check=edge.examine)
        return accurate, advised
    return advised, advised
