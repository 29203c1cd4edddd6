"""What one step does to the waves of a column, as frozen plain data.

Shares are plain numbers, times in s. Field names are the keys of the JSON.
"""

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class KindErrors:
    """What one step does to the waves of one kind, apart from what the column does to them.

    Parameters
    ----------
    modes : int
        Number of modes matched.
    frequency_error : float or None
        Largest relative error of a frequency [1]; None if no mode has a phase.
    worst_change_per_period, mean_change_per_period : float or None
        Relative change of amplitude in one period, the largest in size and the mean; negative for
        damping [1]. None if no mode has a period.
    worst_change_per_hour, mean_change_per_hour : float or None
        The same for one hour [1].
    """

    modes: int = 0
    frequency_error: float | None = None
    worst_change_per_period: float | None = None
    mean_change_per_period: float | None = None
    worst_change_per_hour: float | None = None
    mean_change_per_hour: float | None = None


@dataclass(frozen=True, slots=True)
class WorstWave:
    """One wave and what one step does to it.

    Parameters
    ----------
    air : str
    wavenumber_per_m : float
        Along one axis [1/m].
    vertical_order : int
    period_s : float
        [s]
    frequency_error, change_per_period, change_per_hour : float
        As in ``KindErrors`` [1]; the first is 1 for a wave of which one step leaves too little to
        have a phase.
    """

    air: str
    wavenumber_per_m: float
    vertical_order: int
    period_s: float
    frequency_error: float
    change_per_period: float
    change_per_hour: float


@dataclass(frozen=True, slots=True)
class StepWaveErrors:
    """What one step does to the normal modes of a column, each matched with its eigenvalue.

    Parameters
    ----------
    step_s : float
        The step [s].
    kinds : mapping of str to KindErrors
        By kind: gravity, sound, lamb and computational, those that the column has and that were
        looked at.
    resolved : KindErrors
        The resolved gravity waves alone.
    worst_resolved : WorstWave or None
        Of these the one that comes nearest to, or is furthest beyond, the accuracy limits of the
        column.
    matched, ambiguous : int
        Modes that were matched, and modes that no eigenvalue belongs to decisively.
    ambiguous_resolved : int
        Of the latter those that are resolved gravity waves.
    entangled : int
        Modes that were not looked for: wind or damping make them part of a transient.
    faint : int
        Matched modes of which one step leaves less than a tenth; they have no phase.
    spurious_growth_per_s : float
        Largest growth rate of any eigenvalue of R(dt) at the waves looked at, less that of the
        column itself [1/s]; below zero where all decay.
    """

    step_s: float
    kinds: Mapping[str, KindErrors]
    resolved: KindErrors
    worst_resolved: WorstWave | None
    matched: int
    ambiguous: int
    ambiguous_resolved: int
    entangled: int
    faint: int
    spurious_growth_per_s: float
