"""Long runs of sixteen waves side by side, against the general step and the memory they cross."""

from __future__ import annotations

import time
from collections.abc import Callable

import numba
import numpy as np

from levelstride import tableaux
from levelstride.column.read import build
from levelstride.operator.energy import energy_weights
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, split_operator
from levelstride.splitting.splitting import resolve
from levelstride.stability.amplification import energy_parts
from levelstride.stepper import Stepper
from levelstride.stepper.lanes import LaneStepper

SPLITTING = "sound+buoyancy"
TABLEAUX = ("ARS(2,3,2)", "ARS(3,4,3)")
LAYERS = (40, 137, 400)
WAVES = 16
STEP_S = 5.0
WORK = 4000
"""Steps times unknowns of a call: long enough to fill the caches, short enough to be left alone."""


def waves(nlev: int, wind_m_per_s: float) -> list[Parts]:
    """Sixteen waves of a stretched column in the standard atmosphere, in energy coordinates."""
    definition = {
        "title": f"{nlev} layers",
        "levels": {
            "kind": "geometric",
            "layers": nlev,
            "top_m": 30000.0,
            "lowest_layer_m": 20.0,
        },
        "air": {"kind": "standard"},
        "horizontal": {"grid_spacing_m": 3000.0},
        "column": {"staggering": "charney-phillips"},
    }
    if wind_m_per_s:
        definition["wind"] = {"kind": "uniform", "speed_m_per_s": wind_m_per_s}
    column = build(definition)
    found = []
    for share in np.linspace(1.0 / WAVES, 1.0, WAVES):
        wave = Wave(share * np.pi / 3000.0, column.horizontal)
        parts = split_operator(resolve(SPLITTING), column, column.airs[0], wave)
        found.append(energy_parts(parts, energy_weights(column, column.airs[0], parts.layout)))
    return found


def seconds(function: Callable[[], object], *, at_least: float = 1.0) -> float:
    """Shortest time of a call: other work on the machine only ever adds."""
    function()
    best, begun = np.inf, time.perf_counter()
    while time.perf_counter() - begun < at_least:
        start = time.perf_counter()
        function()
        best = min(best, time.perf_counter() - start)
    return best


@numba.njit(error_model="numpy")
def triad(a: np.ndarray, b: np.ndarray, c: np.ndarray, times: int) -> None:
    for _ in range(times):
        for i in range(a.shape[0]):
            a[i] = b[i] + 0.5 * c[i]


def bytes_per_second(working_set: int) -> float:
    """What a plain triad moves over arrays that together are as large."""
    size = working_set // 24
    a, b, c = np.ones((3, size))
    times = max(1, 2_000_000 // size)
    return 24 * size * times / seconds(lambda: triad(a, b, c, times), at_least=0.3)


def march_seconds(stepper: LaneStepper) -> float:
    """Seconds of a step of all lanes."""
    start = np.random.default_rng(0).normal(size=(stepper.layout.size, stepper.nlane))
    start = start.astype(stepper.dtype)
    states, steps = start.copy(), max(10, WORK // stepper.layout.size)

    def march() -> None:
        states[:] = start
        stepper.march(states, steps)

    return seconds(march) / steps


def rows() -> list[dict[str, float | int | str]]:
    """Time steps: a row per number of layers, tableau, and real or complex arithmetic.

    ``_ns`` is nanoseconds per unknown, stage and lane. ``step`` is `Stepper.step` with sixteen
    states of one wave. ``roof`` is the time a plain triad takes, over arrays as large as the
    working set, to move what the step moves at the least.
    """
    found = []
    for nlev in LAYERS:
        for wind in (0.0, 20.0):
            lanes = waves(nlev, wind)
            for name in TABLEAUX:
                tableau = tableaux.find(name)
                together = LaneStepper(lanes, tableau, STEP_S)
                single = LaneStepper(lanes, tableau, STEP_S, precision="single")
                alone = Stepper(lanes[-1], tableau, STEP_S)
                states = np.random.default_rng(0).normal(size=(alone.layout.size, WAVES))
                states = states.astype(alone.dtype)
                parts = 2 if together.dtype.kind == "c" else 1
                rows_of_lanes = -(-WAVES * parts // 16)
                unit = 1e9 / (alone.layout.size * tableau.nstage * WAVES)
                roof = rows_of_lanes * together.moved / bytes_per_second(together.working_set)
                lanes_s = march_seconds(together)
                found.append(
                    {
                        "layers": nlev,
                        "arithmetic": "complex" if parts == 2 else "real",
                        "tableau": name,
                        "working_set_kB": round(together.working_set / 1000),
                        "lanes_ns": lanes_s * unit,
                        "single_ns": march_seconds(single) * unit,
                        "step_ns": seconds(lambda s=alone, q=states: s.step(q)) * unit,
                        "roof_ns": roof * unit,
                        "lanes_over_roof": lanes_s / roof,
                    }
                )
    return found


if __name__ == "__main__":
    for entry in rows():
        print({key: round(v, 2) if isinstance(v, float) else v for key, v in entry.items()})
