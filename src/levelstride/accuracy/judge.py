"""Whether a step carries the resolved gravity waves well enough: screened by projection, decided
by matched eigenvalues."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from levelstride.accuracy.by_kind import WaveErrorsAtStep
from levelstride.accuracy.matched_errors import MatchedErrors
from levelstride.accuracy.wave_errors import ResolvedWaves, StepErrors, WaveErrors
from levelstride.column.column import Advice
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting


@dataclass(frozen=True, slots=True)
class Judgement:
    """What was found at one step.

    Attributes
    ----------
    accurate : bool
        Whether both errors are within the limits.
    frequency_error, amplitude_change_per_period : float or None
        Worst of the resolved gravity waves [1]; of those looked at where ``accurate`` is false.
    ambiguous : int
        Waves that no eigenvalue belongs to decisively; the projection stands in for them.
    """

    accurate: bool
    frequency_error: float | None = None
    amplitude_change_per_period: float | None = None
    ambiguous: int = 0


class StepJudge:
    """Judges steps of one tableau and splitting.

    Parameters
    ----------
    waves : sequence of ResolvedWaves
        Resolved gravity waves.
    splitting : Splitting
    tableau : TimeScheme
    limits : Advice
        The accuracy limits.

    Notes
    -----
    The projection costs one step and says which wavenumber is worst; it refuses a step by itself
    only where a wave turns by half a period or more in it. Otherwise modes are matched, at the
    wavenumber that refused the last step first, then in the order of the projected errors, until
    one is beyond the limits.
    """

    def __init__(
        self,
        waves: Sequence[ResolvedWaves],
        splitting: Splitting,
        tableau: TimeScheme,
        limits: Advice,
    ) -> None:
        self._limits = limits
        self._projected = StepErrors(waves, splitting, tableau)
        self._matched = WaveErrorsAtStep(waves, splitting, tableau, limits)
        self._refused_last = -1

    def at(self, dt: float) -> Judgement:
        """Judge one step [s].

        Raises
        ------
        CalculationError
            If an implicit stage has no solution at this step.
        """
        projected = self._projected.each(dt)
        if self._matched.longest_turn(dt) >= np.pi:
            return self._judged(projected, 0)
        excess = [self._excess(one) for one in projected]
        order = sorted(
            range(len(projected)), key=lambda k: (k != self._refused_last, -excess[k], k)
        )
        seen, ambiguous = [], 0
        for k in order:
            errors, doubtful = _resolved_errors(self._matched.one(k, dt), projected[k])
            seen.append(errors)
            ambiguous += doubtful
            if self._excess(errors) > 1:
                self._refused_last = k
                break
        return self._judged(seen, ambiguous)

    def _judged(self, seen: Sequence[WaveErrors], ambiguous: int) -> Judgement:
        worst = worst_errors(seen)
        return Judgement(all(self._excess(e) <= 1 for e in seen), *worst, ambiguous)

    def _excess(self, errors: WaveErrors) -> float:
        """The errors over their limits, the larger of both; above one beyond them."""
        found = 0.0
        for error, limit in (
            (errors.frequency_error, self._limits.frequency_error),
            (errors.amplitude_change_per_period, self._limits.amplitude_loss_per_period),
        ):
            if error:
                found = max(found, abs(error) / limit if limit > 0 else np.inf)
        return found


def worst_errors(seen: Sequence[WaveErrors]) -> tuple[float | None, float | None]:
    """Frequency error and change of amplitude that are largest in size."""
    turned = [e.frequency_error for e in seen if e.frequency_error is not None]
    changed = [
        e.amplitude_change_per_period for e in seen if e.amplitude_change_per_period is not None
    ]
    return max(turned, default=None), max(changed, key=abs, default=None)


def _resolved_errors(found: MatchedErrors, projected: WaveErrors) -> tuple[WaveErrors, int]:
    """Worst of the resolved waves of one wavenumber, and the number of those in doubt."""
    sure = found.resolved & found.matched
    ambiguous = int((found.resolved & ~found.matched).sum())
    turned = np.where(found.faint, 1.0, found.frequency_error)[sure]
    changed = found.per_period[sure]
    seen = [projected] if ambiguous else []
    if turned.size:
        largest = float(changed[np.argmax(np.abs(changed))])
        seen.append(
            WaveErrors(frequency_error=float(turned.max()), amplitude_change_per_period=largest)
        )
    worst_turned, worst_changed = worst_errors(seen)
    return (
        WaveErrors(frequency_error=worst_turned, amplitude_change_per_period=worst_changed),
        ambiguous,
    )
