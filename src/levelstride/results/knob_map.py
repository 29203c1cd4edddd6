"""Stable step and wave errors over one or two numbers of the column file, as frozen plain data."""

from dataclasses import dataclass

from .dataset import ColumnSummary, LowestSlopeGradient, Provenance


@dataclass(frozen=True, slots=True, kw_only=True)
class Knob:
    """A number of the column file that is varied.

    Parameters
    ----------
    key : str
        Its path in the file; its unit is at the end of its name.
    values : tuple of float
        What it is set to.
    logarithmic : bool
        Whether these have equal ratios.
    present : float or None
        What it is in the file; None where it is left out.
    """

    key: str
    values: tuple[float, ...]
    logarithmic: bool
    present: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class MapPoint:
    """One column of the map.

    Parameters
    ----------
    values : tuple of float
        One per knob.
    stable_step_s : float or None
        Stable step [s]; None with ``unbounded`` if nothing bites, without it if no step is stable.
    unbounded : bool
        Whether nothing bites.
    binds : str
        What binds the stable step.
    step_s : float or None
        Step at which errors are found [s]; None if there is none.
    stable : bool
        Whether that step is within the stable one.
    frequency_error : float or None
        Largest relative frequency error of a resolved gravity wave there [1].
    amplitude_change_per_period, amplitude_change_per_hour : float or None
        Changes of amplitude of such waves that are largest in size [1].
    ambiguous : int
        Such waves that belong to no eigenvalue of the step decisively and are not judged.
    problem : str or None
        Why something is missing, if it is.
    """

    values: tuple[float, ...]
    stable_step_s: float | None
    unbounded: bool
    binds: str
    step_s: float | None
    stable: bool
    frequency_error: float | None = None
    amplitude_change_per_period: float | None = None
    amplitude_change_per_hour: float | None = None
    ambiguous: int = 0
    problem: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class MapRow:
    """The map of one tableau and splitting.

    Parameters
    ----------
    tableau, split : str
        Names in standard spelling.
    points : tuple of MapPoint
        Those of the last knob follow one another.
    """

    tableau: str
    split: str
    points: tuple[MapPoint, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class KnobMap:
    """Stable step and errors of gravity waves over one or two numbers of the column file.

    Parameters
    ----------
    title : str
        Title of the column file.
    column : ColumnSummary
        The level set as it is in the file.
    knobs : tuple of Knob
        What is varied.
    step_s : float or None
        Step at which errors are found, if it was given [s].
    share_of_stable : float or None
        Share of every column's own stable step at which they are found otherwise [1].
    rows : tuple of MapRow
        One per tableau and splitting.
    lowest_slope_gradient : str
        ``half`` or ``full``: how slopes are taken, where there are any.
    notes : tuple of str
        What else a reader must know.
    caution : str
        What is not promised.
    provenance : Provenance
        Where it comes from.
    """

    title: str
    column: ColumnSummary
    knobs: tuple[Knob, ...]
    step_s: float | None
    share_of_stable: float | None
    rows: tuple[MapRow, ...]
    lowest_slope_gradient: LowestSlopeGradient
    notes: tuple[str, ...]
    caution: str
    provenance: Provenance
