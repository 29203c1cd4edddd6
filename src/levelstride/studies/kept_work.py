"""Independent tasks, shared out, whose findings are kept as they end and found again."""

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from typing import Any

from levelstride.studies.gather import Progress
from levelstride.studies.keys import Kept, find_record, keep_record
from levelstride.studies.share_out import share_out


@dataclass(frozen=True, slots=True)
class Part:
    """A field of a finding that other tasks may want again, and the item's field of that name.

    Parameters
    ----------
    name : str
        Name of both fields.
    kind : type
        Kind of record in it.
    key : str
        Key by which it is kept.
    """

    name: str
    kind: type
    key: str


@dataclass(frozen=True, slots=True)
class Task:
    """A pure function, known by its name in every process, with the plain data it works on.

    Parameters
    ----------
    work : callable
        The function.
    item : Any
        What it is called with.
    what : str
        What it is, for people.
    kind : type
        Kind of record that it returns.
    key : str
        Key by which that is kept.
    parts : tuple of Part
        What of the record is kept by itself as well.
    """

    work: Callable[[Any], Any]
    item: Any
    what: str
    kind: type
    key: str
    parts: tuple[Part, ...] = ()


def count_left(tasks: Sequence[Task], kept: Kept | None) -> int:
    """Count the tasks that are still to be done."""
    return sum(kept is None or find_record(kept, t.kind, t.key) is None for t in tasks)


def do_all(
    tasks: Sequence[Task],
    executor: Executor | None = None,
    kept: Kept | None = None,
    progress: Progress | None = None,
) -> list[Any]:
    """Have tasks done, in whatever order they end.

    Parameters
    ----------
    tasks : sequence of Task
        They are begun in this order.
    executor : concurrent.futures.Executor, optional
        Who does the work; this process by default.
    kept : Kept, optional
        Where findings are looked up first, and kept the moment they come in.
    progress : callable, optional
        Called in this thread with the numbers done and of all, and what is being worked on.

    Returns
    -------
    list
        What was found, in the order of the tasks.

    Raises
    ------
    Exception
        The first that a task raises; and InputError if a finding cannot be kept.
    """
    found: dict[int, Any] = {}
    if kept is not None:
        looked_up = ((i, find_record(kept, t.kind, t.key)) for i, t in enumerate(tasks))
        found = {i: record for i, record in looked_up if record is not None}
    left = dict.fromkeys(i for i in range(len(tasks)) if i not in found)

    def tell() -> None:
        if progress is not None:
            on = tasks[next(iter(left))].what if left else ""
            progress(len(tasks) - len(left), len(tasks), on)

    tell()
    for place, one in share_out(_do, {i: _informed(tasks[i], kept) for i in left}, executor):
        if isinstance(one, Exception):
            raise one
        if kept is not None:
            _keep(kept, tasks[place], one)
        found[place] = one
        del left[place]
        tell()
    return [found[i] for i in range(len(tasks))]


def _do(task: Task) -> Any:
    return task.work(task.item)


def _informed(task: Task, kept: Kept | None) -> Task:
    """Give a task the parts that are known already."""
    if kept is None:
        return task
    looked_up = {part.name: find_record(kept, part.kind, part.key) for part in task.parts}
    known = {name: record for name, record in looked_up.items() if record is not None}
    return replace(task, item=replace(task.item, **known)) if known else task


def _keep(kept: Kept, task: Task, record: Any) -> None:
    for part in task.parts:
        if kept.find(part.key) is None:
            keep_record(kept, part.key, getattr(record, part.name))
    keep_record(kept, task.key, record)
