import multiprocessing
import os
from concurrent.futures import wait

import pytest

from levelstride.errors import InputError
from levelstride.execution.processes import THREAD_VARIABLES, processes, thread_counts
from levelstride.execution.serial import serial


def test_serial_runs_in_order_in_this_process():
    with serial() as executor:
        futures = [executor.submit(divmod, 17, n) for n in (5, 3, 2)]
        assert [future.result() for future in futures] == [(3, 2), (5, 2), (8, 1)]
        assert executor.submit(os.getpid).result() == os.getpid()
        assert list(executor.map(abs, [-1, 2])) == [1, 2]


def test_serial_keeps_errors_for_the_result_and_lets_interruptions_through():
    def fail(error):
        raise error

    with serial() as executor:
        future = executor.submit(fail, InputError("mend this"))
        with pytest.raises(InputError, match="mend this"):
            future.result()
        with pytest.raises(KeyboardInterrupt):
            executor.submit(fail, KeyboardInterrupt())


def test_serial_takes_nothing_after_its_end():
    with serial() as executor:
        pass
    with pytest.raises(RuntimeError):
        executor.submit(abs, 1)


def test_processes_work_elsewhere_with_one_thread_each():
    with processes(1) as executor:
        pids = executor.submit(os.getpid)
        threads = executor.submit(thread_counts)
        variables = [executor.submit(os.getenv, name) for name in THREAD_VARIABLES]
        wait([pids, threads, *variables])
        assert pids.result() != os.getpid()
        assert threads.result()
        assert set(threads.result()) == {1}
        assert {future.result() for future in variables} == {"1"}
        assert executor.submit(divmod, 17, 5).result() == (3, 2)
    assert not multiprocessing.active_children()


def test_an_interruption_ends_the_workers():
    before = set(multiprocessing.active_children())

    def work():
        with processes(1) as executor:
            executor.submit(os.getpid).result()
            assert set(multiprocessing.active_children()) - before
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        work()
    assert not set(multiprocessing.active_children()) - before
