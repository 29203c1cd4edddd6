"""Workers that die: real processes that are really killed."""

import os
import signal
import time
from concurrent.futures import BrokenExecutor, wait

import pytest

from examples.deeds import count_and_die, die, die_once, dwell
from levelstride.execution.pool import TRIES
from levelstride.execution.processes import processes


def test_what_a_killed_worker_held_is_run_again(tmp_path):
    with processes(2) as executor:
        dying = executor.submit(die_once, str(tmp_path / "mark"))
        others = [executor.submit(pow, 2, n) for n in range(8)]
        assert dying.result(60) == "survived"
        assert [future.result(60) for future in others] == [2**n for n in range(8)]


def test_a_worker_killed_from_outside_is_replaced():
    with processes(1) as executor:
        victim = executor.submit(os.getpid).result(60)
        future = executor.submit(dwell, 0.5)
        time.sleep(0.2)
        os.kill(victim, signal.SIGKILL)
        assert future.result(60) not in (victim, os.getpid())


def test_a_worker_that_dies_idle_is_replaced():
    with processes(1) as executor:
        victim = executor.submit(os.getpid).result(60)
        os.kill(victim, signal.SIGKILL)
        assert executor.submit(pow, 2, 5).result(60) == 32


def test_an_item_over_which_workers_die_is_given_up_and_takes_no_other_with_it(tmp_path):
    with processes(2) as executor:
        deadly = executor.submit(count_and_die, str(tmp_path))
        others = [executor.submit(dwell, 0.05) for _ in range(6)]
        wait([deadly, *others], timeout=90)
        with pytest.raises(BrokenExecutor, match=f"{TRIES} times"):
            deadly.result(0)
        assert all(future.exception(0) is None for future in others)
    assert len(list(tmp_path.iterdir())) == TRIES


def test_where_no_worker_can_live_everything_is_given_up():
    with processes(1) as executor:
        futures = [executor.submit(die) for _ in range(30)]
        wait(futures, timeout=120)
        assert all(isinstance(future.exception(0), BrokenExecutor) for future in futures)


def test_items_that_are_left_are_cancelled():
    def leave():
        with processes(1) as executor:
            futures.extend(executor.submit(dwell, 0.3) for _ in range(5))
            futures[0].result(60)
            raise KeyboardInterrupt

    futures = []
    with pytest.raises(KeyboardInterrupt):
        leave()
    assert futures[-1].cancelled()


def test_an_executor_that_was_shut_down_takes_nothing():
    with processes(1) as executor:
        assert executor.submit(pow, 2, 3).result(60) == 8
    with pytest.raises(RuntimeError, match="shut down"):
        executor.submit(pow, 2, 3)
