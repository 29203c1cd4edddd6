"""Tableaux and splittings side by side: accuracy, damping, cost, as frozen plain data.

Numbers that do not exist are ``None``. Errors and changes of amplitude are relative [1], negative
for damping; costs are per simulated hour. Rows are counted from 0. Field names are the keys of the
JSON.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import exp, log

from .dataset import ColumnSummary, LowestSlopeGradient, Provenance
from .work_precision import PacketSummary


@dataclass(frozen=True, slots=True, kw_only=True)
class Weights:
    """What is paid for each part of a step.

    Parameters
    ----------
    explicit, solve, exchange : float
        Cost of one explicit evaluation, one implicit solve and one exchange with neighbours [1].
    """

    explicit: float
    solve: float
    exchange: float


@dataclass(frozen=True, slots=True, kw_only=True)
class GravityWave:
    """One resolved gravity wave and what a step does to it.

    Parameters
    ----------
    air : str
        Air state.
    wavenumber_per_m, wavelength_m : float
        Along one axis [1/m], [m].
    vertical_order : int
        1 for the gravest.
    period_s : float
        [s]
    frequency_error : float
        Relative error of its frequency [1].
    amplitude_change_per_period, amplitude_change_per_hour : float
        Negative for damping [1].
    """

    air: str
    wavenumber_per_m: float
    wavelength_m: float
    vertical_order: int
    period_s: float
    frequency_error: float
    amplitude_change_per_period: float
    amplitude_change_per_hour: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SoundDamping:
    """What a step does to sound, which may be damped.

    Parameters
    ----------
    wavelength_m : float
        Horizontal wavelength along one axis that was looked at [m].
    modes : int
        Sound waves matched there.
    mean_change_per_period, mean_change_per_hour : float or None
        Mean change of amplitude of all of them [1].
    worst_change_per_period : float or None
        The change that is largest in size [1].
    """

    wavelength_m: float
    modes: int
    mean_change_per_period: float | None
    mean_change_per_hour: float | None
    worst_change_per_period: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class ErrorsAtStep:
    """What one step does to the waves of a column.

    Parameters
    ----------
    step_s : float
        The step [s].
    stable : bool
        Whether it is within the stable step and stable itself.
    frequency_error : float or None
        Largest relative frequency error of a resolved gravity wave [1].
    amplitude_change_per_period, amplitude_change_per_hour : float or None
        Changes of amplitude of such waves that are largest in size [1].
    worst_wave : GravityWave or None
        The one of these waves that comes nearest to the accuracy limits, or exceeds them most.
    sound : SoundDamping or None
        What becomes of sound.
    matched, ambiguous : int
        Resolved gravity waves that belong to an eigenvalue of the step, and those that belong to
        none decisively and are not judged.
    spurious_growth_per_s : float or None
        Largest growth of any eigenvalue of the step beyond that of the column itself [1/s].
    packet_error : float or None
        Relative error of a packet of gravity waves after an hour, in the energy norm [1].
    problem : str or None
        Why there are no errors, if there are none.
    """

    step_s: float
    stable: bool
    frequency_error: float | None = None
    amplitude_change_per_period: float | None = None
    amplitude_change_per_hour: float | None = None
    worst_wave: GravityWave | None = None
    sound: SoundDamping | None = None
    matched: int = 0
    ambiguous: int = 0
    spurious_growth_per_s: float | None = None
    packet_error: float | None = None
    problem: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class CurvePoint:
    """Error of the packet of gravity waves at one step.

    Parameters
    ----------
    step_s : float
        [s]
    error : float
        Relative error after an hour [1].
    cost_per_hour : float
        Weighted cost [1/h].
    """

    step_s: float
    error: float
    cost_per_hour: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Dominator:
    """A row that is cheaper and more accurate than another.

    Parameters
    ----------
    row : int
        Its place.
    step_s : float
        Its step at which that is so [s].
    cost_per_hour : float
        Its cost there [1/h].
    error : float or None
        Its packet error there [1]; None where errors of single waves told.
    """

    row: int
    step_s: float
    cost_per_hour: float
    error: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class ComparedRow:
    """One tableau and splitting: how long a step, how accurate, at what cost.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    stable_step_s : float or None
        Stable step [s]; None with ``unbounded`` if nothing bites up to ``scanned_to_s``, None
        without it if no step is stable.
    unbounded : bool
        Whether nothing bites.
    scanned_to_s : float
        Longest step scanned [s].
    criterion : str
        Criteria that bind the stable step, joined by ``+``; ``none`` if unbounded.
    stable_reason : str
        The same with the wave that bites.
    air : str
        Air state that binds.
    couples_columns : bool
        Whether the implicit solve couples neighbouring columns, which costs more than is counted.
    path : str
        How the step is solved: explicit, tridiagonal or banded.
    certified : str
        How the stable step was checked.
    accurate_step_s : float or None
        Longest step up to the stable one that keeps the accuracy limits [s].
    accurate_reason : str
        What binds it.
    advised_step_s : float or None
        Step that ``advise`` would name: safe, accurate, and a whole share of the intervals [s].
    advised_step_fraction : str or None
        The same as an exact fraction, where it divides intervals.
    advised_reason : str
        What binds it.
    step_s : float or None
        The step at which the row is compared [s].
    errors : ErrorsAtStep or None
        What that step does; None without one.
    steps_per_hour, explicit_evaluations_per_hour, solves_per_hour, exchanges_per_hour : float
        or None, at that step [1/h].
    cost_per_hour : float or None
        Weighted sum of these [1/h].
    measured_s_per_hour : float or None
        Measured time of the steps of this column and one wave for one simulated hour [s/h].
    curve : tuple of CurvePoint
        Error of the packet from the longest step to the shortest.
    error_at_equal_cost : float or None
        Error of the packet at the cost at which all rows are compared [1]; None outside the curve.
    step_at_equal_cost_s : float or None
        The step that this cost pays for [s].
    dominated_by : tuple of Dominator
        Rows that are cheaper, or as cheap, and more accurate.
    notes : tuple of str
        What a reader must know of this row.
    """

    tableau: str
    split: str
    stable_step_s: float | None
    unbounded: bool
    scanned_to_s: float
    criterion: str
    stable_reason: str
    air: str
    couples_columns: bool
    path: str
    certified: str
    accurate_step_s: float | None
    accurate_reason: str
    advised_step_s: float | None
    advised_step_fraction: str | None
    advised_reason: str
    step_s: float | None
    errors: ErrorsAtStep | None
    steps_per_hour: float | None = None
    explicit_evaluations_per_hour: float | None = None
    solves_per_hour: float | None = None
    exchanges_per_hour: float | None = None
    cost_per_hour: float | None = None
    measured_s_per_hour: float | None = None
    curve: tuple[CurvePoint, ...] = ()
    error_at_equal_cost: float | None = None
    step_at_equal_cost_s: float | None = None
    dominated_by: tuple[Dominator, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def usable(self) -> bool:
        """Whether the step at which it is compared is stable and its errors are known."""
        return self.errors is not None and self.errors.stable and self.errors.problem is None


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """Tableaux and splittings side by side on one column, the cheapest first.

    Parameters
    ----------
    title : str
        Title of the column file.
    column : ColumnSummary
        The level set.
    step_s : float or None
        The step that was given for all rows [s]; None where each is compared at its advised step.
    weights : Weights
        What the cost is weighted with.
    equal_cost_per_hour : float or None
        Cost at which the errors of all rows are compared [1/h]; None without packet errors.
    equal_cost_reason : str
        Where that cost comes from.
    packets : tuple of PacketSummary
        The packet of gravity waves, one per air state.
    rows : tuple of ComparedRow
        One per tableau and splitting.
    cheapest : int or None
        The row of lowest cost at its step, one whose solve stays in its column if there is any.
    most_accurate : int or None
        The row of least error at the equal cost; without packet errors, of least frequency error.
        Rows whose solve couples columns come after all others.
    undominated : tuple of int
        Rows between which cost and accuracy leave the choice.
    verdict : str
        The answer in a sentence.
    lowest_slope_gradient : str or None
        ``half`` or ``full`` over a slope, else None.
    notes : tuple of str
        What else a reader must know.
    caution : str
        What is not promised.
    provenance : Provenance
        Where it comes from.
    """

    title: str
    column: ColumnSummary
    step_s: float | None
    weights: Weights
    equal_cost_per_hour: float | None
    equal_cost_reason: str
    packets: tuple[PacketSummary, ...]
    rows: tuple[ComparedRow, ...]
    cheapest: int | None
    most_accurate: int | None
    undominated: tuple[int, ...]
    verdict: str
    lowest_slope_gradient: LowestSlopeGradient | None
    notes: tuple[str, ...]
    caution: str
    provenance: Provenance


def at_cost(curve: Sequence[CurvePoint], cost: float) -> CurvePoint | None:
    """What a cost buys on a curve, between its points on logarithmic axes; None outside.

    Examples
    --------
    >>> ends = [CurvePoint(step_s=s, error=s**2, cost_per_hour=1.0 / s) for s in (4.0, 1.0)]
    >>> found = at_cost(ends, 0.5)
    >>> round(found.step_s, 6), round(found.error, 6), at_cost(ends, 0.2)
    (2.0, 4.0, None)
    """
    line = sorted(curve, key=lambda point: point.cost_per_hour)
    for left, right in pairwise(line):
        if left.cost_per_hour <= cost <= right.cost_per_hour:
            share = _share(left.cost_per_hour, right.cost_per_hour, cost)
            return CurvePoint(
                step_s=_mix(left.step_s, right.step_s, share),
                error=_mix(left.error, right.error, share),
                cost_per_hour=cost,
            )
    return next((point for point in line if point.cost_per_hour == cost), None)


def _share(low: float, high: float, value: float) -> float:
    return log(value / low) / log(high / low) if high > low else 0.0


def _mix(left: float, right: float, share: float) -> float:
    """Between two numbers on a logarithmic axis; the larger where one of them is zero."""
    if min(left, right) <= 0.0:
        return max(left, right) if 0.0 < share < 1.0 else (right if share else left)
    return exp(log(left) + share * log(right / left))
