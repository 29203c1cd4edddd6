"""Norms of high powers of the step matrix by repeated squaring.

In any norm rho(R) <= ||R^m||^(1/m), so one small power norm proves a step stable without a single
eigenvalue; and the norms themselves are what the transient criterion asks for (Higham and Knight
1995, SIAM Journal on Matrix Analysis and Applications 16, 345-358, on powers in finite precision).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.stability.extremes import full_spectral_norm

Matrix = NDArray[Any]

LARGEST_EXPONENT = 44
"""Squarings after which the sequence ends; 2^44 steps outlast every tolerance asked for."""

SMALLEST_UNSCALED = 1e-30
"""Norms between this and its inverse need no scaling before the next product."""

LOG_CONDITION = 30.0
"""ln of the largest departure from normality that power norms are trusted to tell from growth."""


@dataclass(frozen=True, slots=True, eq=False)
class ScaledMatrix:
    """A matrix times exp(log_scale), so that no power overflows, and ln of its Frobenius norm."""

    matrix: Matrix
    log_scale: float
    log_frobenius: float

    @classmethod
    def of(cls, matrix: Matrix, log_scale: float = 0.0) -> ScaledMatrix:
        """Measure the Frobenius norm; bring it to one where it strays far from that."""
        with np.errstate(over="ignore"):
            norm = float(np.linalg.norm(matrix))
        if norm == 0.0 or not np.isfinite(norm):
            largest = float(np.abs(matrix).max())
            if largest == 0.0 or not np.isfinite(largest):
                return cls(matrix, log_scale, np.inf if largest else -np.inf)
            return cls.of(matrix / largest, log_scale + np.log(largest))
        log_frobenius = log_scale + np.log(norm)
        if SMALLEST_UNSCALED < norm < 1 / SMALLEST_UNSCALED:
            return cls(matrix, log_scale, log_frobenius)
        return cls(matrix / norm, log_frobenius, log_frobenius)

    def times(self, other: ScaledMatrix) -> ScaledMatrix:
        """Return the product."""
        return ScaledMatrix.of(self.matrix @ other.matrix, self.log_scale + other.log_scale)

    def log_norm(self) -> float:
        """Logarithm of the spectral norm."""
        if not np.all(np.isfinite(self.matrix)):
            return np.inf
        norm = full_spectral_norm(self.matrix)
        return self.log_scale + np.log(norm) if norm > 0 else -np.inf


class PowerNorms:
    """Logarithms of the Frobenius norms of R^(2^k), k = 0, 1, ..., computed as they are asked for.

    The Frobenius norm lies between the spectral norm and sqrt(nstate) times it.

    Parameters
    ----------
    make : callable
        Returns R in energy coordinates, shape (nstate, nstate).
    """

    def __init__(self, make: Callable[[], Matrix]) -> None:
        self._make = make
        self._power: ScaledMatrix | None = ScaledMatrix.of(make())
        self.logs = [self._power.log_frobenius]

    def forget(self) -> None:
        """Drop the last power; norms asked for later are computed from the start."""
        self._power = None

    @property
    def ended(self) -> bool:
        """Whether no further norm will be computed."""
        return not np.isfinite(self.logs[-1]) or len(self.logs) > LARGEST_EXPONENT

    def log_norm(self, k: int) -> float | None:
        """Logarithm of ||R^(2^k)||, or None if the sequence ended before."""
        while len(self.logs) <= k and not self.ended:
            if self._power is None:
                self._power = ScaledMatrix.of(self._make())
                for _ in self.logs[1:]:
                    self._power = self._power.times(self._power)
            self._power = self._power.times(self._power)
            self.logs.append(self._power.log_frobenius)
        return self.logs[k] if k < len(self.logs) else None


def bounded(
    norms: PowerNorms, size: int, dt: float, rate: float, log_limit: float, horizon: float
) -> bool | None:
    """Decide whether powers stay below a limit and the radius below the tolerated growth.

    Parameters
    ----------
    norms : PowerNorms
    size : int
        nstate.
    dt : float
        Step [s].
    rate : float
        Tolerated growth rate [1/s].
    log_limit : float
        Logarithm of the largest norm allowed, after the tolerated growth is taken out.
    horizon : float
        Simulated time up to which norms are compared [s].

    Returns
    -------
    bool or None
        True: proved; False: refuted; None: the norms alone do not tell.
    """
    slack = 0.5 * np.log(size)
    highest, previous, k = -np.inf, 0.0, 0
    while (log_norm := norms.log_norm(k)) is not None:
        steps = 2.0**k
        excess = log_norm - steps * dt * rate
        if excess - slack > log_limit:
            return False
        # the power between two squarings is bounded by their product
        highest = max(highest, excess, excess + previous if k else excess)
        if excess < 0:
            return True if highest <= log_limit else None
        if steps * dt > 4 * horizon:
            return None
        previous, k = excess, k + 1
    return None


def radius_within(norms: PowerNorms, log_radius: float) -> bool | None:
    """Decide whether ln(spectral radius) <= ``log_radius``; answers as in ``bounded``."""
    k = 0
    while (log_norm := norms.log_norm(k)) is not None:
        allowed = 2.0**k * log_radius
        if log_norm <= allowed:
            return True
        if log_norm > allowed + LOG_CONDITION:
            return False
        if allowed > LOG_CONDITION:
            return None
        k += 1
    return None


def power_norms(matrix: Matrix, most: float) -> Iterator[tuple[int, float]]:
    """Yield m and ln ||R^m|| (spectral norm), m = 1, 2, 3, 4, 6, 8, 12, ... until m >= ``most``."""
    root = power = ScaledMatrix.of(matrix)
    steps = 1
    while True:
        yield steps, power.log_norm()
        if steps > 1:
            yield steps + steps // 2, power.times(root).log_norm()
        if steps >= most or not np.any(power.matrix):
            return
        root, power, steps = power, power.times(power), 2 * steps


def peak_exceeds(matrix: Matrix, dt: float, rate: float, horizon: float, log_limit: float) -> bool:
    """Whether ``power_peak`` is above a limit.

    Most powers are told by their Frobenius norm, or by the product of those of their factors; the
    spectral norm is taken only of the rest.
    """
    root = power = ScaledMatrix.of(matrix)
    steps = 1
    while True:
        allowed = log_limit + steps * dt * rate
        if power.log_frobenius > allowed and power.log_norm() > allowed:
            return True
        between = allowed + steps // 2 * dt * rate
        if steps > 1 and power.log_frobenius + root.log_frobenius > between:
            product = power.times(root)
            if product.log_frobenius > between and product.log_norm() > between:
                return True
        if steps * dt >= horizon or not np.any(power.matrix):
            return False
        root, power, steps = power, power.times(power), 2 * steps


@dataclass(frozen=True, slots=True)
class Peak:
    """Where the powers of R are largest once the tolerated growth is taken out.

    Attributes
    ----------
    log_value : float
        Logarithm of ||R^m|| exp(-m dt rate).
    steps : int
        m.
    log_norm : float
        Logarithm of ||R^m||.
    """

    log_value: float
    steps: int
    log_norm: float


def power_peak(matrix: Matrix, dt: float, rate: float, horizon: float) -> Peak:
    """Largest energy norm of R^m exp(-m dt rate), m dt up to ``horizon``; see ``power_norms``."""
    best = Peak(-np.inf, 1, -np.inf)
    for steps, log_norm in power_norms(matrix, horizon / dt):
        value = log_norm - steps * dt * rate
        if value > best.log_value:
            best = Peak(value, steps, log_norm)
        if best.log_value > 10 * LOG_CONDITION:
            break
    return best
