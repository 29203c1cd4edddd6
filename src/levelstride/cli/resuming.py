"""A calculation that can be broken off and taken up again by the same command."""

from collections.abc import Sequence
from contextlib import ExitStack
from pathlib import Path
from typing import TYPE_CHECKING, Self

from levelstride.cli.console import progress

if TYPE_CHECKING:
    from levelstride.studies.kept_work import Task
    from levelstride.studies.plan import Plan


class Resumable:
    """Keeps finished items beside the results, shows progress, and says how to go on.

    Parameters
    ----------
    out : Path
        Folder of the results.
    """

    def __init__(self, out: Path) -> None:
        from levelstride.results.kept import KeptItems

        self.kept: KeptItems = KeptItems(out)
        self._done = self._total = 0
        self._stack = ExitStack()

    def __enter__(self) -> Self:
        self._report = self._stack.enter_context(progress("starting"))
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, _: object
    ) -> None:
        self._stack.close()
        if error is None or not self._total:
            return
        if self._done:
            error.add_note(
                f"{self._done} of {self._total} parts of the work are kept in "
                f"{self.kept.folder}; the same command goes on from there"
            )
        else:
            error.add_note(f"none of {self._total} parts of the work was finished yet")

    def left(self, plans: "Sequence[Plan]") -> int:
        """Count the parts of plans that are still to be done."""
        from levelstride.studies.advise import count_parts, count_parts_left

        self._total = count_parts(plans)
        left = sum(count_parts_left(plan, self.kept) for plan in plans)
        self._done = self._total - left
        return left

    def tasks_left(self, tasks: "Sequence[Task]") -> int:
        """Count the tasks that are still to be done."""
        from levelstride.studies.kept_work import count_left

        left = count_left(tasks, self.kept)
        self._done, self._total = len(tasks) - left, len(tasks)
        return left

    def progress(self, done: int, total: int, on: str) -> None:
        """Take note of progress and show it."""
        self._done, self._total = done, total
        self._report(done, total, on)
