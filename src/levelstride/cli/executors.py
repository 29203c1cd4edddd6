"""Who does the work: this process, processes of this machine, or a cluster."""

import os
from contextlib import AbstractContextManager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from concurrent.futures import Executor

MOST_PROCESSES = 61
"""Most that every system can wait for."""


def usable_workers(wanted: int | None, cluster: str | None) -> int:
    """Find the number of processes: one per core by default.

    Parameters
    ----------
    wanted : int or None
        What ``--workers`` says.
    cluster : str or None
        What ``--cluster`` says.

    Returns
    -------
    int
        At least 1.

    Raises
    ------
    InputError
        If both are given, or the number is not positive.
    """
    from levelstride.errors import InputError

    if wanted is not None and cluster is not None:
        raise InputError("--workers and --cluster: the cluster has workers of its own; give one")
    if wanted is None:
        usable = getattr(os, "sched_getaffinity", None)
        wanted = len(usable(0)) if usable else os.cpu_count() or 1
    if wanted < 1:
        raise InputError(f"--workers {wanted}: must be at least 1")
    return min(wanted, MOST_PROCESSES)


def executor_for(
    workers: int | None, cluster: str | None, work: int
) -> "AbstractContextManager[Executor]":
    """Make the executor that the options ask for, no larger than the work.

    Parameters
    ----------
    workers, cluster
        What ``--workers`` and ``--cluster`` say.
    work : int
        Number of items to be done; with none of them nobody is started.
    """
    from levelstride.execution.serial import serial

    number = min(usable_workers(workers, cluster), work)
    if cluster is not None and work:
        from levelstride.execution.cluster import cluster as on_cluster

        return on_cluster(cluster)
    if number <= 1:
        return serial()
    from levelstride.execution.processes import processes

    return processes(number)
