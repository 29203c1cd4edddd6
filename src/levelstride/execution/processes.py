"""Work items in processes of their own on this machine, one thread in each."""

import multiprocessing
import os
import signal
import threading
from collections.abc import Iterator
from concurrent.futures import Executor, ProcessPoolExecutor
from contextlib import contextmanager

from levelstride.execution.pool import SturdyPool

THREAD_VARIABLES = (
    "OMP_NUM_THREADS",
    "OPENBLAS_NUM_THREADS",
    "MKL_NUM_THREADS",
    "NUMBA_NUM_THREADS",
)


@contextmanager
def processes(workers: int) -> Iterator[Executor]:
    """Hand out an executor of worker processes.

    They are spawned, never forked: a fork after threads have started may hang. Each holds linear
    algebra and compiled kernels at one thread. A worker that dies is replaced and what it worked
    on is run again. When the block is left by an exception, an interruption from the keyboard
    included, the workers are ended at once; should this process be killed, they end by themselves.

    Parameters
    ----------
    workers : int
        Number of processes.
    """
    before = set(multiprocessing.active_children())
    executor = SturdyPool(workers, lambda: _started_pool(workers))
    try:
        yield executor
    except BaseException:
        executor.shutdown(wait=False, cancel_futures=True)
        # the pool may be starting a worker at this very moment: look until none is left
        while workers_left := set(multiprocessing.active_children()) - before:
            for worker in workers_left:
                worker.terminate()
            for worker in workers_left:
                worker.join()
        raise
    executor.shutdown(wait=True)


def _started_pool(workers: int) -> ProcessPoolExecutor:
    """Make a pool whose processes are being started already."""
    pool = ProcessPoolExecutor(
        workers, mp_context=multiprocessing.get_context("spawn"), initializer=_prepare
    )
    with _deaf_to_the_keyboard():
        for _ in range(workers):
            pool.submit(int)
    return pool


@contextmanager
def _deaf_to_the_keyboard() -> Iterator[None]:
    """Ignore interruptions for the moment in which workers are started.

    Workers inherit it and stay deaf from their first instruction on: their parent ends them. A
    thread other than the main one can only hold the signal back, which workers inherit as well.
    """
    if threading.current_thread() is threading.main_thread():
        before = signal.signal(signal.SIGINT, signal.SIG_IGN)
        try:
            yield
        finally:
            signal.signal(signal.SIGINT, before)
    elif hasattr(signal, "pthread_sigmask"):
        mask = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
        try:
            yield
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, mask)
    else:
        yield


def _prepare() -> None:
    """Make this worker single-threaded and, where it is not yet, deaf to the keyboard."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_follow_the_parent, daemon=True).start()
    for variable in THREAD_VARIABLES:
        os.environ[variable] = "1"
    import scipy.linalg  # noqa: F401  so that its thread pools exist and can be limited
    from threadpoolctl import threadpool_limits

    threadpool_limits(1)


def _follow_the_parent() -> None:
    """End this worker when its parent is gone: killed, it cannot end its workers itself."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)


def thread_counts() -> list[int]:
    """Count the threads of every pool of linear algebra in this process; a work item itself."""
    from threadpoolctl import threadpool_info

    return [pool["num_threads"] for pool in threadpool_info()]
