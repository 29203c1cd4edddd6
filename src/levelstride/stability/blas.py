"""Linear algebra on one thread."""

from __future__ import annotations

from collections.abc import Callable
from functools import wraps
from typing import ParamSpec, TypeVar

from threadpoolctl import threadpool_limits

Given = ParamSpec("Given")
Answer = TypeVar("Answer")


def on_one_thread(function: Callable[Given, Answer]) -> Callable[Given, Answer]:
    """Hold BLAS at one thread while a function runs.

    The matrices of a column are so small that threads spend more time waiting for one another than
    they save, many times more on a machine that does other work as well. Waves and tableaux are
    what is shared out among cores.
    """

    @wraps(function)
    def held(*args: Given.args, **kwargs: Given.kwargs) -> Answer:
        with threadpool_limits(limits=1, user_api="blas"):
            return function(*args, **kwargs)

    return held
