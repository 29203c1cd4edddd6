"""What is asked of the best row of an advice only, because it takes as long as many rows."""

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor, Future
from dataclasses import dataclass, fields, replace
from typing import Any, Final, TypeAlias

from levelstride.errors import CalculationError
from levelstride.results.dataset import Advice, AdviceRow, Limit
from levelstride.results.headroom import Room
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.tolerance import Tolerance
from levelstride.studies.counterfactuals import ask_what_if
from levelstride.studies.headroom import RoomItem, assembled, find_room, no_room
from levelstride.studies.keys import Kept, closer_key, find_record, keep_record, room_key
from levelstride.studies.methods import tableau_of
from levelstride.studies.plan import Plan, PlannedItem
from levelstride.studies.quantities import QUANTITIES
from levelstride.studies.share_out import outcome
from levelstride.studies.work_item import WorkItem, unpacked

_COMPLETED: Final = ("cause", "stable_step_by_air", "counterfactuals")
"""What a closer look adds to the limit of a row."""

PARTS: Final = 1 + len(QUANTITIES)
"""Parts in which a best row is looked at: its limit, and its headroom by quantity."""

Telling: TypeAlias = Callable[[int, str], None]
"""Told how many more parts have ended, and what is being worked on."""


@dataclass(frozen=True, slots=True)
class CloserLook:
    """What a closer look at the limit of one row found.

    Parameters
    ----------
    limit : Limit
        The limit, with counterfactuals and the step of every air state.
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


@dataclass(frozen=True, slots=True)
class Part:
    """One part of the work on a best row.

    Parameters
    ----------
    work : callable
        A pure function, known by its name in every process.
    item : Any
        The plain data it works on.
    kind : type
        The record that it finds.
    key : str
        Under which this is kept.
    what : str
        What it is, for people.
    """

    work: Callable[[Any], Any]
    item: Any
    kind: type[Any]
    key: str
    what: str


def parts_of(plan: Plan, advice: Advice) -> list[Part]:
    """List what is to be done for the best row of an advice; nothing without one."""
    if advice.best is None:
        return []
    row = advice.rows[advice.best]
    planned = _planned(plan, row)
    step_s = row.advised_step_s
    assert step_s is not None
    of, item = planned.of_limit, planned.item
    known = replace(item, current_s=None, limit=_limit_of(row))
    parts = [Part(look_closer, known, CloserLook, closer_key(of), f"{planned.what}: what if")]
    for quantity in QUANTITIES:
        wanted = RoomItem(item.column, item.tableau, item.split, step_s, quantity)
        key = room_key(of, step_s, quantity)
        what = f"{planned.what}: headroom of {quantity.partition('_m')[0].replace('_', ' ')}"
        parts.append(Part(find_room, wanted, Room, key, what))
    return parts


@dataclass(slots=True, eq=False)
class _Row:
    """A best row that is being looked at."""

    advice: Advice
    parts: list[Part]
    futures: "list[Future[Any]]"
    ended: int = 0


class BestRows:
    """Has the best rows of several advices looked at more closely while other work goes on.

    Parameters
    ----------
    executor : concurrent.futures.Executor or None
        Who does the work; this process if None.
    kept : Kept or None
        Where what was found is looked up, and kept the moment it comes in.
    tell : callable, optional
        Told of progress.
    """

    def __init__(
        self, executor: Executor | None, kept: Kept | None, tell: Telling = lambda *_: None
    ) -> None:
        self._executor, self._kept, self._tell = executor, kept, tell
        self._begun: dict[int, _Row] = {}

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
        row = _Row(advice, parts_of(plan, advice), [])
        self._begun[place] = row
        self._tell(PARTS - len(row.parts), "")
        for part in row.parts:
            row.futures.append(self._submitted(part))
            self._take_in(row)

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
        for place, row in list(self._begun.items()):
            self._take_in(row, wait=wait)
            if row.ended == len(row.parts):
                del self._begun[place]
                yield place, _completed(row)

    def _take_in(self, row: _Row, *, wait: bool = False) -> None:
        """Keep what has come in, in the order of the parts, and tell of it."""
        while row.ended < len(row.futures):
            part, future = row.parts[row.ended], row.futures[row.ended]
            if not wait and not future.done():
                return
            self._tell(0, part.what)
            found = outcome(future)
            new = self._kept is not None and self._kept.find(part.key) is None
            if new and self._kept is not None and isinstance(found, part.kind):
                keep_record(self._kept, part.key, found)
            row.ended += 1
            self._tell(1, "")

    def _submitted(self, part: Part) -> "Future[Any]":
        future: Future[Any] = Future()
        found = None if self._kept is None else find_record(self._kept, part.kind, part.key)
        if found is not None:
            future.set_result(found)
            return future
        self._tell(0, part.what)
        if self._executor is not None:
            return self._executor.submit(part.work, part.item)
        try:
            future.set_result(part.work(part.item))
        except Exception as error:
            future.set_exception(error)
        return future


def count_left(parts: Sequence[Part], kept: Kept) -> int:
    """Count the parts that are still to be done."""
    return sum(find_record(kept, part.kind, part.key) is None for part in parts)


def _planned(plan: Plan, row: AdviceRow) -> PlannedItem:
    """The item of a row: the items of the pairs come first, and in their order."""
    names = [(tableau.name, splitting.name) for tableau, splitting in plan.pairs]
    return plan.items[names.index((row.tableau, row.split))]


def _limit_of(row: AdviceRow) -> Limit:
    return Limit(**{field.name: getattr(row, field.name) for field in fields(Limit)})


def _completed(row: _Row) -> Advice | Exception:
    """Put what was found into the best row; a room that could not be found stops nothing."""
    advice = row.advice
    if advice.best is None:
        return advice
    best = advice.rows[advice.best]
    changes: dict[str, Any] = {}
    rooms = []
    for part, future in zip(row.parts, row.futures, strict=True):
        found = outcome(future)
        if isinstance(found, CloserLook):
            changes = {name: getattr(found.limit, name) for name in _COMPLETED}
        elif isinstance(found, Room):
            rooms.append(found)
        elif isinstance(found, CalculationError) and part.kind is Room:
            rooms.append(no_room(part.item, found))
        else:
            return found
    item = row.parts[-1].item
    column = unpacked(item.column)[0]
    changes["headroom"] = assembled(
        column, item.tableau, item.split, item.step_s, None, tuple(rooms)
    )
    rows = list(advice.rows)
    rows[advice.best] = replace(best, **changes)
    return replace(advice, rows=tuple(rows))
