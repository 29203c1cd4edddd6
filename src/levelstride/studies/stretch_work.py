"""The searches that a stretch needs, shared out in two rounds."""

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Final

from levelstride.errors import CalculationError
from levelstride.splitting.splitting import resolve
from levelstride.studies.gather import Progress
from levelstride.studies.share_out import share_out
from levelstride.studies.stretch_asides import LayersItem, MendItem, layer_costs, mended
from levelstride.studies.stretch_between import (
    BetweenItem,
    LossItem,
    changes,
    lost_between,
    taken_over_between,
)
from levelstride.studies.stretch_point import (
    Measured,
    PointItem,
    RunItem,
    StretchItem,
    follow,
    measure,
)
from levelstride.studies.stretch_rows import Draft, Extras

RUN: Final = 12
"""Members that are searched one after the other; between runs the work can be shared."""


@dataclass(frozen=True, slots=True)
class _Task:
    """A pure function, known by its name in every process, and the plain data it works on."""

    work: Callable[[Any], Any]
    item: Any
    of: StretchItem

    @property
    def members(self) -> int:
        """How many members of the curve it tells of, or 1 where it tells of anything else."""
        return len(self.item.coordinates) if isinstance(self.item, RunItem) else 1


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
        """Measure every member for every row: the user's own set first, then outward from it."""
        at, rows = coordinates.index(own), range(len(self._of))
        self._total = len(rows) * len(coordinates)
        first = self._all([_Task(measure, PointItem(of, own, advise), of) for of in self._of])
        runs = [(run, run[0] in (at - 1, at + 1)) for run in _runs(at, len(coordinates))]
        tasks, places = [], []
        for i in rows:
            for run, beside in runs:
                near = first[i].point if beside else None
                item = RunItem(self._of[i], tuple(coordinates[k] for k in run), near)
                tasks.append(_Task(follow, item, self._of[i]))
                places.append((i, run))
        found = {(i, at): first[i] for i in rows}
        for (i, run), measured in zip(places, self._all(tasks), strict=True):
            found |= {(i, k): one for k, one in zip(run, measured, strict=True)}
        return [[found[i, k] for k in range(len(coordinates))] for i in rows]

    def extras(
        self, drafts: Sequence[Draft], spacing_m: float, wanted: Wanted
    ) -> tuple[Extras, ...]:
        """Bracket where targets are lost, find what takes over, and whatever else is wanted."""
        rows: list[int] = []
        tasks: list[_Task] = []
        for i, (of, draft) in enumerate(zip(self._of, drafts, strict=True)):
            found = _tasks(of, draft, spacing_m, wanted)
            rows += [i] * len(found)
            tasks += found
        self._total += len(tasks)
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
            self._done += tasks[place].members
            tell()
        return [found[i] for i in range(len(tasks))]


def _runs(own: int, count: int) -> list[range]:
    """Cut the places on either side of the user's own set into runs that lead away from it."""
    thinner = [range(k, min(k + RUN, count)) for k in range(own + 1, count, RUN)]
    thicker = [range(k, max(k - RUN, -1), -1) for k in range(own - 1, -1, -RUN)]
    return thicker + thinner


def _do(task: _Task) -> Any:
    return task.work(task.item)


def _tasks(of: StretchItem, draft: Draft, spacing_m: float, wanted: Wanted) -> list[_Task]:
    tasks, target_s = [], draft.target[0]
    if wanted.mend and target_s is not None:
        item = MendItem(of, target_s, wanted.keep_lowest, wanted.largest_ratio)
        tasks.append(_Task(mended, item, of))
    if wanted.layers:
        tasks.append(_Task(layer_costs, LayersItem(of), of))
    if draft.loss is not None and target_s is not None:
        tasks.append(_Task(lost_between, LossItem(of, *draft.loss, target_s), of))
    for before, after in pairwise(draft.curve):
        if changes(before.binds, after.binds, spacing_m):
            tasks.append(_Task(taken_over_between, BetweenItem(of, before, after), of))
    return tasks
