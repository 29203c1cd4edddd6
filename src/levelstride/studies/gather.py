"""Have work items done by whoever does them, and keep what is found as it is found."""

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import replace
from typing import TypeAlias

from levelstride.studies.keys import Kept, find_finding, find_limit, keep_finding
from levelstride.studies.plan import PlannedItem
from levelstride.studies.share_out import share_out
from levelstride.studies.work_item import Finding, WorkItem, carry_out

Progress: TypeAlias = Callable[[int, int, str], None]
"""Told how many items are done, of how many, and what is being worked on."""


def gather(
    items: Sequence[PlannedItem],
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> Iterator[tuple[int, Finding | Exception]]:
    """Have all items done.

    Parameters
    ----------
    items : sequence of PlannedItem
        The items; they are begun in this order.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default.
    kept : Kept, optional
        Where findings are looked up first, and kept the moment they come in.
    progress : callable, optional
        Called in this thread, first when nothing but what was kept is done.

    Yields
    ------
    place : int
        Place among the items; those found among the kept ones come first, the others as they end.
    found : Finding or Exception
        What was found, or why not.

    Raises
    ------
    InputError
        If a finding cannot be kept.
    """
    before = {} if kept is None else known(items, kept)
    left = dict.fromkeys(i for i in range(len(items)) if i not in before)

    def tell() -> None:
        if progress is not None:
            on = items[next(iter(left))].what if left else ""
            progress(len(items) - len(left), len(items), on)

    tell()
    yield from before.items()
    wanted = {i: _item(items[i], kept) for i in left}
    for place, found in share_out(carry_out, wanted, executor):
        if kept is not None and isinstance(found, Finding):
            keep_finding(kept, found, items[place].key, items[place].of_limit)
        del left[place]
        tell()
        yield place, found


def count_kept(items: Sequence[PlannedItem], kept: Kept) -> int:
    """Count the items that need not be done again."""
    return len(known(items, kept))


def known(items: Sequence[PlannedItem], kept: Kept) -> dict[int, Finding]:
    """Look up the items that need not be done again, by place."""
    found = {i: find_finding(kept, planned.key) for i, planned in enumerate(items)}
    return {i: finding for i, finding in found.items() if finding is not None}


def _item(planned: PlannedItem, kept: Kept | None) -> WorkItem:
    limit = None if kept is None else find_limit(kept, planned.of_limit)
    return planned.item if limit is None else replace(planned.item, limit=limit)
