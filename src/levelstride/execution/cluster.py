"""Work items on the workers of a Dask scheduler that is running already."""

import logging
from collections.abc import Callable, Iterator
from concurrent.futures import BrokenExecutor, CancelledError, Executor, Future
from contextlib import contextmanager
from threading import Lock
from typing import Any, Final, ParamSpec, TypeVar

from levelstride import __version__
from levelstride.errors import InputError

P = ParamSpec("P")
T = TypeVar("T")

ANSWER_WITHIN_S: Final = 10.0
"""How long to wait for the scheduler [s]."""

_ONE_AT_A_TIME = Lock()


@contextmanager
def cluster(address: str) -> Iterator[Executor]:
    """Hand out an executor of the workers of a Dask cluster.

    Items of a worker that is lost are run again by others; the scheduler gives up an item over
    which several workers died.

    Parameters
    ----------
    address : str
        Address of the scheduler, for instance ``tcp://scheduler.example:8786``.

    Raises
    ------
    InputError
        If dask and distributed are missing, nothing answers at the address, there are no
        workers, or one of them or the scheduler has another version of this package or none.
    """
    connect = _connector(address)
    with _without_its_log():
        client = _connected(connect, address)
        try:
            _check_workers(client, address)
            yield _ClusterExecutor(client.get_executor(pure=False))
        finally:
            client.close(timeout=ANSWER_WITHIN_S)


@contextmanager
def _without_its_log() -> Iterator[None]:
    """Keep the tracebacks that the client logs about lost connections from the user."""
    logs = [logging.getLogger(f"distributed{name}") for name in ("", ".client", ".core")]
    before = [log.level for log in logs]
    for log in logs:
        log.setLevel(logging.CRITICAL + 1)
    try:
        yield
    finally:
        for log, level in zip(logs, before, strict=True):
            log.setLevel(level)


def _connector(address: str) -> Callable[..., Any]:
    try:
        import distributed
    except ImportError:
        raise InputError(
            f"--cluster {address}: needs dask and distributed, which are not installed here; "
            "install the extra: pip install 'levelstride[cluster]'"
        ) from None
    client: Callable[..., Any] = distributed.Client
    return client


def _connected(connect: Callable[..., Any], address: str) -> Any:
    try:
        return connect(address, timeout=ANSWER_WITHIN_S, set_as_default=False)
    except (OSError, TimeoutError, ValueError) as error:
        reason = str(error).split("\n")[0] or type(error).__name__
        raise InputError(
            f"--cluster {address}: no Dask scheduler answers there ({reason}); start one with "
            "'dask scheduler' and give the address that it prints, as in tcp://scheduler.example:8786"
        ) from None


def _check_workers(client: Any, address: str) -> None:
    versions = client.run(worker_version, on_error="return")
    if not versions:
        raise InputError(
            f"--cluster {address}: this scheduler has no workers; start some with "
            f"'dask worker {address} --nthreads 1'"
        )
    places = {f"the worker {worker}": found for worker, found in versions.items()}
    places["the scheduler"] = _scheduler_version(client)
    problems = [
        f"--cluster {address}: {place} "
        + (f"has levelstride {found}" if isinstance(found, str) else f"cannot be used ({found})")
        + f"; install levelstride {__version__}, as here, into its environment"
        for place, found in places.items()
        if found != __version__
    ]
    if problems:
        raise InputError(*problems)


def _scheduler_version(client: Any) -> str | Exception:
    """The scheduler unpacks work items as well."""
    try:
        return str(client.run_on_scheduler(worker_version))
    except Exception as error:
        return error


def worker_version() -> str:
    """Tell the version of this package where it is called."""
    return __version__


def _alone(fn: Callable[..., Any], args: tuple[Any, ...], named: dict[str, Any]) -> Any:
    """Run an item while this worker runs no other, however many threads it has.

    Two items at once would set each other's number of threads of linear algebra, on which the last
    digits of an answer may depend.
    """
    with _ONE_AT_A_TIME:
        return fn(*args, **named)


class _ClusterExecutor(Executor):
    """The executor of a Dask client, with items alone in their worker and losses told plainly."""

    def __init__(self, inner: Any) -> None:
        self._inner = inner

    def submit(self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs) -> Future[T]:
        """Have a work item done by a worker of the cluster."""
        future: Future[T] = Future()
        inner: Future[T] = self._inner.submit(_alone, fn, args, kwargs)
        future.set_running_or_notify_cancel()
        inner.add_done_callback(lambda ended: _hand_on(ended, future))
        return future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        """Take no more work items."""
        self._inner.shutdown(wait=wait and not cancel_futures)


def _hand_on(ended: "Future[T]", future: "Future[T]") -> None:
    from distributed import KilledWorker

    try:
        future.set_result(ended.result())
    except CancelledError:
        future.set_exception(BrokenExecutor("the connection to the Dask scheduler was lost"))
    except KilledWorker as error:
        future.set_exception(BrokenExecutor(str(error).split("\n")[0]))
    except Exception as error:
        future.set_exception(error)
