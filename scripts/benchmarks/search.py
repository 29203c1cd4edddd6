"""What the search costs: beside a plain dense search, for a whole table, as unknowns grow."""

from __future__ import annotations

import json
import os
import resource
import subprocess
import sys
import time
from collections.abc import Callable

import numpy as np

from levelstride.column.column import Column
from levelstride.column.read import build, load
from levelstride.execution.processes import processes
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.march_search import MarchSearch
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.stability.wave_problem import WaveProblem
from levelstride.studies.table import step_table
from levelstride.tableaux.lookup import find

Row = dict[str, float | int | str]

DEEP = "columns/tallowmast_deep.toml"
TABLEAU, SPLIT = "ARS(2,3,2)", "sound+buoyancy"
DAY = Tolerance(86400.0, 1000.0)
WAVES = 16
TABLEAUX = (
    "ARS(1,1,1)", "ARS(1,2,1)", "ARS(2,2,2)", "ARS(2,3,2)", "ARS(2,3,3)", "ARS(3,4,3)",
    "ARS(4,4,3)", "SSP2(2,2,2)", "SSP2(3,2,2)", "SSP2(3,3,2)", "SSP3(4,3,3)", "ARK3(2)4L[2]SA",
    "ARK2(2,3,2)", "BPR(3,5,3)", "Trap2(2,3,2)", "UJ3(1,3,2)", "IMKG232a", "IMKG243a", "IMKG343a",
    "DBM453",
)  # fmt: skip
SPLITS = ("sound", "sound+buoyancy")
SIZES = (100, 200, 400, 800)


def still(nlev: int) -> Column:
    """A stretched column in the standard atmosphere at rest."""
    levels = {"kind": "geometric", "layers": nlev, "top_m": 30000.0, "lowest_layer_m": 20.0}
    return build(
        {
            "title": f"{nlev} layers at rest",
            "levels": levels,
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 3000.0},
        }
    )


def columns() -> list[Column]:
    """137 layers at rest, where steps are real, and in wind and shear, where they are complex."""
    return [still(137), load(DEEP)]


def timed(function: Callable[[], object]) -> tuple[float, object]:
    start = time.perf_counter()
    found = function()
    return time.perf_counter() - start, found


def plain_limit(problem: WaveProblem, explicit_limit_s: float) -> float:
    """Scan one wave upward at ratio 1.05 and bisect to 0.1 %, by dense eigenvalues throughout."""

    def stable(dt: float) -> bool:
        return problem.growth(dt) <= problem.rate(DAY)

    low = high = explicit_limit_s / 10
    while stable(high):
        low, high = high, 1.05 * high
        if high > 1e4:
            return 1e4
    while high / low > 1.001:
        middle = float(np.sqrt(low * high))
        low, high = (middle, high) if stable(middle) else (low, middle)
    return low


@on_one_thread
def beside_the_plain_search() -> list[Row]:
    """The search of one tableau and splitting, and the same by dense eigenvalues alone."""
    found: list[Row] = []
    for column in columns():
        splitting, tableau = resolve(SPLIT), find(TABLEAU)

        def search(column: Column = column) -> float | None:
            return ColumnVerdict(column, resolve(SPLIT), find(TABLEAU)).stable_step(DAY).step_s

        seconds, step = timed(search)
        verdict = ColumnVerdict(column, splitting, tableau)
        problems = [
            WaveProblem(column, column.airs[0], splitting, tableau, float(kappa))
            for kappa in sampled_wavenumbers(column.horizontal)[-WAVES:]
        ]
        explicit_s = tableau.imaginary_axis_limit / verdict.explicit_rate()
        start = time.perf_counter()
        plain = min(plain_limit(problem, explicit_s) for problem in problems)
        plain_seconds = time.perf_counter() - start
        assert isinstance(step, float)
        found.append(
            {
                "figure": "search beside dense search",
                "column": column.title,
                "layers": column.levels.nlev,
                "waves": WAVES,
                "seconds": seconds,
                "dense_seconds": plain_seconds,
                "times_faster": plain_seconds / seconds,
                "step_s": step,
                "dense_step_s": plain,
            }
        )
    return found


def whole_tables() -> list[Row]:
    """Twenty tableaux with two splittings, by one worker and by two."""
    found: list[Row] = []
    for column in columns():
        seconds = {}
        for workers in (2, 1):
            with processes(workers) as executor:
                list(executor.map(abs, range(workers)))
                seconds[workers], _ = timed(
                    lambda c=column, e=executor: step_table(c, TABLEAUX, SPLITS, e, refine=False)
                )
        found.append(
            {
                "figure": "whole table",
                "column": column.title,
                "layers": column.levels.nlev,
                "rows": len(TABLEAUX) * len(SPLITS),
                "cores": os.cpu_count() or 1,
                "seconds": seconds[2],
                "seconds_by_one_worker": seconds[1],
                "efficiency_of_two": seconds[1] / (2 * seconds[2]),
            }
        )
    return found


@on_one_thread
def search_alone(nlev: int) -> Row:
    """Time a search that asks full matrices nothing at its end, and the most memory it held."""
    column = still(nlev)

    def search() -> None:
        verdict = ColumnVerdict(column, resolve(SPLIT), find(TABLEAU))
        MarchSearch(verdict.search, DAY, judge=False).run(refine=False)

    search()
    seconds = min(timed(search)[0] for _ in range(3))
    megabytes = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    return {"layers": nlev, "seconds": seconds, "largest_memory_mib": megabytes}


def growth_with_size() -> list[Row]:
    """The search as layers are added, each size in a process of its own."""
    found: list[Row] = []
    for nlev in SIZES:
        output = subprocess.run(
            [sys.executable, __file__, str(nlev)], check=True, capture_output=True, text=True
        ).stdout
        row: Row = {"figure": "growth with layers", **json.loads(output)}
        if found:
            ratio = float(row["seconds"]) / float(found[0]["seconds"])
            row["exponent_from_first"] = float(np.log(ratio) / np.log(nlev / SIZES[0]))
        found.append(row)
    return found


def rows() -> list[Row]:
    """All of it: about a quarter of an hour, nearly all of it the dense search."""
    return [*whole_tables(), *growth_with_size(), *beside_the_plain_search()]


if __name__ == "__main__":
    print(json.dumps(search_alone(int(sys.argv[1]))))
