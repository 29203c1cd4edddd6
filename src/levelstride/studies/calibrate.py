"""Which assumptions explain the gap between steps of a real model and the linear limit?

A model survived some steps and lost others. Linear theory agrees with that if the stable step of
every column lies between. Where it does not, one assumption after the other is varied.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from itertools import pairwise
from math import inf, isfinite, sqrt
from typing import Final, TypeAlias

from levelstride.column.column import Column
from levelstride.errors import InputError
from levelstride.results.calibration import (
    Assumption,
    AssumptionTrial,
    Calibration,
    ConsistentRange,
    ObservedColumn,
    SafetyFactor,
)
from levelstride.results.wording import CAUTION, number
from levelstride.splitting.splitting import resolve
from levelstride.stability.verdict import SAME
from levelstride.studies.assumptions import Value, Varied, chosen
from levelstride.studies.calibration_setup import LimitItem, Setup, stable_step
from levelstride.studies.calibration_words import contradictions, verdict
from levelstride.studies.gather import Progress
from levelstride.studies.limit import DEFAULT_SPLIT, SCAN
from levelstride.studies.methods import tableau_of
from levelstride.studies.share_out import share_out
from levelstride.studies.summary import provenance, wind_note

EDGE: Final = 1.01
"""Ratio to which the end of a consistent range is found."""

Near: TypeAlias = tuple[float | None, ...]
"""Steps near which limits are known to lie, one per column [s]."""

AGREES, TOO_LOW, TOO_HIGH, BOTH = "agrees", "too low", "too high", "both"


@dataclass(frozen=True, slots=True, eq=False)
class Observed:
    """Steps that a model survived or lost on a column.

    Parameters
    ----------
    column : Column
        The column.
    held_s, failed_s : tuple of float
        Steps [s].
    """

    column: Column
    held_s: tuple[float, ...] = ()
    failed_s: tuple[float, ...] = ()


def calibrate(
    observed: Sequence[Observed],
    *,
    tableau: str,
    split: str | Mapping[str, str] | None = None,
    efolding_s: float | None = None,
    vary: Sequence[str] | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> Calibration:
    """Compare steps that a model survived or lost with the linear limit.

    Over a slope the limit is the smaller one of both treatments of the lowest slope gradient, as in
    ``advise``.

    Parameters
    ----------
    observed : sequence of Observed
        What was seen; the same column may come several times.
    tableau : str
        Published name, alias or bare form of the model's tableau.
    split : str or mapping, optional
        Its splitting; by default what the first column file says, else ``sound``.
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default that of the first column.
    vary : sequence of str, optional
        Names of ``levelstride.studies.assumptions.ASSUMPTIONS``; all by default.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default. All give the same answer.
    progress : callable, optional
        Called with the number of searches done, of all known so far, and what is being worked on.

    Returns
    -------
    Calibration
        The answer.

    Raises
    ------
    InputError
        If a name is unknown, a step is not positive, or nothing was observed.
    CalculationError
        If workers died over the same search several times.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 4, "top_m": 6000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> found = calibrate(
    ...     [Observed(column, held_s=(1.0,), failed_s=(30.0,))],
    ...     tableau="ARS(2,3,2)", split="sound+buoyancy", vary=["growth-tolerance"],
    ... )
    >>> found.agrees, found.factor_lower < 1.0 < found.factor_upper
    (True, True)
    """
    merged = _merged(observed)
    first = merged[0].column
    splitting = resolve(split if split is not None else first.split or DEFAULT_SPLIT)
    efolding_s = first.advice.efolding_s if efolding_s is None else efolding_s
    if not 0.0 < efolding_s < 1e12:
        raise InputError(f"e-folding time: received {efolding_s!r} s; it must be above 0")
    columns = tuple(one.column for one in merged)
    setup = Setup(columns, tableau_of(first, tableau), splitting, efolding_s)
    varied = [kind(setup) for kind in chosen(vary)]
    work = _Work(merged, executor, progress)
    told = contradictions(merged)
    (baseline,) = work.steps([("the columns as they are", setup.items())])
    assumptions = () if told else tuple(map(work.assumption, varied))
    answer = _answer(setup, merged, baseline, assumptions)
    return replace(answer, contradictions=told, verdict=verdict(answer, told))


def _merged(observed: Sequence[Observed]) -> list[Observed]:
    """One entry for every column that differs, with all its steps in ascending order."""
    problems = []
    by_digest: dict[str, Observed] = {}
    for one in observed:
        for what, steps in (("held", one.held_s), ("failed", one.failed_s)):
            problems += [
                f"{what} step of {one.column.source}: received {step!r} s; it must be above 0"
                for step in steps
                if not 0.0 < step < 1e6
            ]
        known = by_digest.get(one.column.digest, replace(one, held_s=(), failed_s=()))
        by_digest[one.column.digest] = replace(
            known,
            held_s=tuple(sorted({*known.held_s, *one.held_s})),
            failed_s=tuple(sorted({*known.failed_s, *one.failed_s})),
        )
    merged = [one for one in by_digest.values() if one.held_s or one.failed_s]
    if not merged:
        problems.append("calibrate: no step was observed; give at least one that held or failed")
    tolerated = {one.column.advice.transient_limit for one in merged}
    if len(tolerated) > 1:
        problems.append(
            "calibrate: advice.transient_limit differs between the columns "
            f"({', '.join(number(limit) for limit in sorted(tolerated))}); give all the same"
        )
    if problems:
        raise InputError(*dict.fromkeys(problems))
    return merged


def agreement(observed: Sequence[Observed], steps_s: Sequence[float]) -> str:
    """Hold stable steps against what was observed.

    Parameters
    ----------
    observed : sequence of Observed
        One per column.
    steps_s : sequence of float
        Stable step of each [s], known to 0.1 %.

    Returns
    -------
    str
        ``agrees``; ``too low`` where a longer step held, ``too high`` where a shorter one failed,
        ``both`` where the columns do not agree about that.
    """
    low = any(
        one.held_s and max(one.held_s) > SAME * step
        for one, step in zip(observed, steps_s, strict=True)
    )
    high = any(
        one.failed_s and min(one.failed_s) <= step
        for one, step in zip(observed, steps_s, strict=True)
    )
    if low and high:
        return BOTH
    return TOO_LOW if low else TOO_HIGH if high else AGREES


class _Work:
    """Has searches done, and tells of progress."""

    def __init__(
        self, observed: Sequence[Observed], executor: Executor | None, progress: Progress | None
    ) -> None:
        self._observed, self._executor, self._progress = observed, executor, progress
        self._done = self._total = 0

    def steps(self, wanted: Sequence[tuple[str, tuple[LimitItem, ...]]]) -> list[tuple[float, ...]]:
        """Find stable steps, one per column, for everything wanted."""
        items = {
            (i, k): item for i, (_, found) in enumerate(wanted) for k, item in enumerate(found)
        }
        places = list(items)
        self._total += len(places)
        left = dict.fromkeys(range(len(places)))
        found: dict[tuple[int, int], float] = {}
        self._tell(wanted[places[0][0]][0] if places else "")
        numbered = {n: items[place] for n, place in enumerate(places)}
        for n, step in share_out(stable_step, numbered, self._executor):
            if isinstance(step, Exception):
                raise step
            found[places[n]] = step
            del left[n]
            self._done += 1
            self._tell(wanted[places[next(iter(left))][0]][0] if left else "")
        return [
            tuple(found[i, k] for k in range(len(items))) for i, (_, items) in enumerate(wanted)
        ]

    def _tell(self, on: str) -> None:
        if self._progress is not None:
            self._progress(self._done, self._total, on)

    def assumption(self, varied: Varied) -> Assumption:
        """Vary one assumption."""
        empty = Assumption(
            name=varied.name, unit=varied.unit, present=varied.present, varied_over=""
        )
        if (why_not := varied.why_not()) is not None:
            return replace(empty, note=why_not)
        trials = self._trials(varied, varied.values())
        if all(trial.value is not None for trial in trials):
            trials = self._refined(varied, trials)
        agreeing = tuple(trial.label for trial in trials if trial.consistent)
        return replace(
            empty,
            varied_over=varied.varied_over,
            trials=tuple(trials),
            ranges=_ranges(trials),
            consistent=agreeing,
            explains=bool(agreeing),
        )

    def _trials(
        self, varied: Varied, values: Sequence[Value], near_s: Sequence[Near] | None = None
    ) -> list[AssumptionTrial]:
        """Try values, near known steps if there are any; what a column cannot take is left out."""
        wanted, kept = [], []
        for value, near in zip(values, near_s or [()] * len(values), strict=True):
            try:
                items = varied.items(value)
            except InputError:
                continue
            if near:
                items = tuple(
                    replace(item, near_s=step) for item, step in zip(items, near, strict=True)
                )
            wanted.append((f"{varied.name}: {value.label}", items))
            kept.append(value)
        return [
            AssumptionTrial(
                label=value.label,
                value=value.number,
                stable_steps_s=tuple(step if isfinite(step) else None for step in steps),
                consistent=agreement(self._observed, steps) == AGREES,
            )
            for value, steps in zip(kept, self.steps(wanted), strict=True)
        ]

    def _refined(self, varied: Varied, trials: list[AssumptionTrial]) -> list[AssumptionTrial]:
        """Halve every interval across which the agreement changes, down to 1 %.

        Values between are searched near the steps of their neighbours. Where they end a range in
        the end, they are searched in full; if that changes the agreement, it goes on.
        """
        smallest = min((t.value for t in trials if t.value), default=0.0)
        roughly: set[float] = set()
        while True:
            trials.sort(key=lambda trial: trial.value or 0.0)
            between = [
                (_middle(one.value or 0.0, other.value or 0.0), _near(one, other))
                for one, other in pairwise(trials)
                if self._agreement(one) != self._agreement(other)
                and _apart(one.value or 0.0, other.value or 0.0, smallest)
            ]
            found = self._trials(varied, [varied.value(at) for at, _ in between],
                                 [near for _, near in between])  # fmt: skip
            trials += found
            roughly |= {trial.value for trial in found if trial.value is not None}
            if found:
                continue
            told = {end for r in _ranges(trials) for end in (r.from_value, r.to_value)} & roughly
            if not told:
                return trials
            roughly -= told
            trials = [trial for trial in trials if trial.value not in told]
            trials += self._trials(varied, [varied.value(at) for at in sorted(told)])

    def _agreement(self, trial: AssumptionTrial) -> str:
        steps = [inf if step is None else step for step in trial.stable_steps_s]
        return agreement(self._observed, steps)


def _near(one: AssumptionTrial, other: AssumptionTrial) -> Near:
    """Steps near which those between two values lie, one per column: the shorter of two."""
    return tuple(
        min((step for step in steps if step), default=None)
        for steps in zip(one.stable_steps_s, other.stable_steps_s, strict=True)
    )


def _middle(low: float, high: float) -> float:
    return sqrt(low * high) if low > 0.0 else high / 2


def _apart(low: float, high: float, smallest: float) -> bool:
    """Whether an interval is wider than 1 %, or from 0 than a hundredth of the least value."""
    return high > EDGE * low if low > 0.0 else high > 0.01 * smallest


def _ranges(trials: Sequence[AssumptionTrial]) -> tuple[ConsistentRange, ...]:
    runs: list[list[float]] = []
    inside = False
    for trial in trials:
        if trial.consistent and trial.value is not None:
            if not inside:
                runs.append([])
            runs[-1].append(trial.value)
        inside = trial.consistent
    return tuple(ConsistentRange(from_value=run[0], to_value=run[-1]) for run in runs)


def _answer(
    setup: Setup,
    observed: Sequence[Observed],
    baseline: tuple[float, ...],
    assumptions: tuple[Assumption, ...],
) -> Calibration:
    columns = tuple(map(_observed_column, observed, baseline))
    lower = max((c.factor_lower for c in columns if c.factor_lower is not None), default=None)
    upper = min((c.factor_upper for c in columns if c.factor_upper is not None), default=None)
    first = setup.columns[0]
    one_fits = (lower is not None or upper is not None) and (
        lower is None or upper is None or lower < upper
    )
    return Calibration(
        tableau=setup.tableau.name,
        split=setup.splitting.name,
        efolding_s=setup.efolding_s,
        columns=columns,
        contradictions=(),
        agrees=agreement(observed, baseline) == AGREES,
        assumptions=assumptions,
        factor_lower=lower,
        factor_upper=upper,
        safety_factor=SafetyFactor(
            tableau=setup.tableau.name,
            split=setup.splitting.name,
            efolding_s=setup.efolding_s,
            transient_limit=first.advice.transient_limit,
            lower=lower,
            upper=upper,
        )
        if one_fits
        else None,
        verdict="",
        wind_note=next((note for c in setup.columns if (note := wind_note(c))), None),
        caution=CAUTION,
        provenance=provenance(first, f"every limit by its own search, over a slope by two; {SCAN}"),
    )


def _observed_column(one: Observed, step_s: float) -> ObservedColumn:
    bites = 0.0 < step_s < inf
    return ObservedColumn(
        title=one.column.title,
        source=one.column.source,
        column_sha256=one.column.digest,
        held_s=one.held_s,
        failed_s=one.failed_s,
        stable_step_s=step_s if isfinite(step_s) else None,
        factor_lower=max(one.held_s) / step_s if bites and one.held_s else None,
        factor_upper=min(one.failed_s) / step_s if bites and one.failed_s else None,
    )
