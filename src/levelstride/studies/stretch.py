"""How far the levels can be stretched under a step, what takes over, and what limits the step."""

import pickle
from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from math import inf
from typing import Final

import numpy as np

from levelstride.column.arrays import Array
from levelstride.column.column import (
    Column,
    LowestSlopeGradient,
)
from levelstride.column.variants import with_levels
from levelstride.errors import CalculationError, InputError
from levelstride.results.stretch_wording import thickness
from levelstride.results.stretching import Stretch, StretchRow
from levelstride.results.wording import CAUTION
from levelstride.studies.gather import Progress
from levelstride.studies.level_families import KEEPS, Family
from levelstride.studies.limit import SCAN
from levelstride.studies.short_list import short_pairs
from levelstride.studies.stretch_point import (
    Measured,
    StretchItem,
)
from levelstride.studies.stretch_rows import Draft, Extras, Telling
from levelstride.studies.stretch_work import StretchWork, Wanted
from levelstride.studies.stretched_levels import NoMemberError
from levelstride.studies.summary import column_summary, provenance, wind_note

POINTS: Final = 24
FEWEST_POINTS, MOST_POINTS = 3, 1000

CERTIFIED: Final = (
    "the user's own set and the last set that carries the target by a full search for the stable "
    "step, other points of columns with more than 100 unknowns by following the limit from set to "
    "set where it goes on evenly (whole_search tells which); between points the curve is not proved"
)


def stretch(
    column: Column,
    *,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    target_step_s: float | None = None,
    keep: str = KEEPS[0],
    lowest: int | None = None,
    points: int = POINTS,
    efolding_s: float | None = None,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
    layers: bool = False,
    mend: bool = False,
    keep_lowest: bool = False,
    largest_ratio: float | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> Stretch:
    """Stretch a level set and find how far a step goes with it.

    Parameters
    ----------
    column : Column
        The column, whose own level set is a member of the family.
    tableaux, splits : sequence of str, optional
        Names; by default those of the column file, and where it names none a short list.
    target_step_s : float, optional
        Step to be carried [s]; by default the step that is advised for the user's own set, for
        every pair its own.
    keep : str
        What the family keeps, see ``levelstride.studies.level_families``: ``layers-and-lid``,
        ``ratio``, ``lowest-layers`` or ``upper-levels``.
    lowest : int, optional
        How many of the lowest layers ``lowest-layers`` keeps and ``upper-levels`` makes anew; a
        third of them by default.
    points : int
        Number of level sets on the curve.
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default the column's own.
    lowest_slope_gradient : {"half", "full"}, optional
        By default the column's own.
    layers : bool
        Whether to find besides which layers of the user's own set cost the step.
    mend : bool
        Whether to find besides the nearest level set that carries the target.
    keep_lowest : bool
        Whether mending keeps the lowest layer as it is.
    largest_ratio : float, optional
        Largest ratio of neighbouring thicknesses that mending allows [1].
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default. All give the same answer.
    progress : callable, optional
        Called with the number of searches done, of all known so far, and what is being worked on.

    Returns
    -------
    Stretch
        One row per tableau and splitting.

    Raises
    ------
    InputError
        If a name is unknown or a number makes no sense.
    CalculationError
        If workers died over the same set several times.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "table", "heights_m": [0.0, 2000.0, 4600.0, 8000.0]},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 1000.0},
    ... })
    >>> found = levelstride.stretch(
    ...     column, tableaux=["ars232"], splits=["all-explicit"], target_step_s=1.8, points=4
    ... )
    >>> found.rows[0].never_bites, 600.0 < found.thinnest_lowest_layer_m < 1200.0
    (False, True)
    """
    efolding_s = column.advice.efolding_s if efolding_s is None else efolding_s
    asked = _Asked(target_step_s, points, efolding_s)
    if lowest_slope_gradient is not None:
        column = replace(column, lowest_slope_gradient=lowest_slope_gradient)
    pairs = short_pairs(column, tableaux, splits)
    family = Family(column.levels.interfaces_m, keep, 0 if lowest is None else lowest)
    coordinates, notes = _members(column, family, asked.points)
    packed = pickle.dumps(column)
    of = [
        StretchItem(packed, family.keep, family.lowest, tableau.name, split, asked.efolding_s)
        for tableau, _, split in pairs
    ]
    work = StretchWork(of, executor, progress)
    measured = work.points(coordinates, family.own, advise=target_step_s is None)
    drafts = [
        Draft(tableau, splitting, tuple(one.point for one in found), asked.target(found))
        for (tableau, splitting, _), found in zip(pairs, measured, strict=True)
    ]
    wanted = Wanted(layers, mend, keep_lowest, largest_ratio)
    extras = work.extras(drafts, column.horizontal.grid_spacing_m, wanted)
    telling = Telling(family, len(column.airs) > 1)
    rows = tuple(map(telling.row, drafts, extras))
    return _answer(column, family, rows, (*notes, *_failures(rows, extras), *_notes(column)))


@dataclass(frozen=True, slots=True)
class _Asked:
    """What the caller asked for, checked."""

    target_step_s: float | None
    points: int
    efolding_s: float

    def __post_init__(self) -> None:
        problems = []
        if self.target_step_s is not None and not 0.0 < self.target_step_s < 1e6:
            problems.append(
                f"target step: received {self.target_step_s!r} s; it must be above 0 and below 1e6"
            )
        if not FEWEST_POINTS <= self.points <= MOST_POINTS:
            problems.append(
                f"points: received {self.points}; a curve has {FEWEST_POINTS} to {MOST_POINTS}"
            )
        if not 0.0 < self.efolding_s < 1e12:
            problems.append(f"e-folding time: received {self.efolding_s!r} s; it must be above 0")
        if problems:
            raise InputError(*problems)

    def target(self, found: Sequence[Measured]) -> tuple[float | None, str]:
        """Step to be carried [s], and where it comes from."""
        if self.target_step_s is not None:
            return self.target_step_s, "given"
        choice = next(one.choice for one in found if one.choice is not None)
        return choice.step_s, f"advised, bound by {choice.binding}"


def _members(
    column: Column, family: Family, points: int
) -> tuple[tuple[float, ...], tuple[str, ...]]:
    """Coordinates whose sets make a column, and why the range ends earlier than wanted."""

    def problem(heights: Array) -> str | None:
        try:
            with_levels(column, heights)
        except InputError as error:
            return error.problems[0]
        return None

    steep = f"sets beyond it have thickness ratios above {family.steepest:.3g}"
    found = family.coordinates(points, lambda heights: problem(heights) is None)
    notes = []
    for end, wanted in zip((found[0], found[-1]), family.ends, strict=True):
        if abs(wanted / end - 1.0) < 1e-9:
            continue
        try:
            reason = problem(family.at(wanted)) or steep
        except NoMemberError as error:
            reason = str(error)
        what = "lids" if family.by_lid else "lowest layers"
        notes.append(
            f"the range of {what} ends at {thickness(end)} and not at {thickness(wanted)}: {reason}"
        )
    return found, tuple(notes)


def _failures(rows: Sequence[StretchRow], extras: Sequence[Extras]) -> tuple[str, ...]:
    """What was wanted besides and could not be found."""
    return tuple(
        f"{what} for {row.tableau} with {row.split}: {found}"
        for row, extra in zip(rows, extras, strict=True)
        for what, found in (("layers", extra.layer_costs), ("mending", extra.mended))
        if isinstance(found, CalculationError)
    )


def _notes(column: Column) -> tuple[str, ...]:
    """What was assumed about wind and slope."""
    notes = [] if column.wind_given else [str(wind_note(column))]
    if np.any(column.slope_f):
        other = "full" if column.lowest_slope_gradient == "half" else "half"
        notes.append(
            f"over the slope, the lowest slope gradient is taken as {column.lowest_slope_gradient};"
            f" {other} gives other steps, and advise takes the smaller of both"
        )
    return tuple(notes)


def _answer(
    column: Column, family: Family, rows: tuple[StretchRow, ...], notes: tuple[str, ...]
) -> Stretch:
    def stretched(i: int) -> tuple[float, float]:
        thinnest, lid = rows[i].thinnest_lowest_layer_m, rows[i].lid_m
        return inf if thinnest is None else thinnest, -(lid or 0.0)

    best = min(range(len(rows)), key=stretched)
    shown = rows[best]
    return Stretch(
        title=column.title,
        target_step_s=shown.target_step_s,
        tableau=shown.tableau,
        split=shown.split,
        thinnest_lowest_layer_m=shown.thinnest_lowest_layer_m,
        largest_ratio=shown.largest_ratio,
        curve=shown.curve,
        best=best,
        rows=rows,
        keep=family.keep,
        lowest=family.lowest if family.keep in ("lowest-layers", "upper-levels") else None,
        column=column_summary(column),
        lowest_slope_gradient=column.lowest_slope_gradient if np.any(column.slope_f) else None,
        notes=notes,
        caution=CAUTION,
        provenance=provenance(column, f"{CERTIFIED}; {SCAN}"),
    )
