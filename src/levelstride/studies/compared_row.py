"""One tableau and splitting of a comparison: the unit of work that executors share out."""

import pickle
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from math import inf, pi
from typing import Final

from levelstride.accuracy.by_kind import (
    StepWaveErrors,
    WaveErrorsAtStep,
    column_waves,
)
from levelstride.accuracy.wave_errors import ResolvedWaves, all_waves, long_enough
from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.sampled_waves import sampled_wavenumbers
from levelstride.operator.wave import Wave
from levelstride.results.comparison import ErrorsAtStep, GravityWave, SoundDamping
from levelstride.results.dataset import Limit
from levelstride.results.work_precision import PacketSummary, WorkPrecision
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.studies.accurate_step import accurate_and_advised
from levelstride.studies.advised_step import Choice, StepCheck
from levelstride.studies.limit import limit
from levelstride.studies.methods import tableau_of
from levelstride.studies.work_item import StepChecker
from levelstride.studies.work_precision import work_precision

SAME_STEP: Final = 0.05
"""A step of the packet's curve within this share of another stands for it [1]."""


@dataclass(frozen=True, slots=True)
class CompareItem:
    """What one worker needs to know, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled; each process unpacks it once.
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    step_s : float or None
        The step to compare at [s]; the advised one if None.
    packets : bool
        Whether packets of gravity waves are carried.
    limit : Limit or None
        The limit, if it is known already.
    """

    column: bytes
    tableau: str
    split: str | Mapping[str, str]
    step_s: float | None = None
    packets: bool = True
    limit: Limit | None = None


@dataclass(frozen=True, slots=True)
class PacketError:
    """Relative error of a packet after an hour [1] at one step [s]."""

    step_s: float
    error: float


@dataclass(frozen=True, slots=True)
class RowFinding:
    """What was found for one item.

    Parameters
    ----------
    limit : Limit
        Stable step and what bites.
    accurate : Choice
        Longest step up to that which keeps the accuracy limits.
    advised : Choice
        The step to advise.
    errors : ErrorsAtStep or None
        At the step to compare at; None if there is none.
    curve : tuple of PacketError
        From that step downwards.
    packets : tuple of PacketSummary
        What was carried.
    notes : tuple of str
        What a reader must know.
    """

    limit: Limit
    accurate: Choice
    advised: Choice
    errors: ErrorsAtStep | None = None
    curve: tuple[PacketError, ...] = ()
    packets: tuple[PacketSummary, ...] = ()
    notes: tuple[str, ...] = ()


@on_one_thread
def find_row(item: CompareItem) -> RowFinding:
    """Find limit, steps and errors of one item.

    Parameters
    ----------
    item : CompareItem

    Returns
    -------
    RowFinding
        The same in whatever process it is found.
    """
    column = unpacked(item.column)
    splitting, tableau = resolve(item.split), tableau_of(column, item.tableau)
    found = item.limit or brief_limit(column, splitting, tableau, item.split)
    waves = _Waves(column, splitting, tableau)
    accurate, advised = accurate_and_advised(
        found,
        safety=column.advice.safety,
        intervals_s=column.advice.divides_s,
        check=waves.examine,
        check_stable=lambda step_s: waves.examine(step_s, stable=True),
    )
    step_s = item.step_s or advised.step_s
    answer = RowFinding(found, accurate, advised)
    if step_s is None:
        return answer
    stable = step_s == advised.step_s or (_within(found, step_s) and waves.stable(step_s))
    errors = waves.errors(step_s, stable=stable)
    if not (item.packets and stable):
        return replace(answer, errors=errors)
    return _with_packets(replace(answer, errors=errors), column, item)


class _Waves:
    """What steps do to the waves of a column.

    Steps are judged as an advice judges them. As long as they are accurate, the same matched waves
    tell both that and what the errors are.
    """

    def __init__(self, column: Column, splitting: Splitting, tableau: TimeScheme) -> None:
        self._column, self._splitting, self._tableau = column, splitting, tableau
        self._checker = StepChecker((column,), splitting, tableau)
        self._matched = WaveErrorsAtStep(column_waves(column), splitting, tableau, column.advice)
        self._seen: dict[float, StepWaveErrors] = {}
        self._all_passed = True

    def examine(self, step_s: float, *, stable: bool = False) -> StepCheck:
        """Say what speaks against a step, which may be known to be stable."""
        if self._all_passed:
            passed = self._passed(step_s)
            if passed is not None and (stable or self.stable(step_s)):
                return passed
            self._all_passed = False
        return self._checker.examine(step_s)

    def stable(self, step_s: float) -> bool:
        """Whether no sampled wave grows more than is tolerated at this very step."""
        return self._checker.stable(step_s)

    def _passed(self, step_s: float) -> StepCheck | None:
        """What is found at a step that is accurate beyond doubt; None at any other."""
        try:
            found = self._at(step_s)
        except CalculationError:
            return None
        limits = self._column.advice
        errors = gravity_errors(ErrorsAtStep(step_s=step_s, stable=True), found)
        turned, changed = errors.frequency_error, errors.amplitude_change_per_period
        good = (
            errors.ambiguous == 0
            and (turned or 0.0) <= limits.frequency_error
            and abs(changed or 0.0) <= limits.amplitude_loss_per_period
        )
        return StepCheck(None, turned, changed) if good else None

    def _at(self, step_s: float) -> StepWaveErrors:
        if step_s not in self._seen:
            self._seen[step_s] = self._matched.at(step_s)
        return self._seen[step_s]

    def errors(self, step_s: float, *, stable: bool) -> ErrorsAtStep:
        """Say what one step does to resolved gravity waves and to sound."""
        empty = ErrorsAtStep(step_s=step_s, stable=stable)
        try:
            found = self._at(step_s)
            sound = sound_damping(self._column, self._splitting, self._tableau, step_s)
        except CalculationError as error:
            return replace(empty, problem=str(error))
        return replace(gravity_errors(empty, found), sound=sound)


@lru_cache(maxsize=4)
def unpacked(packed: bytes) -> Column:
    """Unpack a column, the same object each time."""
    column: Column = pickle.loads(packed)
    return column


def brief_limit(
    column: Column, splitting: Splitting, tableau: TimeScheme, split: str | Mapping[str, str]
) -> Limit:
    """Search the stable step and what bites; where no step is stable, say why."""
    try:
        return limit(column, tableau=tableau.name, split=split, brief=True)
    except CalculationError as error:
        return Limit(
            tableau=tableau.name,
            split=splitting.name,
            stable_step_s=None,
            unbounded=False,
            scanned_to_s=0.0,
            criterion=str(error),
        )


def _within(found: Limit, step_s: float) -> bool:
    return found.unbounded or step_s <= (found.stable_step_s or 0.0) * (1 + 1e-9)


def gravity_errors(empty: ErrorsAtStep, found: StepWaveErrors) -> ErrorsAtStep:
    """Put what was found of the resolved gravity waves into the record."""
    worst, resolved = found.worst_resolved, found.resolved
    turned = [resolved.frequency_error, None if worst is None else worst.frequency_error]
    return replace(
        empty,
        frequency_error=max((e for e in turned if e is not None), default=None),
        amplitude_change_per_period=resolved.worst_change_per_period,
        amplitude_change_per_hour=resolved.worst_change_per_hour,
        worst_wave=None
        if worst is None
        else GravityWave(
            air=worst.air,
            wavenumber_per_m=worst.wavenumber_per_m,
            wavelength_m=2 * pi / worst.wavenumber_per_m,
            vertical_order=worst.vertical_order,
            period_s=worst.period_s,
            frequency_error=worst.frequency_error,
            amplitude_change_per_period=worst.change_per_period,
            amplitude_change_per_hour=worst.change_per_hour,
        ),
        matched=found.resolved.modes,
        ambiguous=found.ambiguous_resolved,
        spurious_growth_per_s=found.spurious_growth_per_s,
    )


def sound_damping(
    column: Column, splitting: Splitting, tableau: TimeScheme, step_s: float
) -> SoundDamping | None:
    """Say what one step does to sound; None where no sound is found."""
    waves = _sound_waves(column)
    found = WaveErrorsAtStep(waves, splitting, tableau, column.advice).at(step_s)
    sound = found.kinds.get("sound")
    if sound is None:
        return None
    return SoundDamping(
        wavelength_m=2 * pi / waves[0].kappa,
        modes=sound.modes,
        mean_change_per_period=sound.mean_change_per_period,
        mean_change_per_hour=sound.mean_change_per_hour,
        worst_change_per_period=sound.worst_change_per_period,
    )


@lru_cache(maxsize=2)
def _sound_waves(column: Column) -> tuple[ResolvedWaves, ...]:
    """Sound at the shortest sampled wave of at least 8 grid spacings.

    What a step does to sound depends on its vertical order much more than on this wavelength.
    """
    sampled = (Wave(float(k), column.horizontal) for k in sampled_wavenumbers(column.horizontal))
    shortest = list(long_enough(sampled))[-1:]
    found = (wave for air in column.airs for wave in all_waves(column, air, shortest))
    return tuple(
        replace(wave, modes=wave.modes.select(wave.modes.kind == "sound")) for wave in found
    )


def _with_packets(answer: RowFinding, column: Column, item: CompareItem) -> RowFinding:
    """Carry packets of gravity waves with the step to compare at, and with shorter ones."""
    errors = answer.errors
    assert errors is not None
    try:
        found = work_precision(
            column, tableau=item.tableau, split=item.split, stable_step_s=errors.step_s
        )
    except CalculationError as error:
        return replace(answer, notes=(*answer.notes, f"no packet error: {error}"))
    return replace(
        answer,
        errors=replace(errors, packet_error=_packet_error(found, errors.step_s)),
        curve=tuple(PacketError(point.step_s, point.error) for point in found.points),
        packets=found.packets,
        notes=(*answer.notes, *found.notes),
    )


def _packet_error(found: WorkPrecision, step_s: float) -> float | None:
    """Error at the longest step of the curve, if that stands for the step asked about."""
    longest = found.points[0]
    same = abs(longest.step_s / step_s - 1) <= SAME_STEP
    return longest.error if same and longest.error < inf else None
