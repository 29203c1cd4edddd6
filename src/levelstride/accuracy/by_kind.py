"""What one step does to the normal modes of a column, by kind of wave."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import lru_cache
from typing import Final

import numpy as np

from levelstride.accuracy.matched_errors import MatchedErrors, effective_frequency, matched_errors
from levelstride.accuracy.matching import Array, Follower, Mask
from levelstride.accuracy.wave_errors import ResolvedWaves, all_waves, resolved_waves
from levelstride.column.column import Advice, Column
from levelstride.operator.sampled_waves import sampled_wavenumbers
from levelstride.operator.wave import Wave
from levelstride.results.wave_errors import KindErrors, StepWaveErrors, WorstWave
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting

__all__ = [
    "KindErrors",
    "StepWaveErrors",
    "WaveErrorsAtStep",
    "WorstWave",
    "column_waves",
    "step_wave_errors",
]

KIND_OF: Final[Mapping[str, str]] = {
    "gravity": "gravity",
    "sound": "sound",
    "Lamb": "lamb",
    "computational": "computational",
    "vortical": "computational",
}
"""Kinds of the record; what stands still but for wind and rotation goes with the computational."""


def step_wave_errors(
    column: Column,
    splitting: Splitting,
    tableau: TimeScheme,
    dt: float,
    *,
    resolved_only: bool = False,
) -> StepWaveErrors:
    """Say what one step does to every normal mode of a column.

    All air states and all sampled waves of at least 8 grid spacings are looked at. The modes of the
    column are found once and serve further tableaux, splittings and steps.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    dt : float
        Step [s].
    resolved_only : bool
        Whether only the resolved gravity waves are matched, which is quicker.

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.
    """
    waves = column_waves(column) if resolved_only else _every_wave(column)
    return WaveErrorsAtStep(waves, splitting, tableau, column.advice).at(dt)


@lru_cache(maxsize=8)
def column_waves(column: Column) -> tuple[ResolvedWaves, ...]:
    """Find the resolved gravity waves of all air states at the sampled wavenumbers."""
    return tuple(w for air in column.airs for w in resolved_waves(column, air, _sample(column)))


@lru_cache(maxsize=1)
def _every_wave(column: Column) -> tuple[ResolvedWaves, ...]:
    return tuple(w for air in column.airs for w in all_waves(column, air, _sample(column)))


def _sample(column: Column) -> list[Wave]:
    return [Wave(float(k), column.horizontal) for k in sampled_wavenumbers(column.horizontal)]


class WaveErrorsAtStep:
    """Matched errors of one tableau and splitting at any step.

    Parameters
    ----------
    waves : sequence of ResolvedWaves
        With all modes, or the resolved gravity waves alone.
    splitting : Splitting
    tableau : TimeScheme
    limits : Advice
        The accuracy limits by which the worst wave is chosen.
    """

    def __init__(
        self,
        waves: Sequence[ResolvedWaves],
        splitting: Splitting,
        tableau: TimeScheme,
        limits: Advice,
    ) -> None:
        if tableau.kind == "explicit":
            splitting = splitting.without_implicit()
        self._waves, self._limits = [w for w in waves if w.modes.frequency.size], limits
        self._followers = [Follower(wave.parts(splitting), tableau) for wave in self._waves]

    def __len__(self) -> int:
        return len(self._waves)

    def at(self, dt: float) -> StepWaveErrors:
        """Return what one step of length ``dt`` [s] does to all waves.

        Raises
        ------
        CalculationError
            If an implicit stage has no solution at this step.
        """
        return self.join(dt, [self.one(k, dt) for k in range(len(self))])

    def longest_turn(self, dt: float) -> float:
        """Return by how much the fastest of the waves turns in one step [rad]."""
        fastest = (effective_frequency(wave.modes).max() for wave in self._waves)
        return dt * float(max(fastest, default=0.0))

    def one(self, k: int, dt: float) -> MatchedErrors:
        """Return what one step of length ``dt`` [s] does to one of the waves."""
        return matched_errors(self._waves[k], self._followers[k], dt)

    def join(self, dt: float, found: Sequence[MatchedErrors]) -> StepWaveErrors:
        """Join what was found at several waves into one record."""
        table = _Table(found)
        present = sorted({KIND_OF[kind] for kind in table.kind})
        of_kind = np.array([KIND_OF[kind] for kind in table.kind], dtype=object)
        return StepWaveErrors(
            dt,
            {kind: table.summary(of_kind == kind) for kind in present},
            table.summary(table.resolved),
            table.worst(table.resolved, self._limits),
            int(table.matched.sum()),
            int((~table.matched).sum()),
            int((~table.matched & table.resolved).sum()),
            sum(one.entangled for one in found),
            int(table.faint.sum()),
            max((one.growth_per_s for one in found), default=0.0),
        )


class _Table:
    """The modes of several waves one below the other."""

    def __init__(self, found: Sequence[MatchedErrors]) -> None:
        def joined(name: str, dtype: type) -> np.ndarray:
            parts = [getattr(one, name) for one in found]
            return np.concatenate(parts) if parts else np.zeros(0, dtype=dtype)

        self.found = found
        self.owner = np.repeat(np.arange(len(found)), [one.kind.size for one in found])
        self.kind = joined("kind", str)
        self.order = joined("vertical_order", int)
        self.frequency: Array = joined("frequency", float)
        self.error: Array = joined("frequency_error", float)
        self.per_period: Array = joined("per_period", float)
        self.per_hour: Array = joined("per_hour", float)
        self.matched: Mask = joined("matched", bool)
        self.faint: Mask = joined("faint", bool)
        self.resolved: Mask = joined("resolved", bool)

    def summary(self, chosen: Mask) -> KindErrors:
        """Worst and mean of some modes."""
        chosen = chosen & self.matched
        return KindErrors(
            int(chosen.sum()),
            _largest(self.error[chosen]),
            _largest(self.per_period[chosen]),
            _mean(self.per_period[chosen]),
            _largest(self.per_hour[chosen]),
            _mean(self.per_hour[chosen]),
        )

    def worst(self, chosen: Mask, limits: Advice) -> WorstWave | None:
        """The one of some modes that is furthest beyond the limits."""
        which = np.flatnonzero(chosen & self.matched)
        if which.size == 0:
            return None
        error = np.where(self.faint[which], 1.0, self.error[which])
        turned = error / max(limits.frequency_error, TINY_LIMIT)
        changed = np.abs(self.per_period[which]) / max(limits.amplitude_loss_per_period, TINY_LIMIT)
        at = int(np.argmax(np.maximum(turned, changed)))
        i = int(which[at])
        owner = self.found[int(self.owner[i])]
        return WorstWave(
            owner.air,
            owner.kappa,
            int(self.order[i]),
            2 * np.pi / float(self.frequency[i]),
            float(error[at]),
            float(self.per_period[i]),
            float(self.per_hour[i]),
        )


TINY_LIMIT: Final = 1e-300
"""Stands in for a limit of zero, which every error exceeds."""


def _largest(values: Array) -> float | None:
    values = values[np.isfinite(values)]
    return float(values[np.argmax(np.abs(values))]) if values.size else None


def _mean(values: Array) -> float | None:
    values = values[np.isfinite(values)]
    return float(values.mean()) if values.size else None
