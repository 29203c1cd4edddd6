"""The rows of an advice, made of what was found for every pair."""

from collections.abc import Sequence
from dataclasses import fields, replace
from math import inf

from levelstride.column.column import Column
from levelstride.results.dataset import Advice, AdviceRow, CurrentStep, Limit, Provenance
from levelstride.results.wording import CAUTION, limit_reason, number, percent, step
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.studies.advised_step import whole_steps
from levelstride.studies.cost import HOUR_S, step_cost
from levelstride.studies.limit import SCAN
from levelstride.studies.plan import CurrentConfiguration, Plan
from levelstride.studies.summary import column_summary, provenance, wind_note
from levelstride.studies.timing import step_time
from levelstride.studies.work_item import Finding

CERTIFIED = (
    "every row on both sides of its limit, by dense eigenvalues or energy norms of powers of R at "
    "the binding wave, or by the symbols of frozen rows; see each row"
)
EVERY_WAVE = (
    "every row at every sampled wave, on both sides of its limit where one binds; see each row"
)


def answer(plan: Plan, findings: Sequence[Finding]) -> Advice:
    """Make an advice of what was found; times of steps are measured here and now.

    Parameters
    ----------
    plan : Plan
        What was asked.
    findings : sequence of Finding
        One for every work item of the plan, in its order.

    Returns
    -------
    Advice
        One row per pair, most simulated time per cost first.
    """
    column = plan.column
    rows = [
        replace(_row(column, *pair, finding), safety=plan.safety(pair[0].name, pair[1].name))
        for pair, finding in zip(plan.pairs, findings[: len(plan.pairs)], strict=True)
    ]
    rows.sort(key=_order)
    return Advice(
        title=column.title,
        column=column_summary(column),
        intervals_s=tuple(column.advice.divides_s),
        rows=tuple(rows),
        best=best_row(rows),
        current=None if plan.current is None else _judge(plan.current, findings),
        wind_note=wind_note(column),
        caution=CAUTION,
        provenance=_provenance(plan),
    )


def _provenance(plan: Plan) -> Provenance:
    made = provenance(plan.column, f"{EVERY_WAVE if plan.certify else CERTIFIED}; {SCAN}")
    seen = plan.calibration
    if seen is None:
        return made
    bounds = {"calibrated_lower": seen.lower, "calibrated_upper": seen.upper}
    known = {name: bound for name, bound in bounds.items() if bound is not None}
    return replace(made, tolerances={**made.tolerances, **known})


def best_row(rows: Sequence[AdviceRow]) -> int | None:
    """Find the first row with an advised step, one whose solve stays in the column if there is one.

    A solve that couples columns is no vertical solve any more: it costs more than is counted here.
    """
    able = [i for i, row in enumerate(rows) if row.advised_step_s is not None]
    vertical = [i for i in able if not rows[i].couples_columns]
    return next(iter(vertical or able), None)


def _row(column: Column, tableau: TimeScheme, splitting: Splitting, finding: Finding) -> AdviceRow:
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
        ambiguous_waves=0 if check is None else check.ambiguous_waves,
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
        ambiguous_waves=check.ambiguous_waves,
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
