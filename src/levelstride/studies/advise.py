"""Which step, with which tableau and splitting: every pair tried, the cheapest hour first."""

from collections.abc import Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import replace

from levelstride.column.column import Column
from levelstride.results.calibration import SafetyFactor
from levelstride.results.dataset import Advice
from levelstride.studies.best_row import PARTS, BestRows, count_left, parts_of
from levelstride.studies.gather import Progress, gather, known
from levelstride.studies.keys import Kept
from levelstride.studies.plan import CurrentConfiguration, Plan, plan_advice
from levelstride.studies.rows import answer
from levelstride.studies.work_item import Finding

__all__ = ["CurrentConfiguration", "advise", "advise_plan", "advise_plans"]


def advise(
    column: Column,
    *,
    tableaux: Sequence[str] | None = None,
    splits: Sequence[str] | None = None,
    executor: Executor | None = None,
    current: CurrentConfiguration | None = None,
    calibration: SafetyFactor | None = None,
    certify: bool = False,
    kept: Kept | None = None,
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
    calibration : SafetyFactor, optional
        What a model was seen to carry of the stable step; takes the place of ``safety`` for its own
        tableau and splitting, and can only lower it for others.
    certify : bool
        Whether to certify every limit at every sampled wave.
    kept : Kept, optional
        Where finished pairs are kept as they end and found again, for instance
        ``levelstride.results.kept.KeptItems(folder)``.
    progress : callable, optional
        Called with how much is done, of all, and what is being worked on: pairs of tableau and
        splitting, and for the best row its what ifs and the headroom of every quantity.

    Returns
    -------
    Advice
        One row per pair, most simulated time per cost first.

    Raises
    ------
    InputError
        If a name is unknown, the current step is not positive, the calibration was made with other
        tolerances, or a pair cannot be kept.
    CalculationError
        If workers died over the same pair several times.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 6, "top_m": 6000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ...     "advice": {"divides_s": [60.0]},
    ... })
    >>> advice = levelstride.advise(column, tableaux=["ars232"], splits=["sound+divergence"])
    >>> row = advice.rows[advice.best]
    >>> row.tableau, row.advised_step_s <= 0.9 * row.stable_step_s
    ('ARS(2,3,2)', True)
    >>> round(row.steps_per_interval[0] * row.advised_step_s, 9)
    60.0
    """
    plan = plan_advice(column, tableaux, splits, current, calibration, certify=certify)
    return advise_plan(plan, executor=executor, kept=kept, progress=progress)


def advise_plan(
    plan: Plan,
    *,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> Advice:
    """Answer for one column; parameters, answer and errors are those of ``advise``."""
    found, told = {}, _Told(progress, [plan])
    for place, finding in gather(plan.items, executor, kept, told.pairs):
        if isinstance(finding, Exception):
            raise finding
        found[place] = finding
    advice = answer(plan, [found[i] for i in range(len(plan.items))])
    best = BestRows(executor, kept, told.parts)
    best.begin(0, plan, advice)
    ((_, completed),) = best.ended(wait=True)
    if isinstance(completed, Exception):
        raise completed
    return completed


def advise_plans(
    plans: Sequence[Plan],
    *,
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> Iterator[tuple[int, Advice | Exception]]:
    """Answer for many columns, whose work is shared out together.

    Parameters
    ----------
    plans : sequence of Plan
        One per column.
    executor, kept, progress
        As for ``advise``, over the items of all columns.

    Yields
    ------
    place : int
        Place of a column among the plans, as they are finished.
    found : Advice or Exception
        Its advice, or what went wrong with it and stops no other.

    Raises
    ------
    InputError
        If a pair cannot be kept.
    """
    items, owner = [], []
    for i, plan in enumerate(plans):
        title = plan.column.title
        items += [replace(planned, what=f"{title}: {planned.what}") for planned in plan.items]
        owner += [(i, k) for k in range(len(plan.items))]
    told = _Told(progress, plans)
    best = BestRows(executor, kept, told.parts)
    open_findings: dict[int, dict[int, Finding | Exception]] = {}
    for place, finding in gather(items, executor, kept, told.pairs):
        i, k = owner[place]
        found = open_findings.setdefault(i, {})
        found[k] = finding
        if len(found) == len(plans[i].items):
            advice = _answer_or_error(plans[i], open_findings.pop(i))
            if isinstance(advice, Exception):
                told.parts(PARTS, "")
                yield i, advice
            else:
                best.begin(i, plans[i], advice)
        yield from best.ended(wait=False)
    yield from best.ended(wait=True)


def count_parts(plans: Sequence[Plan]) -> int:
    """Count the parts of the work of several advices: pairs, and those on best rows."""
    return sum(len(plan.items) + PARTS for plan in plans)


def count_parts_left(plan: Plan, kept: Kept) -> int:
    """Count the parts that are still to be done; which row is best is known after all pairs."""
    found = known(plan.items, kept)
    if len(found) < len(plan.items):
        return len(plan.items) - len(found) + PARTS
    advice = answer(plan, [found[i] for i in range(len(plan.items))])
    return count_left(parts_of(plan, advice), kept)


class _Told:
    """Tells of pairs and of the parts of the work on best rows as of one number."""

    def __init__(self, progress: Progress | None, plans: Sequence[Plan]) -> None:
        self._progress = progress
        self._total = count_parts(plans)
        self._pairs = self._parts = 0
        self._on = ""

    def pairs(self, done: int, _: int, on: str) -> None:
        """Take note of how many pairs are done."""
        self._pairs = done
        self._tell(on)

    def parts(self, ended: int, on: str) -> None:
        """Take note of how many more parts have ended."""
        self._parts += ended
        self._tell(on)

    def _tell(self, on: str) -> None:
        done = self._pairs + self._parts
        self._on = "" if done == self._total else on or self._on
        if self._progress is not None:
            self._progress(done, self._total, self._on)


def _answer_or_error(plan: Plan, found: dict[int, Finding | Exception]) -> Advice | Exception:
    findings = []
    for i in range(len(plan.items)):
        finding = found[i]
        if isinstance(finding, Exception):
            return finding
        findings.append(finding)
    try:
        return answer(plan, findings)
    except Exception as error:
        return error
