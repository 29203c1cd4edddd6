import contextlib
import json
import os
import subprocess
import sys
import time
from pathlib import Path

import pytest


@pytest.fixture(name="dask", scope="session")
def _dask(tmp_path_factory):
    """Start a Dask scheduler on loopback with a number of workers; returns its address."""
    folder = tmp_path_factory.mktemp("dask")
    started = []

    def start(program, *words):
        log = (folder / f"{program}-{len(started)}.log").open("w")
        command = [sys.executable, "-m", f"distributed.cli.{program}", *map(str, words)]
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONPATH": _path()}
        process = subprocess.Popen(
            command, stdout=log, stderr=subprocess.STDOUT, env=environment, cwd=folder
        )
        started.append((process, log))
        return process

    def scheduler(workers):
        file = folder / f"scheduler-{len(started)}.json"
        words = ("--host", "127.0.0.1", "--port", 0, "--no-dashboard", "--scheduler-file", file)
        start("dask_scheduler", *words)
        address = _address(file)
        for _ in range(workers):
            start(
                "dask_worker", address, "--host", "127.0.0.1", "--nthreads", 1, "--no-dashboard",
                "--no-nanny", "--local-directory", folder,
            )  # fmt: skip
        if workers:
            _wait_for_workers(address, workers)
        return address

    yield scheduler
    for process, log in started[::-1]:
        process.terminate()
        with contextlib.suppress(subprocess.TimeoutExpired):
            process.wait(10)
        process.kill()
        process.wait()
        log.close()


def _path():
    """Where the processes find work items of tests."""
    here = str(Path(__file__).parents[1])
    return os.pathsep.join(filter(None, (here, os.environ.get("PYTHONPATH"))))


def _address(file):
    for _ in range(600):
        with contextlib.suppress(OSError, ValueError):
            return json.loads(file.read_text())["address"]
        time.sleep(0.1)
    raise TimeoutError("the scheduler did not start")


def _wait_for_workers(address, workers):
    from distributed import Client

    with Client(address, timeout=30, set_as_default=False) as client:
        client.wait_for_workers(workers, timeout=60)
