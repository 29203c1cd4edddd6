"""Growth measured by marching: many waves side by side, one step after the other.

A state with a share in every mode is carried through so many steps that what grows shows. Where its
norm passes what the transient criterion allows, ||R^m|| does too, and the step is refuted beyond
doubt; a norm that has risen and rises ever faster will. That it does not grow is strong evidence,
no proof: a growing mode starts with a share of about one over the root of the number of unknowns,
and must outgrow everything else. What is neither quiet nor refuted in time is left to full
matrices. The cost grows with the number of unknowns, not with its cube.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError
from levelstride.stability.powers import LOG_CONDITION
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem, lowest_log_limit
from levelstride.stepper.lane_schemes import lanes_of
from levelstride.stepper.lanes import LaneStepper

Array = NDArray[np.float64]

FIRST_STEPS = 8
"""Steps up to the first look at the norm; even tenfold growth a step stays far from overflow."""

GLANCE = 1000
"""Steps after which a quiet wave counts as stable."""

MOST_STEPS = 4000
"""Steps after which full matrices tell growth that is still unclear at less cost."""

EFOLDINGS = 3.0
"""Tolerated e-folding times after which growth at the tolerated rate shows against all else."""

QUIET = 0.1
"""Growth below this share of the tolerated rate is none."""

RIPPLE = 0.2
"""Change of ln of the norm from which growth is told apart from interference of waves."""

STILL_RISING = 2.0
"""Growth of ln of the norm over the last half of a march that no passing rise of exp(t L) has."""

RISEN = 3.0
"""ln of a norm that a state of norm one does not reach where exp(t L) only turns and damps."""

MARGIN = 1.5
"""A state this close to the tolerated norm, in ln, may hide another that exceeds it."""


class Seen(Enum):
    """What marching tells of a step."""

    QUIET = "quiet"
    GROWS = "grows"
    UNCLEAR = "unclear"


@dataclass(frozen=True, slots=True)
class Look:
    """What was seen of one wave.

    Attributes
    ----------
    seen : Seen
    rate : float
        Growth rate over the last half of the march, own growth taken out [1/s].
    """

    seen: Seen
    rate: float


class March:
    """Marches of waves of one column, splitting and tableau; keeps steppers for the next step.

    Parameters
    ----------
    tolerance : Tolerance
    most : int
        Steps after which what is unclear stays so, where not all the time is asked for.
    """

    def __init__(self, tolerance: Tolerance, most: int = MOST_STEPS) -> None:
        self._tolerance, self._most = tolerance, most
        self._steppers: dict[tuple[int, ...], LaneStepper] = {}

    def look(
        self, problems: Sequence[WaveProblem], dt: float, enough: int | None = GLANCE
    ) -> list[Look]:
        """March waves at one step until each is quiet, refuted, or has had its time.

        Parameters
        ----------
        problems : sequence of WaveProblem
        dt : float
            [s]
        enough : int or None
            Steps after which quiet waves count as stable; None to march until growth at the
            tolerated rate itself would show.
        """
        try:
            stepper = self._stepper(problems, dt)
        except CalculationError:
            if len(problems) == 1:
                return [Look(Seen.GROWS, np.inf)]
            return [self.look([problem], dt, enough)[0] for problem in problems]
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            return _Course(problems, stepper, self._tolerance).run(enough, self._most)

    def _stepper(self, problems: Sequence[WaveProblem], dt: float) -> LaneStepper:
        key = tuple(id(problem) for problem in problems)
        known = self._steppers.get(key)
        if known is None:
            parts = [problem.parts for problem in problems]
            known = lanes_of(parts, problems[0].tableau, dt)
            self._steppers[key] = known
            return known
        return known.at_step(dt)


class _Course:
    """One march."""

    def __init__(
        self, problems: Sequence[WaveProblem], stepper: LaneStepper, tolerance: Tolerance
    ) -> None:
        self._problems, self._stepper, self._tolerance = problems, stepper, tolerance
        self._dt, nlane = stepper.dt, len(problems)
        # own growth costs more than most marches: asked only where it may excuse what is seen
        self._own = np.zeros(nlane)
        self._unasked = np.ones(nlane, dtype=bool)
        self._past: list[tuple[int, Array]] = []
        self._gains = np.array([problem.facts.gains_energy for problem in problems])
        self._limit = lowest_log_limit(tolerance)
        self._q = _first_state(problems[0].size, nlane, stepper.dtype)
        self._log, self._highest = np.zeros(nlane), np.zeros(nlane)
        self._steps = 0

    def run(self, enough: int | None, most: int) -> list[Look]:
        found: list[Look | None] = [None] * len(self._problems)
        last = int(np.ceil(EFOLDINGS * self._tolerance.efolding_s / self._dt))
        if enough is not None:
            last = min(last, most)
        enough = last if enough is None else min(enough, last)
        while True:
            rates = self._go_on(max(self._steps, FIRST_STEPS))
            still_open = np.array([look is None for look in found])
            doubted = self._refuted(rates)
            if self._steps >= enough:
                doubted |= ~self._quiet(rates)
            rates -= self._ask_own_growth(still_open & doubted)
            refuted = self._refuted(rates)
            for lane, look in enumerate(found):
                if look is None and refuted[lane]:
                    found[lane] = Look(Seen.GROWS, float(rates[lane]))
            if self._steps >= enough:
                quiet = self._quiet(rates)
                for lane, look in enumerate(found):
                    if look is None and quiet[lane]:
                        found[lane] = Look(Seen.QUIET, float(rates[lane]))
            if self._steps >= last or None not in found:
                return [
                    look or Look(Seen.UNCLEAR, float(rate))
                    for look, rate in zip(found, rates, strict=True)
                ]

    def _go_on(self, steps: int) -> Array:
        """March and return the growth rate over these steps, own growth taken out."""
        self._stepper.march(self._q, steps)
        norm = np.linalg.norm(self._q, axis=0)
        gained = np.log(norm)
        gained[~np.isfinite(norm)] = np.inf
        self._q *= np.where(np.isfinite(norm) & (norm > 0), 1 / norm, 0.0)
        self._steps += steps
        self._log += gained
        self._past.append((self._steps, self._log.copy()))
        self._highest = np.maximum(self._highest, self._excess())
        rates: Array = gained / (steps * self._dt) - self._own
        return rates

    def _ask_own_growth(self, doubted: NDArray[np.bool_]) -> Array:
        """Take out the own growth of lanes not asked before; return what that changes [1/s]."""
        asked = doubted & self._unasked
        for lane in np.flatnonzero(asked).tolist():
            self._own[lane] = self._problems[lane].facts.own_growth
        self._unasked &= ~asked
        if np.any(self._own[asked]):
            tolerated = self._dt * (self._own + self._tolerance.rate)
            excess = [log - steps * tolerated for steps, log in self._past]
            self._highest = np.maximum(0.0, np.max(excess, axis=0))
        change: Array = np.where(asked, self._own, 0.0)
        return change

    def _excess(self) -> Array:
        """Logarithm of the norm after the tolerated growth is taken out."""
        rate = self._own + self._tolerance.rate
        excess: Array = self._log - self._steps * self._dt * rate
        return excess

    def _refuted(self, rates: Array) -> NDArray[np.bool_]:
        """Norms that have risen, and go on rising as nothing that passes does.

        Beyond what the transient criterion allows where exp(t L) may rise itself; far beyond that,
        rising or not.
        """
        excess, span = self._excess(), self._steps * self._dt / 2
        risen = excess > np.where(self._gains, self._limit, RISEN)
        certain = ~(excess <= self._limit + np.where(self._gains, LOG_CONDITION, 0.0))
        return np.asarray((risen & (rates * span > STILL_RISING)) | certain)

    def _quiet(self, rates: Array) -> NDArray[np.bool_]:
        span = self._steps * self._dt / 2
        still = rates <= max(QUIET * self._tolerance.rate, min(RIPPLE / span, self._short_rate()))
        low = self._highest + MARGIN <= self._limit
        return np.asarray(still & low)

    def _short_rate(self) -> float:
        """Growth that counts as none before the time is up; at its end nothing above ``QUIET``."""
        last = EFOLDINGS * self._tolerance.efolding_s
        return np.inf if self._steps * self._dt < last else 0.0


def _first_state(size: int, nlane: int, dtype: np.dtype[Any]) -> NDArray[Any]:
    """A state of norm one with a share in every mode: the same every time and in all lanes."""
    generator = np.random.default_rng(size)
    state = generator.standard_normal(size).astype(dtype)
    if state.dtype.kind == "c":
        state = state + 1j * generator.standard_normal(size)
    state /= np.linalg.norm(state)
    return np.ascontiguousarray(np.repeat(state[:, None], nlane, axis=1))
