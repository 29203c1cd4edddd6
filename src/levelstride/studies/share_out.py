"""Independent items of work, shared out among whoever does the work."""

from collections.abc import Callable, Iterator, Mapping
from concurrent.futures import BrokenExecutor, Executor, Future
from queue import SimpleQueue
from typing import Final, TypeVar

from levelstride.errors import CalculationError

Item = TypeVar("Item")
Found = TypeVar("Found")

AHEAD: Final = 2000
"""Number of items handed to an executor before the first of them has ended, at most."""


def share_out(
    work: Callable[[Item], Found], items: Mapping[int, Item], executor: Executor | None = None
) -> Iterator[tuple[int, Found | Exception]]:
    """Have items done.

    Parameters
    ----------
    work : callable
        A pure function of one item, known by its name in every process.
    items : mapping of int to item
        Plain data by place; they are begun in this order.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default.

    Yields
    ------
    place : int
        Place of an item, as they end.
    found : Found or Exception
        What was found, or why not.
    """
    if executor is None:
        for place, item in items.items():
            yield place, _done(work, item)
        return
    ended: SimpleQueue[Future[Found]] = SimpleQueue()
    begun: dict[Future[Found], int] = {}
    for place, item in items.items():
        future = executor.submit(work, item)
        begun[future] = place
        future.add_done_callback(ended.put)
        while not ended.empty() or len(begun) >= AHEAD:
            future = ended.get()
            found = outcome(future)
            yield begun.pop(future), found
    while begun:
        future = ended.get()
        found = outcome(future)
        yield begun.pop(future), found


def _done(work: Callable[[Item], Found], item: Item) -> Found | Exception:
    try:
        return work(item)
    except Exception as error:
        return error


def outcome(future: "Future[Found]") -> Found | Exception:
    """Wait for what was found, or for what went wrong."""
    try:
        return future.result()
    except BrokenExecutor as error:
        return CalculationError(
            f"a worker ended before its work was done ({error}); if memory is short, "
            "use fewer workers"
        )
    except Exception as error:
        return error
