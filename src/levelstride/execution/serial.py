"""Work items one after the other in this process."""

from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future
from contextlib import contextmanager
from typing import Any, ParamSpec, TypeVar

P = ParamSpec("P")
T = TypeVar("T")


class SerialExecutor(Executor):
    """An executor that has finished a work item before ``submit`` returns."""

    def __init__(self) -> None:
        self._closed = False

    def submit(
        self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs
    ) -> Future[T]:  # fmt: skip
        """Run a work item.

        Parameters
        ----------
        fn : callable
            The work item.
        *args, **kwargs
            What it is called with.

        Returns
        -------
        Future
            Done, with the result or the exception of the item. What is no error, such as an
            interruption from the keyboard, is raised here.

        Raises
        ------
        RuntimeError
            After ``shutdown``.
        """
        if self._closed:
            raise RuntimeError("this executor was shut down")
        future: Future[T] = Future()
        future.set_running_or_notify_cancel()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:
            future.set_exception(error)
        return future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        """Take no more work items."""
        self._closed = True


@contextmanager
def serial(**_: Any) -> Iterator[Executor]:
    """Hand out an executor that works in this process.

    Examples
    --------
    >>> with serial() as executor:
    ...     executor.submit(pow, 2, 10).result()
    1024
    """
    with SerialExecutor() as executor:
        yield executor
