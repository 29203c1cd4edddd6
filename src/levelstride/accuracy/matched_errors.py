"""What one step does to the modes of one wave, each matched with its eigenvalue of R(dt)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from levelstride.accuracy.matching import Array, Complex, Follower, Mask
from levelstride.accuracy.modes import LARGEST_CONDITION, STILL, Modes, resolved_gravity
from levelstride.accuracy.wave_errors import LARGEST_EXPONENT, NO_TURN, ResolvedWaves
from levelstride.operator.state import Index

HOUR_S: Final = 3600.0

TINY: Final = float(np.finfo(np.float64).tiny)


@dataclass(frozen=True, slots=True, eq=False)
class MatchedErrors:
    """What one step does to each mode of one wave, apart from what the column does to it.

    Attributes
    ----------
    kappa : float
        Wavenumber along one axis [1/m].
    air : str
    kind : ndarray of str, shape (nmode,)
    vertical_order : ndarray of int, shape (nmode,)
    frequency : ndarray, shape (nmode,)
        Exact frequency of the mode or, where larger, its intrinsic frequency; not negative [1/s].
    factor : ndarray of complex, shape (nmode,)
        Eigenvalue of R(dt) [1].
    frequency_error : ndarray, shape (nmode,)
        |turn - omega dt| / (frequency dt), turn being the phase of the factor by continuation [1];
        NaN for modes that stand still or are faint.
    per_period, per_hour : ndarray, shape (nmode,)
        Relative changes of amplitude [1]; the first is NaN for modes that stand still.
    matched, faint, resolved : ndarray of bool, shape (nmode,)
        Whether the mode is matched, else all numbers are NaN; whether one step leaves less than a
        tenth of it, so that it has no phase; whether it is a resolved gravity wave.
    entangled : int
        Number of modes not looked for, because they are part of a transient.
    growth_per_s : float
        Growth rate of the largest eigenvalue of R(dt), less that of the column itself [1/s].
    """

    kappa: float
    air: str
    kind: NDArray[np.str_]
    vertical_order: Index
    frequency: Array
    factor: Complex
    frequency_error: Array
    per_period: Array
    per_hour: Array
    matched: Mask
    faint: Mask
    resolved: Mask
    entangled: int
    growth_per_s: float


def matched_errors(waves: ResolvedWaves, follower: Follower, dt: float) -> MatchedErrors:
    """Follow modes to a step and compare their eigenvalues with the exact ones.

    Parameters
    ----------
    waves : ResolvedWaves
    follower : Follower
        Of the same wave.
    dt : float
        Step [s].

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.

    Notes
    -----
    Modes that stand still share one eigenvalue, so that any mixture of them is a mode: they are
    matched together, and all of them are ambiguous if the space that they span is.
    """
    modes = waves.modes
    still = _still(modes)
    entangled = ~still & (modes.condition > LARGEST_CONDITION)
    moving = modes.select(~still & ~entangled)
    found = follower.follow(moving.growth + 1j * moving.frequency, moving.vectors, moving.duals, dt)
    standing = modes.select(still)
    together = follower.bundle(standing.vectors, standing.duals, dt)
    count = standing.frequency.size
    factor = np.concatenate(
        [found.factor, np.full(count, np.nan) if together is None else together]
    )
    turn = np.concatenate([found.turn, np.full(count, np.nan)])
    growth = np.concatenate([moving.growth, standing.growth])
    exact = np.concatenate([moving.frequency, np.zeros(count)])
    frequency = np.concatenate([effective_frequency(moving), np.zeros(count)])
    per_turn = 1.0 / np.where(frequency * dt > NO_TURN, frequency * dt, np.nan)
    rate = np.log(np.maximum(np.abs(factor), TINY)) / dt - growth
    matched = np.isfinite(factor)
    return MatchedErrors(
        waves.kappa,
        waves.air,
        np.concatenate([moving.kind, standing.kind]),
        np.concatenate([moving.vertical_order, standing.vertical_order]),
        frequency,
        factor,
        np.abs(turn - exact * dt) * per_turn,
        _change(rate * (2 * np.pi * dt * per_turn)),
        _change(rate * HOUR_S),
        matched,
        matched & ~np.isfinite(turn) & (frequency > 0),
        np.concatenate([resolved_gravity(moving), np.zeros(count, dtype=bool)]),
        int(entangled.sum()),
        float(np.log(max(found.radius, TINY)) / dt) - waves.own_growth_per_s,
    )


def effective_frequency(modes: Modes) -> Array:
    """The larger of a mode's frequency and its intrinsic frequency, shape (nmode,) [1/s]."""
    return np.asarray(np.maximum(np.abs(modes.frequency), np.abs(modes.intrinsic_frequency)))


def _still(modes: Modes) -> Mask:
    """Modes whose frequency and growth are zero, shape (nmode,)."""
    size = np.abs(modes.frequency + 1j * modes.growth)
    return np.asarray(size <= STILL * size.max(initial=0.0))


def _change(exponent: Array) -> Array:
    return np.asarray(np.expm1(np.clip(exponent, -LARGEST_EXPONENT, LARGEST_EXPONENT)))
