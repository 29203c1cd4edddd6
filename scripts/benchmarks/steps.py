"""One step of a column, by four ways: what the tridiagonal path is worth."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_banded

from levelstride import tableaux
from levelstride.column.read import build
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, split_operator
from levelstride.splitting.splitting import resolve
from levelstride.stepper import Stepper, warm_up

SPLITTING = "sound+buoyancy"
TABLEAU = "ARS(2,3,2)"
STEP_S = 5.0
LAYERS = (40, 137, 400)
LANES = (1, 64)


@dataclass(frozen=True)
class Solver:
    """How to solve with I - h F, and how to multiply with the two parts."""

    solve: Callable[[np.ndarray], np.ndarray]
    slow: Callable[[np.ndarray], np.ndarray]


def column_parts(nlev: int) -> Parts:
    """A stretched column in the standard atmosphere, at the shortest wave of a 3 km grid."""
    column = build(
        {
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
    )
    wave = Wave(np.pi / 3000.0, column.horizontal)
    return split_operator(resolve(SPLITTING), column, column.airs[0], wave)


def band_solver(parts: Parts, h: float) -> Solver:
    """The band of I - h F through scipy, which factors it at every call."""
    fast = parts.fast
    lower, upper, n = fast.lower, fast.upper, fast.size
    band = np.zeros((lower + upper + 1, n))
    for offset in range(-lower, upper + 1):
        first, last = max(0, -offset), min(n, n - offset)
        entries = -h * fast.diagonal(offset)[first:last] + (offset == 0)
        band[upper - offset, first + offset : last + offset] = entries
    return Solver(lambda rhs: solve_banded((lower, upper), band, rhs), parts.slow.apply)


def dense_solver(parts: Parts, h: float) -> Solver:
    """Full matrices; numpy factors at every call."""
    matrix, slow = np.eye(parts.fast.size) - h * parts.fast.to_dense(), parts.slow.to_dense()
    return Solver(lambda rhs: np.linalg.solve(matrix, rhs), lambda q: slow @ q)


def plain_step(solver: Solver, tableau: tableaux.Tableau, dt: float, q: np.ndarray) -> np.ndarray:
    """The stages written out, for tableaux that solve with one diagonal entry."""
    slow, fast = [], []
    for i in range(len(tableau.b_explicit)):
        rhs = q.copy()
        for j in range(i):
            rhs += dt * tableau.a_explicit[i, j] * slow[j] + dt * tableau.a_implicit[i, j] * fast[j]
        h = dt * tableau.a_implicit[i, i]
        stage = solver.solve(rhs) if h else rhs
        fast.append((stage - rhs) / h if h else np.zeros_like(rhs))
        slow.append(solver.slow(stage))
    for j, (b_explicit, b_implicit) in enumerate(
        zip(tableau.b_explicit, tableau.b_implicit, strict=True)
    ):
        q = q + dt * b_explicit * slow[j] + dt * b_implicit * fast[j]
    return q


def seconds(function: Callable[[], np.ndarray], *, at_least: float = 0.2) -> float:
    """Shortest time of a call, of as many as fit into ``at_least`` seconds, three at the least."""
    function()
    times, begun = [], time.perf_counter()
    while len(times) < 3 or time.perf_counter() - begun < at_least:
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


def rows() -> list[dict[str, float | int | str]]:
    """Time one step: a row per number of layers and of states taken together.

    Every row holds microseconds per step and state, and the ratios to the tridiagonal path. The
    factorisation is in the time of scipy and of the dense matrices, whose interfaces factor at
    every solve, and not in that of the two paths of the stepper, which factor once.
    """
    warm_up()
    tableau = tableaux.find(TABLEAU)
    (diagonal,) = {a for a in np.diag(tableau.a_implicit) if a}
    found = []
    for nlev in LAYERS:
        parts = column_parts(nlev)
        tridiagonal = Stepper(parts, tableau, STEP_S, path="tridiagonal")
        banded = Stepper(parts, tableau, STEP_S, path="banded")
        scipy_band = band_solver(parts, diagonal * STEP_S)
        dense = dense_solver(parts, diagonal * STEP_S)
        for nlane in LANES:
            q = np.random.default_rng(0).normal(size=(parts.layout.size, nlane))
            ways: dict[str, Callable[[], np.ndarray]] = {
                "tridiagonal": lambda s=tridiagonal, q=q: s.step(q),
                "banded": lambda s=banded, q=q: s.step(q),
                "scipy": lambda s=scipy_band, q=q: plain_step(s, tableau, STEP_S, q),
                "dense": lambda s=dense, q=q: plain_step(s, tableau, STEP_S, q),
            }
            reference = ways["dense"]()
            scale = np.abs(reference).max()
            difference = max(np.abs(way() - reference).max() / scale for way in ways.values())
            row: dict[str, float | int | str] = {"layers": nlev, "states": nlane}
            micro = {name: 1e6 * seconds(way) / nlane for name, way in ways.items()}
            row |= {f"{name}_us": value for name, value in micro.items()}
            row |= {
                f"{name}_over_tridiagonal": micro[name] / micro["tridiagonal"]
                for name in ("banded", "scipy", "dense")
            }
            row["largest_difference"] = float(difference)
            found.append(row)
    return found


if __name__ == "__main__":
    for entry in rows():
        print({key: round(v, 15 if key[0] == "l" else 1) for key, v in entry.items()})
