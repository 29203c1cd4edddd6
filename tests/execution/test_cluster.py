"""A real Dask scheduler with two workers, on loopback."""

import os
import sys
from dataclasses import replace

import pytest

from examples import quick
from examples.deeds import die_once, fail
from levelstride.column.read import build
from levelstride.errors import InputError
from levelstride.execution import cluster as module
from levelstride.execution.cluster import cluster
from levelstride.execution.processes import processes
from levelstride.execution.serial import serial
from levelstride.results.export import to_json
from levelstride.studies.advise import advise


@pytest.fixture(name="address", scope="module")
def _address(dask):
    return dask(workers=2)


def test_serial_processes_and_dask_give_identical_records(address):
    column = build(quick.DEFINITION)

    def records(executor_of, *how):
        with executor_of(*how) as executor:
            found = advise(column, executor=executor)
        return tuple(replace(row, measured_s_per_hour=None) for row in found.rows)

    here = records(serial)
    assert len(here) == quick.PAIRS
    for there in (records(processes, 2), records(cluster, address)):
        assert there == here
        assert to_json(there) == to_json(here)


def test_work_is_done_elsewhere_and_errors_come_back(address):
    with cluster(address) as executor:
        assert executor.submit(os.getpid).result(30) != os.getpid()
        with pytest.raises(InputError, match="mend this"):
            executor.submit(fail).result(30)


def test_an_address_that_does_not_answer(monkeypatch):
    monkeypatch.setattr(module, "ANSWER_WITHIN_S", 1.0)
    for address in ("tcp://127.0.0.1:9", "127.0.0.1:9", "nonsense://x"):
        with pytest.raises(InputError) as caught, cluster(address):
            pass
        (line,) = caught.value.problems
        assert line.startswith(f"--cluster {address}: no Dask scheduler answers there")


def test_a_scheduler_without_workers(dask):
    with pytest.raises(InputError, match="has no workers; start some"), cluster(dask(workers=0)):
        pass


def test_workers_of_another_version(address, monkeypatch):
    monkeypatch.setattr(module, "__version__", "99")
    with pytest.raises(InputError) as caught, cluster(address):
        pass
    assert len(caught.value.problems) == 3
    assert all("install levelstride 99" in line for line in caught.value.problems)


def test_the_extra_is_missing(monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(InputError, match=r"pip install 'levelstride\[cluster\]'"), cluster("x:1"):
        pass


def test_a_lost_worker_is_survived(dask, tmp_path):
    with cluster(dask(workers=2)) as executor:
        futures = [executor.submit(die_once, str(tmp_path / "mark")) for _ in range(4)]
        assert [future.result(60) for future in futures] == ["survived"] * 4
