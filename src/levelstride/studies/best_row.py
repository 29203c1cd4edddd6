"""What is asked of the best row of an advice only, because it takes as long as many rows."""

from collections.abc import Iterator
from concurrent.futures import Executor, Future
from dataclasses import dataclass, fields, replace
from typing import Final

from levelstride.results.dataset import Advice, AdviceRow, Limit
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.studies.counterfactuals import ask_what_if
from levelstride.studies.keys import Kept, closer_key, find_record, keep_record
from levelstride.studies.methods import tableau_of
from levelstride.studies.plan import Plan, PlannedItem
from levelstride.studies.share_out import outcome
from levelstride.studies.work_item import WorkItem, unpacked

_COMPLETED: Final = ("cause", "stable_step_by_air", "counterfactuals")
"""What a closer look adds to the limit of a row."""


@dataclass(frozen=True, slots=True)
class CloserLook:
    """What a closer look at one row found.

    Parameters
    ----------
    limit : Limit
        Its limit, with counterfactuals and the step of every air state.
    """

    limit: Limit


@on_one_thread
def look_closer(item: WorkItem) -> CloserLook:
    """Complete the limit of a work item.

    Parameters
    ----------
    item : WorkItem
        With the limit that is known.

    Returns
    -------
    CloserLook
        The same in whatever process it is found.
    """
    found = item.limit
    assert found is not None
    columns = unpacked(item.column)
    gradient = found.lowest_slope_gradient
    column = next((c for c in columns if c.lowest_slope_gradient == gradient), columns[0])
    tableau = tableau_of(column, item.tableau)
    asked = column.advice
    tolerance = Tolerance(asked.efolding_s, asked.transient_limit)
    return CloserLook(ask_what_if(column, found, resolve(item.split), tableau, tolerance))


class BestRows:
    """Has the best rows of several advices looked at more closely while other work goes on.

    Parameters
    ----------
    executor : concurrent.futures.Executor or None
        Who does the work; this process if None.
    kept : Kept or None
        Where what was found is looked up, and kept.
    """

    def __init__(self, executor: Executor | None, kept: Kept | None) -> None:
        self._executor, self._kept = executor, kept
        self._begun: dict[int, tuple[Advice, str, Future[CloserLook]]] = {}

    def begin(self, place: int, plan: Plan, advice: Advice) -> None:
        """Have the best row of an advice looked at.

        Parameters
        ----------
        place : int
            Number of the advice.
        plan : Plan
            What was asked.
        advice : Advice
            With its rows.
        """
        future: Future[CloserLook] = Future()
        if advice.best is None:
            self._begun[place] = (advice, "", future)
            return
        row = advice.rows[advice.best]
        planned = _planned(plan, row)
        key = closer_key(planned.of_limit)
        found = None if self._kept is None else find_record(self._kept, CloserLook, key)
        if found is not None:
            future.set_result(found)
        else:
            item = replace(planned.item, current_s=None, limit=_limit_of(row))
            future = self._submitted(item)
        self._begun[place] = (advice, key, future)

    def ended(self, *, wait: bool) -> Iterator[tuple[int, Advice | Exception]]:
        """Hand out the advices whose best row was looked at.

        Parameters
        ----------
        wait : bool
            Whether to wait for those that have not ended.

        Yields
        ------
        place : int
        advice : Advice or Exception
            Completed, or what went wrong.
        """
        for place, (advice, key, future) in list(self._begun.items()):
            if advice.best is None:
                del self._begun[place]
                yield place, advice
            elif wait or future.done():
                del self._begun[place]
                found = outcome(future)
                if isinstance(found, Exception):
                    yield place, found
                    continue
                if self._kept is not None and self._kept.find(key) is None:
                    keep_record(self._kept, key, found)
                yield place, _completed(advice, advice.best, found)

    def _submitted(self, item: WorkItem) -> "Future[CloserLook]":
        if self._executor is not None:
            return self._executor.submit(look_closer, item)
        future: Future[CloserLook] = Future()
        try:
            future.set_result(look_closer(item))
        except Exception as error:
            future.set_exception(error)
        return future


def _planned(plan: Plan, row: AdviceRow) -> PlannedItem:
    """The item of a row: the items of the pairs come first, and in their order."""
    names = [(tableau.name, splitting.name) for tableau, splitting in plan.pairs]
    return plan.items[names.index((row.tableau, row.split))]


def _limit_of(row: AdviceRow) -> Limit:
    return Limit(**{field.name: getattr(row, field.name) for field in fields(Limit)})


def _completed(advice: Advice, best: int, found: CloserLook) -> Advice:
    asked = {name: getattr(found.limit, name) for name in _COMPLETED}
    rows = list(advice.rows)
    rows[best] = replace(rows[best], **asked)
    return replace(advice, rows=tuple(rows))
