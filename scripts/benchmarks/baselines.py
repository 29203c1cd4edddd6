"""What the limit of a baseline costs beside that of a tableau with as many solves in a step."""

from __future__ import annotations

import time

from levelstride.column.column import Column
from levelstride.column.read import build
from levelstride.schemes import find_scheme
from levelstride.studies.limit import limit

Row = dict[str, float | int | str]

TABLEAU, SPLIT = "ARS(3,4,3)", "sound+buoyancy"
BASELINES = (
    ("Time-split RK3", {"substeps": 1}),
    ("Time-split RK3", {"substeps": 6}),
    ("Leapfrog-trapezoid RA", {}),
    ("SBDF2", {}),
    ("AM2*/AX2*", {}),
    ("Leapfrog-sync", {}),
    ("Strang(trapezoid, RK4)", {}),
)
LAYERS = (40, 80)


def column(nlev: int, scheme: dict[str, int]) -> Column:
    """A stretched column at rest with the knobs of a baseline."""
    levels = {"kind": "geometric", "layers": nlev, "top_m": 30000.0, "lowest_layer_m": 40.0}
    return build(
        {
            "levels": levels,
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 3000.0},
            **({"scheme": scheme} if scheme else {}),
        }
    )


def seconds(name: str, nlev: int, knobs: dict[str, int]) -> tuple[float, float | None]:
    """Processor time of one limit, and the limit."""
    start = time.process_time()
    found = limit(column(nlev, knobs), tableau=name, split=SPLIT, brief=True)
    return time.process_time() - start, found.stable_step_s


def rows() -> list[Row]:
    """One row per column and baseline."""
    seconds(TABLEAU, 14, {})
    seconds("SBDF2", 14, {})
    found: list[Row] = []
    for nlev in LAYERS:
        of_tableau, _ = seconds(TABLEAU, nlev, {})
        for name, knobs in BASELINES:
            took, step_s = seconds(name, nlev, knobs)
            found.append(
                {
                    "layers": nlev,
                    "baseline": name,
                    "solves": find_scheme(name, knobs).implicit_solves,
                    "stable_step_s": step_s or 0.0,
                    "seconds": took,
                    f"over_{TABLEAU}": took / of_tableau,
                }
            )
    return found
