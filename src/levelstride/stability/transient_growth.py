"""Transient growth in full: the largest power of R, and the state that it amplifies most."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.stability.powers import LOG_CONDITION, ScaledMatrix, power_norms
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem

Matrix = NDArray[Any]

BETWEEN = 16
"""Powers looked at between two known ones in every round of the search."""


@dataclass(frozen=True, slots=True, eq=False)
class TransientGrowth:
    """The largest energy norm of a power of R.

    Attributes
    ----------
    log_largest_norm : float
        ln of the largest ||R^m|| exp(-m dt rate), m = 0 included: never below zero.
    steps : int
        m.
    step_s : float
        dt [s].
    rate_per_s : float
        Growth that is taken out: what is tolerated, and that of the column itself [1/s].
    log_exponential_norm : float
        ln of the largest ||exp(t L)|| exp(-t rate), never below zero: what the semi-discrete column
        reaches by itself.
    state : ndarray, shape (nstate,)
        The state that is amplified most, in energy coordinates and of energy norm one.
    grown : ndarray, shape (nstate,)
        What becomes of it in m steps, of energy norm one as well.
    rising : bool
        Whether the norm is largest at the end of the time looked at, so that it may go on rising.
    """

    log_largest_norm: float
    steps: int
    step_s: float
    rate_per_s: float
    log_exponential_norm: float
    state: Matrix
    grown: Matrix
    rising: bool

    @property
    def largest_norm(self) -> float:
        """Largest norm [1]; inf where a float does not hold it."""
        return _exp(self.log_largest_norm)

    @property
    def exponential_norm(self) -> float:
        """Largest norm that exp(t L) reaches by itself [1]."""
        return _exp(self.log_exponential_norm)

    @property
    def beyond_exponential(self) -> float:
        """Largest norm over that of exp(t L): what the step adds [1]."""
        return _exp(self.log_largest_norm - self.log_exponential_norm)


def _exp(value: float) -> float:
    with np.errstate(over="ignore"):
        return float(np.exp(value))


def transient_growth(problem: WaveProblem, dt: float, tolerance: Tolerance) -> TransientGrowth:
    """Find the largest power of R of one wave.

    Powers 1, 2, 3, 4, 6, 8, 12, ... up to the horizon of the tolerance are looked at, then those
    between the neighbours of the largest, sixteen at a time, until they are next to each other.
    With more than one maximum between neighbours of the first sequence the largest can be missed;
    its norm is then hardly more than that found.

    Parameters
    ----------
    problem : WaveProblem
    dt : float
        Step [s].
    tolerance : Tolerance
        Tolerated growth, which is taken out, and the horizon.

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.
    """
    return largest_power(
        problem.matrix(dt),
        dt,
        rate=problem.rate(tolerance),
        horizon_s=tolerance.horizon,
        log_exponential_norm=problem.facts.log_exponential_peak(problem.rate(tolerance)),
    )


def largest_power(
    matrix: Matrix, dt: float, *, rate: float, horizon_s: float, log_exponential_norm: float = 0.0
) -> TransientGrowth:
    """Find the largest power of a step matrix in energy coordinates; see ``transient_growth``.

    Parameters
    ----------
    matrix : ndarray, shape (nstate, nstate)
        R.
    dt : float
        Step [s].
    rate : float
        Growth that is taken out [1/s].
    horizon_s : float
        Simulated time up to which powers are looked at [s].
    log_exponential_norm : float
        ln of the norm that exp(t L) reaches with the same growth taken out.
    """
    found = {0: 0.0}
    for steps, log_norm in power_norms(matrix, horizon_s / dt):
        if log_norm == np.inf or np.isnan(log_norm):
            break
        found[steps] = log_norm - steps * dt * rate
        if found[steps] > 10 * LOG_CONDITION:
            break
    last = max(found)
    best = max(found, key=lambda m: found[m])
    while (span := _neighbours(found, best)) is not None:
        found |= _between(matrix, *span, dt * rate)
        best = max(found, key=lambda m: found[m])
    state, grown = _amplified(matrix, best)
    return TransientGrowth(
        found[best], best, dt, rate, log_exponential_norm, state, grown, 0 < best == last
    )


def _neighbours(found: dict[int, float], best: int) -> tuple[int, int] | None:
    """The known powers on both sides of one, or None where nothing lies between."""
    known = sorted(found)
    at = known.index(best)
    low, high = known[max(at - 1, 0)], known[min(at + 1, len(known) - 1)]
    return None if high - low <= (best > low) + (best < high) else (low, high)


def _between(matrix: Matrix, low: int, high: int, rate_per_step: float) -> dict[int, float]:
    """Log norms of powers between two, evenly spaced, growth taken out."""
    stride = max(1, (high - low) // BETWEEN)
    power, onward, found = _power(matrix, low), _power(matrix, stride), {}
    for steps in range(low + stride, high, stride):
        power = power.times(onward)
        found[steps] = power.log_norm() - steps * rate_per_step
    return found


def _power(matrix: Matrix, steps: int) -> ScaledMatrix:
    result, square = ScaledMatrix.of(np.eye(matrix.shape[0])), ScaledMatrix.of(matrix)
    while steps:
        if steps % 2:
            result = result.times(square)
        steps //= 2
        square = square.times(square) if steps else square
    return result


def _amplified(matrix: Matrix, steps: int) -> tuple[Matrix, Matrix]:
    """The state that a power amplifies most and what becomes of it, both of norm one."""
    left, _, right = np.linalg.svd(np.nan_to_num(_power(matrix, steps).matrix))
    return right[0].conj(), left[:, 0]
