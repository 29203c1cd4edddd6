"""An executor of worker processes that outlives them: what a dead worker held is run again."""

from collections import deque
from collections.abc import Callable
from concurrent.futures import BrokenExecutor, Executor, Future, ProcessPoolExecutor
from dataclasses import dataclass, field
from queue import SimpleQueue
from threading import Thread
from typing import Any, Final, Literal, ParamSpec, TypeAlias, TypeVar

P = ParamSpec("P")
T = TypeVar("T")

TRIES: Final = 3
"""How often an item is tried at most if workers die over it."""

BREAKS: Final = 10
"""How often the pool may break without an item having ended until everything is given up."""


@dataclass(eq=False)
class _Task:
    function: Callable[..., Any]
    arguments: tuple[Any, ...]
    named: dict[str, Any]
    future: "Future[Any]" = field(default_factory=Future)
    tries: int = 0


_Event: TypeAlias = tuple[Literal["new", "ended", "close", "drop"], _Task | None]


class SturdyPool(Executor):
    """A pool of processes that is built again when a worker dies.

    A worker may be killed by somebody or by the system for want of memory. What was being worked
    on then is tried again when everything else is done, one item at a time, so that an item over
    which workers die takes no other with it; after ``TRIES`` tries it fails with BrokenExecutor,
    and only it. Where the pool breaks ``BREAKS`` times in a row, no worker can live here, and all
    that is left fails.

    Parameters
    ----------
    workers : int
        Number of processes.
    make_pool : callable
        Makes a pool of that many processes.
    """

    def __init__(self, workers: int, make_pool: Callable[[], ProcessPoolExecutor]) -> None:
        self._workers, self._make_pool = workers, make_pool
        self._pool: ProcessPoolExecutor | None = make_pool()
        self._waiting: deque[_Task] = deque()
        self._suspects: deque[_Task] = deque()
        self._running: dict[_Task, tuple[Future[Any], ProcessPoolExecutor]] = {}
        self._events: SimpleQueue[_Event] = SimpleQueue()
        self._breaks = 0
        self._closed = False
        # One thread owns pool and queues; everybody else only tells it what happened.
        self._thread = Thread(target=self._serve, name="levelstride-pool", daemon=True)
        self._thread.start()

    def submit(self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs) -> Future[T]:
        """Have a work item done by a worker.

        Parameters
        ----------
        fn : callable
            The work item, importable by workers.
        *args, **kwargs
            What it is called with.

        Returns
        -------
        Future
            With the result, the error of the item, or BrokenExecutor.

        Raises
        ------
        RuntimeError
            After ``shutdown``.
        """
        if self._closed:
            raise RuntimeError("this executor was shut down")
        task = _Task(fn, args, kwargs)
        self._events.put(("new", task))
        return task.future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        """Take no more work items; with ``cancel_futures`` leave those that have not ended.

        Parameters
        ----------
        wait : bool
            Whether to return only when the workers are gone.
        cancel_futures : bool
            Whether to begin no more items.
        """
        if not self._closed:
            self._closed = True
            self._events.put(("drop" if cancel_futures else "close", None))
        if wait or cancel_futures:
            self._thread.join()
        if self._pool is not None:
            self._pool.shutdown(wait=wait, cancel_futures=cancel_futures)

    def _serve(self) -> None:
        closing = False
        while not (closing and not (self._waiting or self._suspects or self._running)):
            event, task = self._events.get()
            if event == "drop":
                for left in (*self._waiting, *self._suspects):
                    left.future.cancel()
                return
            if event == "close":
                closing = True
            elif task is not None and event == "new":
                self._waiting.append(task)
            elif task is not None:
                self._end(task)
            self._fill()

    def _fill(self) -> None:
        """Begin as many items as there are workers, suspects alone and last."""
        while self._waiting and len(self._running) < self._workers:
            self._begin(self._waiting.popleft())
        while self._suspects and not self._waiting and not self._running:
            self._begin(self._suspects.popleft())

    def _begin(self, task: _Task) -> None:
        if not task.future.running() and not task.future.set_running_or_notify_cancel():
            return
        if self._pool is None:
            self._pool = self._make_pool()
        pool = self._pool
        try:
            inner = pool.submit(task.function, *task.arguments, **task.named)
        except BrokenExecutor as error:
            # A worker died before this item was begun.
            self._try_again(task, pool, error)
            return
        self._running[task] = inner, pool
        inner.add_done_callback(lambda _: self._events.put(("ended", task)))

    def _end(self, task: _Task) -> None:
        inner, pool = self._running.pop(task)
        error = inner.exception()
        if isinstance(error, BrokenExecutor):
            self._try_again(task, pool, error)
            return
        self._breaks = 0
        if error is None:
            task.future.set_result(inner.result())
        else:
            task.future.set_exception(error)

    def _try_again(self, task: _Task, pool: ProcessPoolExecutor, error: BrokenExecutor) -> None:
        if self._pool is pool:
            self._pool = None
            self._breaks += 1
        task.tries += 1
        if task.tries < TRIES:
            self._suspects.append(task)
        else:
            _give_up(task, f"workers died over it {TRIES} times: {error}")
        if self._breaks >= BREAKS:
            for left in (*self._waiting, *self._suspects):
                _give_up(left, f"workers keep dying: {error}")
            self._waiting.clear()
            self._suspects.clear()


def _give_up(task: _Task, why: str) -> None:
    if task.future.running() or task.future.set_running_or_notify_cancel():
        task.future.set_exception(BrokenExecutor(why))
