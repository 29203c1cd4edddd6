"""Work items of tests, where worker processes can import them."""

import os
import signal
import time
from pathlib import Path

from levelstride.errors import InputError


def die(_=None):
    os.kill(os.getpid(), signal.SIGKILL)


def die_once(mark):
    """Kill the worker that is first to leave the mark, and no other."""
    try:
        Path(mark).touch(exist_ok=False)
    except FileExistsError:
        return "survived"
    return die()


def count_and_die(folder):
    Path(folder, f"{time.time_ns()}").touch()
    die()


def dwell(seconds):
    time.sleep(seconds)
    return os.getpid()


def fail():
    raise InputError("mend this")
