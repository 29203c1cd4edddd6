"""How stable step and errors of gravity waves change with a number of the column file, or two."""

import pickle
from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from itertools import product
from math import inf

import numpy as np

from levelstride.accuracy.by_kind import step_wave_errors
from levelstride.column.column import Column, LowestSlopeGradient
from levelstride.column.knobs import with_value
from levelstride.errors import CalculationError, InputError
from levelstride.results.comparison import ErrorsAtStep
from levelstride.results.knob_map import Knob, KnobMap, MapPoint, MapRow
from levelstride.results.stretch_wording import binding_words
from levelstride.results.wording import CAUTION, number
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.studies.compare import COMPARED, brief_key, standing_notes
from levelstride.studies.compared_row import gravity_errors
from levelstride.studies.gather import Progress
from levelstride.studies.kept_work import Task, do_all
from levelstride.studies.keys import Kept, detail_key
from levelstride.studies.knob_range import knobs
from levelstride.studies.limit import SCAN
from levelstride.studies.methods import tableau_of
from levelstride.studies.short_list import short_pairs
from levelstride.studies.stretch_point import binding
from levelstride.studies.summary import column_summary, provenance

MOST_POINTS = 10_000
"""Columns times pairs of tableau and splitting."""

CERTIFIED = (
    "every stable step by its own search; errors by eigenvalues of the step matched with the modes "
    "of each column; between points the map is not proved"
)


@dataclass(frozen=True, slots=True)
class MapItem:
    """One column with a tableau and a splitting, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled.
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    values : tuple of float
        What the knobs are set to.
    step_s : float or None
        Step at which errors are found [s].
    """

    column: bytes
    tableau: str
    split: str | Mapping[str, str]
    values: tuple[float, ...]
    step_s: float | None


@dataclass(frozen=True, slots=True, eq=False)
class MapPlan:
    """What was asked.

    Parameters
    ----------
    column : Column
        The column as it is in the file.
    knobs : tuple of Knob
        What is varied.
    pairs : tuple of (TimeScheme, Splitting)
        One per row.
    tasks : tuple of Task
        Pair by pair, one for every column.
    step_s : float or None
        Step at which errors are found [s].
    steep : bool
        Whether any of the columns has a slope.
    """

    column: Column
    knobs: tuple[Knob, ...]
    pairs: tuple[tuple[TimeScheme, Splitting], ...]
    tasks: tuple[Task, ...]
    step_s: float | None
    steep: bool


def knob_map(
    column: Column,
    *,
    vary: Mapping[str, str | Sequence[float]],
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    step_s: float | None = None,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> KnobMap:
    """Map stable step and errors of gravity waves over one or two numbers of the column file.

    Parameters
    ----------
    column : Column
        The column.
    vary : mapping of str to str or sequence of float
        By key of the column file, such as ``terrain.slope``, a range ``FROM:TO:COUNT`` or
        ``FROM:TO:COUNT:log``, or the values themselves; one key or two.
    tableaux, splits : sequence of str, optional
        Names; by default those of the column file, and where it names none a short list.
    step_s : float, optional
        Step at which errors are found [s]; by default ``safety`` times the stable step of every
        column and pair.
    lowest_slope_gradient : {"half", "full"}, optional
        By default the column's own.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default. All give the same answer.
    kept : Kept, optional
        Where finished points are kept as they end and found again.
    progress : callable, optional
        Called with the numbers of points done and of all, and what is being worked on.

    Returns
    -------
    KnobMap
        One row per tableau and splitting.

    Raises
    ------
    InputError
        If a key is none or holds no number, a value is not allowed there, or a name is unknown.
    CalculationError
        If workers died over the same point several times.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 6, "top_m": 9000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 3000.0},
    ... })
    >>> found = levelstride.knob_map(
    ...     column, vary={"horizontal.grid_spacing_m": [1500.0, 3000.0]},
    ...     tableaux=["ars232"], splits=["sound+buoyancy"],
    ... )
    >>> finer, own = found.rows[0].points
    >>> 1.9 < own.stable_step_s / finer.stable_step_s < 2.1
    True
    """
    plan = plan_map(
        column,
        vary,
        tableaux,
        splits,
        step_s=step_s,
        lowest_slope_gradient=lowest_slope_gradient,
    )
    return carry_out_map(plan, executor=executor, kept=kept, progress=progress)


def plan_map(
    column: Column,
    vary: Mapping[str, str | Sequence[float]],
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    *,
    step_s: float | None = None,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
) -> MapPlan:
    """Find out what is to be done; parameters and errors are those of ``knob_map``."""
    if step_s is not None and not 0.0 < step_s < 1e6:
        raise InputError(f"step: received {step_s!r} s; it must be above 0 and below 1e6")
    if lowest_slope_gradient is not None:
        column = replace(column, lowest_slope_gradient=lowest_slope_gradient)
    varied = knobs(column, vary)
    pairs = short_pairs(column, tableaux, splits, COMPARED)
    grid = list(product(*(knob.values for knob in varied)))
    if len(grid) * len(pairs) > MOST_POINTS:
        raise InputError(
            f"--vary: {len(grid)} columns for {len(pairs)} pairs of tableau and splitting are more "
            f"than {MOST_POINTS} points; lower a COUNT, or name --tableaux and --splits"
        )
    columns = _columns(column, varied, grid)
    packed = [pickle.dumps(one) for one in columns]
    tasks = []
    for tableau, splitting, split in pairs:
        for one, data, values in zip(columns, packed, grid, strict=True):
            item = MapItem(data, tableau.name, split, values, step_s)
            key = detail_key(
                brief_key(one, tableau, splitting),
                "map point",
                values=values,
                step_s=step_s,
                safety=None if step_s is not None else one.advice.safety,
                worst_of=(one.advice.frequency_error, one.advice.amplitude_loss_per_period),
            )
            at = ", ".join(
                f"{knob.key} {number(value)}" for knob, value in zip(varied, values, strict=True)
            )
            what = f"{tableau.name} with {splitting.name}, {at}"
            tasks.append(Task(find_point, item, what, MapPoint, key))
    named = tuple((tableau, splitting) for tableau, splitting, _ in pairs)
    steep = any(np.any(one.slope_f) for one in columns)
    return MapPlan(column, varied, named, tuple(tasks), step_s, steep)


def _columns(
    column: Column, varied: Sequence[Knob], grid: Sequence[tuple[float, ...]]
) -> list[Column]:
    """A column for every point; what is not allowed is told, the first few of it."""
    found, problems = [], []
    for values in grid:
        changed = column
        try:
            for knob, value in zip(varied, values, strict=True):
                changed = with_value(changed, knob.key, value)
            found.append(changed)
        except InputError as error:
            at = ", ".join(
                f"{knob.key} = {value:g}" for knob, value in zip(varied, values, strict=True)
            )
            problems.append(f"--vary at {at}: {error.problems[0]}")
    if problems:
        raise InputError(*problems[:3])
    return found


@on_one_thread
def find_point(item: MapItem) -> MapPoint:
    """Search the stable step of one column, and find what a step does to gravity waves.

    Returns
    -------
    MapPoint
        The same in whatever process it is found.
    """
    column: Column = pickle.loads(item.column)
    splitting, tableau = resolve(item.split), tableau_of(column, item.tableau)
    tolerance = Tolerance(column.advice.efolding_s, column.advice.transient_limit)
    try:
        found: StableStep | None = ColumnVerdict(column, splitting, tableau).stable_step(tolerance)
        problem = None
    except CalculationError as error:
        found, problem = None, str(error)
    unbounded = found is not None and found.step_s is None
    binds = None if found is None else binding(column, found, tolerance)
    stable_s = None if found is None else found.step_s
    step_s = item.step_s
    if step_s is None and stable_s is not None:
        step_s = column.advice.safety * stable_s
    point = MapPoint(
        values=item.values,
        stable_step_s=stable_s,
        unbounded=unbounded,
        binds="none" if binds is None else binding_words(binds),
        step_s=step_s,
        stable=step_s is not None and step_s <= (inf if unbounded else stable_s or 0.0),
        problem=problem,
    )
    return point if step_s is None else _with_errors(point, column, splitting, tableau, step_s)


def _with_errors(
    point: MapPoint, column: Column, splitting: Splitting, tableau: TimeScheme, step_s: float
) -> MapPoint:
    try:
        found = step_wave_errors(column, splitting, tableau, step_s, resolved_only=True)
    except CalculationError as error:
        return replace(point, problem=point.problem or str(error))
    errors = gravity_errors(ErrorsAtStep(step_s=step_s, stable=point.stable), found)
    return replace(
        point,
        frequency_error=errors.frequency_error,
        amplitude_change_per_period=errors.amplitude_change_per_period,
        amplitude_change_per_hour=errors.amplitude_change_per_hour,
        ambiguous=errors.ambiguous,
    )


def carry_out_map(
    plan: MapPlan,
    *,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> KnobMap:
    """Have the points found, and put them into a map."""
    points = do_all(plan.tasks, executor, kept, progress)
    each = len(points) // len(plan.pairs)
    rows = tuple(
        MapRow(
            tableau=tableau.name,
            split=splitting.name,
            points=tuple(points[k * each : (k + 1) * each]),
        )
        for k, (tableau, splitting) in enumerate(plan.pairs)
    )
    column = plan.column
    return KnobMap(
        title=column.title,
        column=column_summary(column),
        knobs=plan.knobs,
        step_s=plan.step_s,
        share_of_stable=column.advice.safety if plan.step_s is None else None,
        rows=rows,
        lowest_slope_gradient=column.lowest_slope_gradient,
        notes=standing_notes(column, steep=plan.steep),
        caution=CAUTION,
        provenance=provenance(column, f"{CERTIFIED}; {SCAN}"),
    )
