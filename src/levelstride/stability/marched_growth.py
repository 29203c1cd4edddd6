"""The growth of waves with too many unknowns for full matrices: suspects, refined.

A march brings out what grows fastest, if anything does; the last states of it hold a good guess of
that eigenvalue, which shift-and-invert then refines at this step and at neighbouring ones. Where
nothing grows, what is found is the largest modulus among the eigenvalues near the guess and near
those of the wave that binds. A growth found is there, but for its residual. That there is no other
is not shown by it: the march says so, as far as a march does.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError
from levelstride.stability.shift_invert import Eigenpair, ShiftInvert
from levelstride.stability.wave_problem import WaveProblem
from levelstride.stepper.imex import Stepper
from levelstride.stepper.lanes import LaneStepper

Array = NDArray[Any]

MARCHED, AT_ONCE = 2000, 50
"""Steps of a march that brings out a suspect, and steps between looks at its norm."""

ASIDE = 1.0 + 1e-6
"""A point beside 1 that is no eigenvalue where nothing grows."""

LAST_STATES = 8
"""States at the end of a march in whose span the suspect is sought."""

NEAR = 6
"""Eigenvalues found around every suspect."""

BEYOND = (1.0, 1.02, 1.1, 1.3, 1.7)
"""Factors by which the step is lengthened until a suspect grows fast enough to stand out."""

STANDS_OUT = 0.01
"""Residual up to which a suspect counts as one."""

FOLLOWED = 1.01
"""Ratio of the steps at which an eigenvalue is followed."""

SURE = 1e-8
"""Residual beyond which an eigenvalue counts as not found."""


@dataclass(frozen=True, slots=True)
class Growth:
    """The fastest growth found.

    Attributes
    ----------
    rate : float
        [1/s]; inf where a stage has no solution, -inf if nothing was found.
    residual : float
        Of its eigenpair.
    """

    rate: float
    residual: float


@dataclass(frozen=True, slots=True)
class Suspect:
    """Where eigenvalues are looked for: ln of one over the step [1/s]."""

    exponent: complex

    def at(self, dt: float) -> complex:
        """Where it is to be expected at a step [s]."""
        return complex(np.exp(self.exponent * dt))


def fastest_growth(problem: WaveProblem, dt: float, suspects: tuple[Suspect, ...] = ()) -> Growth:
    """Find the fastest growth that a march and suspects lead to, and that around 1 and -1.

    Slow waves are at 1, and what a step just no longer follows at -1.

    Parameters
    ----------
    problem : WaveProblem
    dt : float
        [s]
    suspects : tuple of Suspect
        Looked at besides what a march of this wave brings out.
    """
    try:
        finder = ShiftInvert(problem.parts, problem.table, dt)
        marched = brought_out(problem, dt)
    except CalculationError:
        return Growth(np.inf, 0.0)
    pairs = [finder.refine(marched)]
    shifts = [marched.value, *(suspect.at(dt) for suspect in suspects)]
    for shift in (*shifts, ASIDE, -ASIDE):
        pairs += finder.nearest(shift, NEAR)
    sure = [pair for pair in pairs if pair.residual <= SURE and pair.value != 0.0]
    if not sure:
        return Growth(-np.inf, np.inf)
    best = max(sure, key=lambda pair: abs(pair.value))
    return Growth(float(np.log(abs(best.value)) / dt), best.residual)


def suspect_of(problem: WaveProblem, dt: float, rate: float) -> Suspect | None:
    """Find the eigenvalue of the wave that binds, followed down from where it stands out.

    Parameters
    ----------
    problem : WaveProblem
    dt : float
        An unstable step [s].
    rate : float
        Tolerated growth rate [1/s].

    Returns
    -------
    Suspect or None
        None if nothing stands out at any step tried.
    """
    for factor in BEYOND:
        try:
            pair = brought_out(problem, factor * dt)
            if pair.residual <= STANDS_OUT and np.log(abs(pair.value)) > rate * factor * dt:
                value = _followed(problem, pair, factor * dt, dt)
                return Suspect(complex(np.log(value) / dt))
        except CalculationError:
            continue
    return None


def brought_out(problem: WaveProblem, dt: float) -> Eigenpair:
    """March, and take the largest eigenvalue that the last states make out.

    Raises
    ------
    CalculationError
        If a stage has no solution at this step.
    """
    stepper = Stepper(problem.parts, problem.table, dt)
    state = _marched(problem, dt, stepper)
    states = [state]
    for _ in range(LAST_STATES - 1):
        states.append(_normed(stepper.step(states[-1])))
    span, _ = np.linalg.qr(np.stack(states, axis=1))
    values, weights = np.linalg.eig(span.conj().T @ stepper.step(span))
    chosen = int(np.abs(values).argmax())
    vector = _normed(span @ weights[:, chosen])
    value = complex(values[chosen])
    return Eigenpair(value, vector, float(np.linalg.norm(stepper.step(vector) - value * vector)))


def _marched(problem: WaveProblem, dt: float, stepper: Stepper) -> Array:
    generator = np.random.default_rng(problem.size)
    state = _normed(generator.standard_normal(problem.size).astype(stepper.dtype))
    try:
        lanes = LaneStepper([problem.parts], problem.table, dt)
    except CalculationError:
        for _ in range(MARCHED):
            state = _normed(stepper.step(state))
        return state
    lane = np.ascontiguousarray(state[:, None])
    for _ in range(MARCHED // AT_ONCE):
        before = lane.copy()
        with np.errstate(over="ignore", invalid="ignore"):
            lanes.march(lane, AT_ONCE)
            norm = float(np.linalg.norm(lane))
        if not 0.0 < norm < np.inf:
            return before[:, 0]
        lane /= norm
    return lane[:, 0]


def _normed(state: Array) -> Array:
    norm = np.linalg.norm(state)
    normed: Array = state / norm if norm > 0 else state
    return normed


def _followed(problem: WaveProblem, pair: Eigenpair, start: float, end: float) -> complex:
    """Follow an eigenvalue from one step to another."""
    count = 1 + int(np.ceil(abs(np.log(start / end)) / np.log(FOLLOWED)))
    before = start
    for dt in np.geomspace(start, end, count).tolist():
        guess = Eigenpair(complex(pair.value ** (dt / before)), pair.vector, np.inf)
        pair = ShiftInvert(problem.parts, problem.table, dt).refine(guess)
        before = dt
    return pair.value
