"""Independent tasks, shared out, whose findings are kept as they end and found again."""

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

from levelstride.studies.gather import Progress
from levelstride.studies.keys import Kept, find_record, keep_record
from levelstride.studies.share_out import share_out


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
    parts : tuple of (str, str)
        Names of fields of the record that are kept by themselves as well, each with its key.
    """

    work: Callable[[Any], Any]
    item: Any
    what: str
    kind: type
    key: str
    parts: tuple[tuple[str, str], ...] = ()


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
    for place, one in share_out(_do, {i: tasks[i] for i in left}, executor):
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


def _keep(kept: Kept, task: Task, record: Any) -> None:
    for name, key in task.parts:
        if kept.find(key) is None:
            keep_record(kept, key, getattr(record, name))
    keep_record(kept, task.key, record)
