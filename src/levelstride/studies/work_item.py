"""One tableau and one splitting on one column: the unit of work that executors share out."""

import pickle
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from math import inf

from levelstride.accuracy.by_kind import column_waves
from levelstride.accuracy.judge import Judgement, StepJudge
from levelstride.column.column import Column
from levelstride.column.knobs import lowest_slope_gradients
from levelstride.errors import CalculationError
from levelstride.results.dataset import Limit
from levelstride.results.wording import limit_reason, number, percent
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting, resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem
from levelstride.studies.advised_step import Choice, StepCheck, choose_step
from levelstride.studies.limit import limit
from levelstride.studies.methods import tableau_of


@dataclass(frozen=True, slots=True)
class WorkItem:
    """What one worker needs to know, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled; each process unpacks it once.
    tableau : str
        Name.
    split : str or mapping
        Name, or term to treatment.
    current_s : float or None
        A step to judge besides [s].
    limit : Limit or None
        The limit, if it is known already.
    calibrated : float or None
        Share of the stable step that takes the place of the column's ``safety`` [1].
    certify : bool
        Whether the limit is certified at every sampled wave.
    """

    column: bytes
    tableau: str
    split: str | Mapping[str, str]
    current_s: float | None = None
    limit: Limit | None = None
    calibrated: float | None = None
    certify: bool = False


@dataclass(frozen=True, slots=True)
class Finding:
    """What was found for one work item.

    Parameters
    ----------
    limit : Limit
        The limit, the smaller of both slope gradients over a slope.
    choice : Choice
        The step to advise.
    current : StepCheck or None
        What the step to judge does.
    current_stable : bool
        Whether no sampled wave grows at that very step.
    """

    limit: Limit
    choice: Choice
    current: StepCheck | None = None
    current_stable: bool = False


@on_one_thread
def carry_out(item: WorkItem) -> Finding:
    """Find limit and step of one work item.

    Parameters
    ----------
    item : WorkItem
        The item.

    Returns
    -------
    Finding
        The same in whatever process it is found.
    """
    columns = unpacked(item.column)
    splitting = resolve(item.split)
    tableau = tableau_of(columns[0], item.tableau)
    asked = columns[0].advice
    found = item.limit or _find_limit(item, columns)
    checker = StepChecker(columns, splitting, tableau)
    safety = asked.safety if item.calibrated is None else item.calibrated
    choice = choose_step(found, safety=safety, intervals_s=asked.divides_s, check=checker.examine)
    if item.calibrated is not None:
        choice = _as_calibrated(choice, found, item.calibrated)
    if item.current_s is None:
        return Finding(found, choice)
    current = checker.examine(item.current_s)
    return Finding(found, choice, current, checker.stable(item.current_s))


def _as_calibrated(choice: Choice, found: Limit, share: float) -> Choice:
    """Say that a step is bound by a measured share of the limit, where it is."""
    if choice.step_s is None or found.unbounded or choice.binding != limit_reason(found):
        return choice
    return replace(
        choice, binding=f"{choice.binding}; at most {percent(share, 3)} of it, as calibrated"
    )


def _find_limit(item: WorkItem, columns: tuple[Column, ...]) -> Limit:
    try:
        return smaller(
            [
                limit(
                    column,
                    tableau=item.tableau,
                    split=item.split,
                    certify=item.certify,
                    what_if=False,
                )
                for column in columns
            ]
        )
    except CalculationError as error:
        return _no_limit(item, str(error))


def smaller(limits: list[Limit]) -> Limit:
    """Take the limit with the smallest stable step: no stable step at all, then the shortest."""

    def reach(one: Limit) -> float:
        if one.unbounded:
            return inf
        return one.stable_step_s or 0.0

    return min(limits, key=reach)


def _no_limit(item: WorkItem, reason: str) -> Limit:
    """Stand in for a limit that could not be found, so that one pair does not stop the others."""
    return Limit(
        tableau=item.tableau,
        split=resolve(item.split).name,
        stable_step_s=None,
        unbounded=False,
        scanned_to_s=0.0,
        criterion=reason,
    )


@lru_cache(maxsize=4)
def unpacked(packed: bytes) -> tuple[Column, ...]:
    """Unpack a column; over a slope, once for each treatment of the lowest slope gradient."""
    return lowest_slope_gradients(pickle.loads(packed))


class StepChecker:
    """Examines steps of one tableau and splitting at every sampled wave."""

    def __init__(
        self, columns: tuple[Column, ...], splitting: Splitting, tableau: TimeScheme
    ) -> None:
        self._asked = columns[0].advice
        self._tolerance = Tolerance(self._asked.efolding_s, self._asked.transient_limit)
        waves = [wave for column in columns for wave in column_waves(column)]
        self._judge = StepJudge(waves, splitting, tableau, self._asked)
        self._problems = [
            WaveProblem(column, air, splitting, tableau, float(kappa))
            for column in columns
            for air in column.airs
            for kappa in sampled_wavenumbers(column.horizontal)
        ]

    def examine(self, step_s: float) -> StepCheck:
        """Say what speaks against a step: accuracy first, stability at that very step then."""
        try:
            found = self._judge.at(step_s)
        except CalculationError as error:
            return StepCheck(str(error))
        failure = None if found.accurate else self._inaccurate(step_s, found)
        if failure is None and not self.stable(step_s):
            failure = f"stability: grows at {number(step_s)} s itself, in a narrow window"
        return StepCheck(
            failure, found.frequency_error, found.amplitude_change_per_period, found.ambiguous
        )

    def stable(self, step_s: float) -> bool:
        """Whether no sampled wave grows more than is tolerated at this very step."""
        for problem in self._problems:
            if not problem.stable(step_s, self._tolerance):
                self._problems.remove(problem)
                self._problems.insert(0, problem)
                return False
        return True

    def _inaccurate(self, step_s: float, judged: Judgement) -> str:
        """Say which of both errors is further beyond its limit."""
        found = []
        turned, changed = judged.frequency_error, judged.amplitude_change_per_period
        if turned is not None:
            found.append(("frequency", turned, self._asked.frequency_error))
        if changed is not None:
            found.append(("amplitude", changed, self._asked.amplitude_loss_per_period))
        what, value, allowed = max(found, key=lambda one: abs(one[1]) / max(one[2], 1e-300))
        per_period = " per period" if what == "amplitude" else ""
        return (
            f"{what} of gravity waves: {percent(value)}{per_period} at {number(step_s)} s, "
            f"{percent(allowed)} allowed"
        )
