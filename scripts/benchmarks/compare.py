"""How long it takes to put tableaux and splittings side by side on a column of 60 layers."""

from __future__ import annotations

import os
import time

from levelstride.column.read import load
from levelstride.execution.processes import processes
from levelstride.execution.serial import serial
from levelstride.stepper.imex import warm_up
from levelstride.studies.compare import compare

COLUMN = "columns/greyspar_valley.toml"
WORKERS = 2


def rows() -> list[dict[str, float | int | str]]:
    """Time one comparison with defaults: three tableaux, two splittings."""
    warm_up()
    column = load(COLUMN)
    workers = min(WORKERS, os.cpu_count() or 1)
    start = time.perf_counter()
    with processes(workers) if workers > 1 else serial() as executor:
        found = compare(column, executor=executor)
    elapsed = time.perf_counter() - start
    return [
        {
            "column": column.title,
            "layers": column.levels.nlev,
            "rows": len(found.rows),
            "workers": workers,
            "seconds": elapsed,
            "seconds_per_row": elapsed / len(found.rows),
        }
    ]
