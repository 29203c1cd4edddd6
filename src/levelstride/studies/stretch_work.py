"""The searches that a stretch needs, shared out in two rounds."""

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from levelstride.errors import CalculationError
from levelstride.splitting.splitting import resolve
from levelstride.studies.gather import Progress
from levelstride.studies.share_out import share_out
from levelstride.studies.stretch_asides import LayersItem, MendItem, layer_costs, mended
from levelstride.studies.stretch_between import (
    BetweenItem,
    changes,
    lost_between,
    taken_over_between,
)
from levelstride.studies.stretch_point import Measured, PointItem, StretchItem, measure
from levelstride.studies.stretch_rows import Draft, Extras


@dataclass(frozen=True, slots=True)
class _Task:
    """A pure function, known by its name in every process, and the plain data it works on."""

    work: Callable[[Any], Any]
    item: Any
    of: StretchItem


@dataclass(frozen=True, slots=True)
class Wanted:
    """What is asked for beyond the curves.

    Parameters
    ----------
    layers, mend : bool
        Whether to find which layers cost the step, and a level set that carries the target.
    keep_lowest : bool
        Whether mending keeps the lowest layer.
    largest_ratio : float or None
        Largest ratio of neighbouring thicknesses that mending allows [1].
    """

    layers: bool = False
    mend: bool = False
    keep_lowest: bool = False
    largest_ratio: float | None = None


class StretchWork:
    """Has searches done, and tells of progress.

    Parameters
    ----------
    of : sequence of StretchItem
        One per row.
    executor, progress
        As for ``stretch``.
    """

    def __init__(
        self, of: Sequence[StretchItem], executor: Executor | None, progress: Progress | None
    ) -> None:
        self._of, self._executor, self._progress = of, executor, progress
        self._done = self._total = 0

    def points(
        self, coordinates: Sequence[float], own: float, *, advise: bool
    ) -> list[list[Measured]]:
        """Measure every member for every row; the user's own set first."""
        places = [(i, k) for i in range(len(self._of)) for k in range(len(coordinates))]
        order = sorted(places, key=lambda place: coordinates[place[1]] != own)
        tasks = []
        for i, k in order:
            item = PointItem(self._of[i], coordinates[k], advise and coordinates[k] == own)
            tasks.append(_Task(measure, item, self._of[i]))
        found = dict(zip(order, self._all(tasks), strict=True))
        return [[found[i, k] for k in range(len(coordinates))] for i in range(len(self._of))]

    def extras(
        self, drafts: Sequence[Draft], spacing_m: float, wanted: Wanted
    ) -> tuple[Extras, ...]:
        """Bracket where targets are lost, find what takes over, and whatever else is wanted."""
        rows, tasks = [], []
        for i, (of, draft) in enumerate(zip(self._of, drafts, strict=True)):
            found = _tasks(of, draft, spacing_m, wanted)
            rows += [i] * len(found)
            tasks += found
        extras = tuple(Extras() for _ in drafts)
        for i, task, found in zip(rows, tasks, self._all(tasks), strict=True):
            if task.work is lost_between:
                extras[i].lost = found
            elif task.work is taken_over_between:
                extras[i].crossings += found
            elif task.work is layer_costs:
                extras[i].layer_costs = found
            else:
                extras[i].mended = found
        return extras

    def _all(self, tasks: Sequence[_Task]) -> list[Any]:
        """Do tasks, in whatever order they end."""
        self._total += len(tasks)
        left = dict.fromkeys(range(len(tasks)))
        found: dict[int, Any] = {}

        def tell() -> None:
            if self._progress is not None:
                of = tasks[next(iter(left))].of if left else None
                what = "" if of is None else f"{of.tableau} with {resolve(of.split).name}"
                self._progress(self._done, self._total, what)

        tell()
        for place, one in share_out(_do, dict(enumerate(tasks)), self._executor):
            stands = isinstance(tasks[place].item, LayersItem | MendItem)
            if isinstance(one, Exception) and not (stands and isinstance(one, CalculationError)):
                raise one
            found[place] = one
            del left[place]
            self._done += 1
            tell()
        return [found[i] for i in range(len(tasks))]


def _do(task: _Task) -> Any:
    return task.work(task.item)


def _tasks(of: StretchItem, draft: Draft, spacing_m: float, wanted: Wanted) -> list[_Task]:
    tasks, target_s = [], draft.target[0]
    if wanted.mend and target_s is not None:
        item = MendItem(of, target_s, wanted.keep_lowest, wanted.largest_ratio)
        tasks.append(_Task(mended, item, of))
    if wanted.layers:
        tasks.append(_Task(layer_costs, LayersItem(of), of))
    if draft.loss is not None:
        tasks.append(_Task(lost_between, BetweenItem(of, *draft.loss, target_s), of))
    for before, after in pairwise(draft.curve):
        if changes(before.binds, after.binds, spacing_m):
            tasks.append(_Task(taken_over_between, BetweenItem(of, before, after), of))
    return tasks
