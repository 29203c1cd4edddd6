"""Which step, with which tableau and splitting: every pair tried, the cheapest hour first."""

import pickle
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import BrokenExecutor, Executor, Future
from dataclasses import dataclass, fields, replace
from math import inf

from levelstride.column.column import Column
from levelstride.errors import CalculationError, InputError
from levelstride.results.dataset import Advice, AdviceRow, CurrentStep, Limit
from levelstride.results.wording import CAUTION, limit_reason, number, percent, step
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.studies.advised_step import whole_steps
from levelstride.studies.cost import HOUR_S, step_cost
from levelstride.studies.limit import SCAN
from levelstride.studies.methods import pairs_of, tableau_of
from levelstride.studies.summary import column_summary, provenance, wind_note
from levelstride.studies.timing import step_time
from levelstride.studies.work_item import Finding, WorkItem, carry_out
from levelstride.tableaux.tableau import Tableau

Progress = Callable[[int, int], None]

CERTIFIED = (
    "every row on both sides of its limit, by dense eigenvalues or energy norms of powers of R at "
    "the binding wave, or by the symbols of frozen rows; see each row"
)


@dataclass(frozen=True, slots=True)
class CurrentConfiguration:
    """The step that a user runs today.

    Parameters
    ----------
    step_s : float
        The step [s].
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    """

    step_s: float
    tableau: str
    split: str | Mapping[str, str]


def advise(
    column: Column,
    *,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    executor: Executor | None = None,
    current: CurrentConfiguration | None = None,
    progress: Progress | None = None,
) -> Advice:
    """Try every tableau with every splitting and advise a step for each.

    Parameters
    ----------
    column : Column
        The column; its ``[advice]`` table holds intervals, tolerances and costs.
    tableaux, splits : sequence of str, optional
        Names; those of the column file by default.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default. All give the same answer but for the measured
        times, which are taken in this process.
    current : CurrentConfiguration, optional
        A step in use today, to be judged as well.
    progress : callable, optional
        Called with the number of pairs done and of all, from any thread.

    Returns
    -------
    Advice
        One row per pair, most simulated time per cost first.

    Raises
    ------
    InputError
        If a name is unknown or the current step is not positive.
    CalculationError
        If a worker died.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 6, "top_m": 6000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ...     "advice": {"divides_s": [60.0]},
    ... })
    >>> advice = levelstride.advise(column, tableaux=["ars232"], splits=["sound+buoyancy"])
    >>> row = advice.rows[advice.best]
    >>> row.tableau, row.advised_step_s <= 0.9 * row.stable_step_s
    ('ARS(2,3,2)', True)
    >>> row.steps_per_interval[0] * row.advised_step_s
    60.0
    """
    pairs = pairs_of(column, tableaux, splits)
    judged = _judged_pair(column, current)
    wanted = [*pairs] if judged is None or _key(judged) in map(_key, pairs) else [*pairs, judged]
    packed = pickle.dumps(column)
    items = [WorkItem(packed, *_key(pair)) for pair in wanted]
    if current is not None and judged is not None:
        place = [_key(pair) for pair in wanted].index(_key(judged))
        split = current.split if judged[0].kind == "additive" else judged[1].name
        items[place] = replace(items[place], split=split, current_s=current.step_s)
    findings = _gather(items, executor, progress)
    rows = [
        _row(column, *pair, finding)
        for pair, finding in zip(pairs, findings[: len(pairs)], strict=True)
    ]
    rows.sort(key=_order)
    return Advice(
        title=column.title,
        column=column_summary(column),
        intervals_s=tuple(column.advice.divides_s),
        rows=tuple(rows),
        best=best_row(rows),
        current=None if current is None else _judge(current, findings),
        wind_note=wind_note(column),
        caution=CAUTION,
        provenance=provenance(column, f"{CERTIFIED}; {SCAN}"),
    )


def best_row(rows: Sequence[AdviceRow]) -> int | None:
    """Find the first row with an advised step, one whose solve stays in the column if there is one.

    A solve that couples columns is no vertical solve any more: it costs more than is counted here.
    """
    able = [i for i, row in enumerate(rows) if row.advised_step_s is not None]
    vertical = [i for i in able if not rows[i].couples_columns]
    return next(iter(vertical or able), None)


def _judged_pair(
    column: Column, current: CurrentConfiguration | None
) -> tuple[Tableau, Splitting] | None:
    if current is None:
        return None
    if not 0.0 < current.step_s < inf:
        raise InputError(f"current step: received {current.step_s!r} s, it must be above 0")
    tableau = tableau_of(column, current.tableau)
    split = "all-explicit" if tableau.kind == "explicit" else current.split
    return tableau, resolve(split)


def _key(pair: tuple[Tableau, Splitting]) -> tuple[str, str]:
    return pair[0].name, pair[1].name


def _gather(
    items: Sequence[WorkItem], executor: Executor | None, progress: Progress | None
) -> list[Finding]:
    """Have all items done and return what was found in their order."""
    done = 0

    def count(_: "Future[Finding] | None") -> None:
        nonlocal done
        done += 1
        if progress is not None:
            progress(done, len(items))

    if executor is None:
        findings = []
        for item in items:
            findings.append(carry_out(item))
            count(None)
        return findings
    try:
        futures = [executor.submit(carry_out, item) for item in items]
        for future in futures:
            future.add_done_callback(count)
        return [future.result() for future in futures]
    except BrokenExecutor as error:
        raise CalculationError(
            f"a worker ended before its work was done ({error}); there may be too little memory: "
            "try fewer workers"
        ) from error


def _row(column: Column, tableau: Tableau, splitting: Splitting, finding: Finding) -> AdviceRow:
    choice = finding.choice
    of_limit = {field.name: getattr(finding.limit, field.name) for field in fields(Limit)}
    if choice.step_s is None:
        return AdviceRow(**of_limit, binding=choice.binding)
    per_hour = HOUR_S / choice.step_s
    referred = column.reference is not None
    cost = step_cost(tableau, splitting, column.advice, reference=referred)
    check = choice.check
    return AdviceRow(
        **of_limit,
        advised_step_s=choice.step_s,
        advised_step_fraction=None if choice.fraction is None else str(choice.fraction),
        steps_per_interval=whole_steps(column.advice.divides_s, choice.fraction),
        steps_per_hour=per_hour,
        cost_per_hour=cost.weighted * per_hour,
        explicit_evaluations_per_hour=cost.evaluations * per_hour,
        solves_per_hour=cost.solves * per_hour,
        exchanges_per_hour=cost.exchanges * per_hour,
        measured_s_per_hour=step_time(column, splitting, tableau, choice.step_s) * per_hour,
        binding=choice.binding,
        frequency_error=None if check is None else check.frequency_error,
        amplitude_change_per_period=None if check is None else check.amplitude_change_per_period,
    )


def _order(row: AdviceRow) -> tuple[float, float, float]:
    """Cheapest simulated hour first, then the longer step; what cannot be advised last."""
    cost = inf if row.cost_per_hour is None else row.cost_per_hour
    return cost, -(row.advised_step_s or 0.0), -(row.stable_step_s or 0.0)


def _judge(current: CurrentConfiguration, findings: Sequence[Finding]) -> CurrentStep:
    finding = next(f for f in findings if f.current is not None)
    check, limit = finding.current, finding.limit
    assert check is not None
    share = None if limit.stable_step_s is None else current.step_s / limit.stable_step_s
    within = limit.unbounded or (share is not None and share <= 1.0)
    return CurrentStep(
        step_s=current.step_s,
        share_of_limit=share,
        stable=within and finding.current_stable,
        verdict=_verdict(current.step_s, share, within, check.failure, limit),
        frequency_error=check.frequency_error,
        amplitude_change_per_period=check.amplitude_change_per_period,
        limit=limit,
    )


def _verdict(
    step_s: float, share: float | None, within: bool, failure: str | None, limit: Limit
) -> str:
    if share is None:
        state = "is unlimited" if limit.unbounded else "cannot be stable"
        text = f"your step of {number(step_s)} s {state}: {limit_reason(limit)}"
    else:
        text = (
            f"your step is at {percent(share, 3)} of the limit of {step(limit.stable_step_s)} s "
            f"({limit_reason(limit)})"
        )
    if not within and share is not None:
        return f"{text}: too long"
    return text if failure is None else f"{text}; {failure}"
