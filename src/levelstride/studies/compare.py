"""Tableaux and splittings side by side: how long a step, how accurate, at what cost."""

import pickle
from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from math import inf, isfinite
from typing import Final

import numpy as np

from levelstride.column.column import Column, LowestSlopeGradient
from levelstride.errors import InputError
from levelstride.results.comparison import ComparedRow, Comparison, CurvePoint, Weights
from levelstride.results.comparison_wording import verdict
from levelstride.results.dataset import Limit
from levelstride.results.wording import CAUTION, limit_reason
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.studies.compared_row import CompareItem, RowFinding, find_row
from levelstride.studies.cost import HOUR_S, step_cost
from levelstride.studies.dominance import dominators, equal_cost, most_accurate, with_equal_cost
from levelstride.studies.gather import Progress
from levelstride.studies.kept_work import Part, Task, do_all
from levelstride.studies.keys import Kept, detail_key, limit_key
from levelstride.studies.limit import SCAN
from levelstride.studies.short_list import short_pairs
from levelstride.studies.summary import column_summary, provenance, wind_note
from levelstride.studies.timing import step_time

COMPARED: Final = ("ARS(2,3,2)", "ARS(3,4,3)", "IMEX-SSP2(2,3,2)")
"""Tableaux that are compared where nobody names any: of order 2 and 3, quickly searched."""

CERTIFIED = (
    "stable steps by a search each, see the rows; errors by eigenvalues of the step matched with "
    "the modes of the column, and by a packet against the exact exponential"
)


@dataclass(frozen=True, slots=True, eq=False)
class ComparePlan:
    """What was asked.

    Parameters
    ----------
    column : Column
        The column, its costs those asked for.
    pairs : tuple of (TimeScheme, Splitting)
        One per row.
    tasks : tuple of Task
        One per pair, in their order.
    step_s : float or None
        The step to compare at [s]; advised ones if None.
    equal_cost : float or None
        Cost to compare errors at, if it was given [1/h].
    """

    column: Column
    pairs: tuple[tuple[TimeScheme, Splitting], ...]
    tasks: tuple[Task, ...]
    step_s: float | None
    equal_cost: float | None


def compare(
    column: Column,
    *,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    step_s: float | None = None,
    weights: Weights | None = None,
    equal_cost: float | None = None,
    work_precision: bool = True,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> Comparison:
    """Put tableaux and splittings side by side: stable step, accuracy, damping and cost.

    Parameters
    ----------
    column : Column
        The column; its ``[advice]`` table holds tolerances, accuracy limits and costs.
    tableaux, splits : sequence of str, optional
        Names; by default those of the column file, and where it names none a short list.
    step_s : float, optional
        Step at which all are compared [s]; by default each at the step advised for it.
    weights : Weights, optional
        Cost of an explicit evaluation, a solve and an exchange; by default the column's own.
    equal_cost : float, optional
        Weighted cost per simulated hour at which errors are compared [1/h]; by default what the
        dearest row costs of those up to four times the cheapest.
    work_precision : bool
        Whether to carry packets of gravity waves, from which errors at equal cost come.
    lowest_slope_gradient : {"half", "full"}, optional
        By default the column's own.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default. All give the same answer but for measured times.
    kept : Kept, optional
        Where finished rows are kept as they end and found again.
    progress : callable, optional
        Called with the numbers of rows done and of all, and what is being worked on.

    Returns
    -------
    Comparison
        One row per tableau and splitting, the cheapest first.

    Raises
    ------
    InputError
        If a name is unknown or a number makes no sense.
    CalculationError
        If workers died over the same row several times.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 8, "top_m": 12000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 3000.0},
    ... })
    >>> found = levelstride.compare(column, tableaux=["ars232", "ars343"], splits=["sound"])
    >>> [row.tableau for row in found.rows], found.rows[0].errors.stable
    (['ARS(2,3,2)', 'ARS(3,4,3)'], True)
    """
    plan = plan_comparison(
        column,
        tableaux,
        splits,
        step_s=step_s,
        weights=weights,
        equal_cost=equal_cost,
        work_precision=work_precision,
        lowest_slope_gradient=lowest_slope_gradient,
    )
    return carry_out_comparison(plan, executor=executor, kept=kept, progress=progress)


def plan_comparison(
    column: Column,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    *,
    step_s: float | None = None,
    weights: Weights | None = None,
    equal_cost: float | None = None,
    work_precision: bool = True,
    lowest_slope_gradient: LowestSlopeGradient | None = None,
) -> ComparePlan:
    """Find out what is to be done; parameters and errors are those of ``compare``."""
    _check(step_s, weights, equal_cost)
    if lowest_slope_gradient is not None:
        column = replace(column, lowest_slope_gradient=lowest_slope_gradient)
    if weights is not None:
        advice = replace(
            column.advice,
            cost_explicit=weights.explicit,
            cost_solve=weights.solve,
            cost_exchange=weights.exchange,
        )
        column = replace(column, advice=advice)
    pairs = short_pairs(column, tableaux, splits, COMPARED)
    packed = pickle.dumps(column)
    tasks = []
    for tableau, splitting, split in pairs:
        of_limit = brief_key(column, tableau, splitting)
        item = CompareItem(packed, tableau.name, split, step_s, work_precision)
        key = detail_key(of_limit, "compared row", **_settings(column, item))
        what = f"{tableau.name} with {splitting.name}"
        tasks.append(Task(find_row, item, what, RowFinding, key, (Part("limit", Limit, of_limit),)))
    named = tuple((tableau, splitting) for tableau, splitting, _ in pairs)
    return ComparePlan(column, named, tuple(tasks), step_s, equal_cost)


def brief_key(column: Column, tableau: TimeScheme, splitting: Splitting) -> str:
    """Key of a limit without its asides, for the column's own lowest slope gradient."""
    return detail_key(
        limit_key(column, tableau, splitting),
        "brief limit",
        lowest_slope_gradient=column.lowest_slope_gradient,
    )


def _settings(column: Column, item: CompareItem) -> dict[str, object]:
    asked = column.advice
    return {
        "step_s": item.step_s,
        "packets": item.packets,
        "safety": asked.safety,
        "divides_s": asked.divides_s,
        "frequency_error": asked.frequency_error,
        "amplitude_loss_per_period": asked.amplitude_loss_per_period,
    }


def _check(step_s: float | None, weights: Weights | None, cost: float | None) -> None:
    problems = []
    if step_s is not None and not 0.0 < step_s < 1e6:
        problems.append(f"step: received {step_s!r} s; it must be above 0 and below 1e6")
    if cost is not None and not 0.0 < cost < inf:
        problems.append(f"equal cost: received {cost!r} per hour; it must be above 0")
    if weights is not None:
        parts = (weights.explicit, weights.solve, weights.exchange)
        if not all(isfinite(part) and part >= 0.0 for part in parts) or not any(parts):
            told = "/".join(f"{part:g}" for part in parts)
            problems.append(
                f"weights: received {told}; none may be below 0 and one must be above it"
            )
    if problems:
        raise InputError(*problems)


def carry_out_comparison(
    plan: ComparePlan,
    *,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> Comparison:
    """Have the rows found, and put them side by side; times of steps are measured here and now."""
    findings = do_all(plan.tasks, executor, kept, progress)
    rows = [
        _row(plan.column, *pair, finding)
        for pair, finding in zip(plan.pairs, findings, strict=True)
    ]
    rows.sort(key=_order)
    cost, reason = equal_cost(rows, plan.equal_cost)
    rows = [with_equal_cost(row, cost) for row in rows]
    by = dominators(rows)
    rows = [replace(row, dominated_by=found) for row, found in zip(rows, by, strict=True)]
    return _answer(plan, rows, findings, cost, reason)


def _row(
    column: Column, tableau: TimeScheme, splitting: Splitting, finding: RowFinding
) -> ComparedRow:
    found, accurate, advised = finding.limit, finding.accurate, finding.advised
    cost = step_cost(tableau, splitting, column.advice, reference=column.reference is not None)
    row = ComparedRow(
        tableau=found.tableau,
        split=found.split,
        stable_step_s=found.stable_step_s,
        unbounded=found.unbounded,
        scanned_to_s=found.scanned_to_s,
        criterion=found.criterion,
        stable_reason=limit_reason(found),
        air=found.air,
        couples_columns=found.couples_columns,
        path=found.path,
        certified=found.certified,
        accurate_step_s=accurate.step_s,
        accurate_reason=accurate.binding,
        advised_step_s=advised.step_s,
        advised_step_fraction=None if advised.fraction is None else str(advised.fraction),
        advised_reason=advised.binding,
        step_s=None if finding.errors is None else finding.errors.step_s,
        errors=finding.errors,
        curve=tuple(
            CurvePoint(
                step_s=point.step_s,
                error=point.error,
                cost_per_hour=cost.weighted * HOUR_S / point.step_s,
            )
            for point in finding.curve
        ),
        notes=finding.notes,
    )
    if row.step_s is None or not row.usable:
        return row
    per_hour = HOUR_S / row.step_s
    return replace(
        row,
        steps_per_hour=per_hour,
        explicit_evaluations_per_hour=cost.evaluations * per_hour,
        solves_per_hour=cost.solves * per_hour,
        exchanges_per_hour=cost.exchanges * per_hour,
        cost_per_hour=cost.weighted * per_hour,
        measured_s_per_hour=step_time(column, splitting, tableau, row.step_s) * per_hour,
    )


def _order(row: ComparedRow) -> tuple[float, float]:
    """Cheapest simulated hour first, then the longer stable step."""
    cost = inf if row.cost_per_hour is None else row.cost_per_hour
    return cost, -(inf if row.unbounded else row.stable_step_s or 0.0)


def _answer(
    plan: ComparePlan,
    rows: Sequence[ComparedRow],
    findings: Sequence[RowFinding],
    cost: float | None,
    reason: str,
) -> Comparison:
    column, costs = plan.column, plan.column.advice
    able = [i for i, row in enumerate(rows) if row.usable]
    cheapest = min(able, key=lambda i: (rows[i].couples_columns, i), default=None)
    answer = Comparison(
        title=column.title,
        column=column_summary(column),
        step_s=plan.step_s,
        weights=Weights(
            explicit=costs.cost_explicit, solve=costs.cost_solve, exchange=costs.cost_exchange
        ),
        equal_cost_per_hour=cost,
        equal_cost_reason=reason,
        packets=next((finding.packets for finding in findings if finding.packets), ()),
        rows=tuple(rows),
        cheapest=cheapest,
        most_accurate=most_accurate(rows),
        undominated=tuple(i for i in able if not rows[i].dominated_by),
        verdict="",
        lowest_slope_gradient=column.lowest_slope_gradient if np.any(column.slope_f) else None,
        notes=standing_notes(column, steep=bool(np.any(column.slope_f))),
        caution=CAUTION,
        provenance=provenance(column, f"{CERTIFIED}; {SCAN}"),
    )
    return replace(answer, verdict=verdict(answer))


def standing_notes(column: Column, *, steep: bool) -> tuple[str, ...]:
    """Say what was assumed about the wind, and about the lowest slope gradient over a slope."""
    notes = [] if column.wind_given else [str(wind_note(column))]
    if steep:
        other = "full" if column.lowest_slope_gradient == "half" else "half"
        notes.append(
            f"over the slope, the lowest slope gradient is taken as {column.lowest_slope_gradient};"
            f" {other} gives other steps, and advise takes the smaller of both"
        )
    return tuple(notes)
