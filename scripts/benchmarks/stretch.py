"""How long it takes to find how far the levels of a column of 60 layers can be stretched."""

from __future__ import annotations

import os
import time

from levelstride.column.read import load
from levelstride.execution.processes import processes
from levelstride.execution.serial import serial
from levelstride.stepper.imex import warm_up
from levelstride.studies.stretch import POINTS, stretch

COLUMN = "columns/greyspar_valley.toml"
WORKERS = 2


def rows() -> list[dict[str, float | int | str]]:
    """Time one stretch with defaults: three tableaux, two splittings, 24 level sets."""
    warm_up()
    column = load(COLUMN)
    workers = min(WORKERS, os.cpu_count() or 1)
    searches = 0

    def count(done: int, total: int, what: str) -> None:
        nonlocal searches
        searches = total

    start = time.perf_counter()
    with processes(workers) if workers > 1 else serial() as executor:
        found = stretch(column, executor=executor, progress=count)
    elapsed = time.perf_counter() - start
    return [
        {
            "column": column.title,
            "layers": column.levels.nlev,
            "rows": len(found.rows),
            "points": POINTS,
            "items": searches,
            "workers": workers,
            "seconds": elapsed,
            "seconds_per_row": elapsed / len(found.rows),
        }
    ]
