"""The level set nearest to a given one under linear bounds on the logarithm of the stable step.

Unknowns are x = ln of the layer thicknesses. Arithmetic only: where the bounds come from, and
whether the answer holds, is for others to say.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import Bounds, LinearConstraint, NonlinearConstraint, linprog, minimize

Array = NDArray[np.float64]

THINNEST_M = 2e-3
"""No layer becomes thinner than this [m]."""

LID_REACH = 3.0
"""Where the lid may move, it moves up or down by no more than this factor."""

SLACK = 0.02
"""Share of the gain that the linear problem promises which is left to the curvature of the lid."""

DENIAL = 2e-3
"""How far below a ln step that was found a model may lie at that place and still be believed."""

MOST_CUTS = 80

ROUND_OFF = 1e-9
"""What bounds on ratios give way to."""

MISSED = 1e-4
"""By how much a proposal may miss its bounds where the solver ends early."""


@dataclass(frozen=True, eq=False)
class Rules:
    """What a level set must keep.

    Attributes
    ----------
    start : ndarray, shape (nlev,)
        ln of the thicknesses that the change is counted from.
    lid_kept, lowest_kept : bool
        Whether the sum of the thicknesses and the lowest of them stay.
    log_ratio : ndarray, shape (nlev-1,), or None
        Largest |ln| of the ratio of neighbouring thicknesses; None without a bound.
    """

    start: Array
    lid_kept: bool = True
    lowest_kept: bool = False
    log_ratio: Array | None = None

    @property
    def lid_m(self) -> float:
        """Sum of the thicknesses that the change is counted from [m]."""
        return float(np.exp(self.start).sum())


@dataclass(frozen=True, eq=False)
class Cuts:
    """Linear models of ln of the limits of the states that bind: value + slope (x - at).

    Attributes
    ----------
    at : ndarray, shape (ncut, nlev)
    value : ndarray, shape (ncut,)
    slope : ndarray, shape (ncut, nlev)
    """

    at: Array
    value: Array
    slope: Array

    def __add__(self, other: Cuts) -> Cuts:
        return Cuts(
            np.concatenate([self.at, other.at]),
            np.concatenate([self.value, other.value]),
            np.concatenate([self.slope, other.slope]),
        )

    @property
    def offset(self) -> Array:
        """Values at x = 0, shape (ncut,)."""
        offset: Array = self.value - (self.slope * self.at).sum(axis=1)
        return offset

    def allowing(self, x: Array, log_step: float) -> Cuts:
        """Those that do not deny a step that was found; the latest ones, if there are many."""
        kept = np.flatnonzero(self.offset + self.slope @ x >= log_step - DENIAL)[-MOST_CUTS:]
        return Cuts(self.at[kept], self.value[kept], self.slope[kept])

    def lowest(self, x: Array) -> float:
        """ln of the stable step that the models promise."""
        return float((self.offset + self.slope @ x).min())


def propose(rules: Rules, cuts: Cuts, x: Array, wanted: float, radius: float) -> Array | None:
    """Nearest set that the models promise to carry a step, or else the one they promise most of.

    Parameters
    ----------
    rules : Rules
    cuts : Cuts
    x : ndarray, shape (nlev,)
        Where the models are trusted, a set that keeps the rules.
    wanted : float
        ln of the step that is wanted.
    radius : float
        Largest change of any unknown.

    Returns
    -------
    ndarray, shape (nlev,), or None
        None where there is no way on from ``x``.
    """
    level = min(wanted, _attainable(rules, cuts, x, wanted, radius))
    here = cuts.lowest(x)
    if level < wanted:
        level -= SLACK * max(level - here, 0.0)
    found = _nearest(rules, cuts, x, level, radius)
    return None if found is None else kept_to(rules, found)


def kept_to(rules: Rules, x: Array) -> Array:
    """Remove what the solver left of round-off in lid and lowest layer."""
    thickness = np.exp(x)
    if rules.lowest_kept:
        thickness[0] = np.exp(rules.start[0])
    if rules.lid_kept:
        free = slice(1, None) if rules.lowest_kept else slice(None)
        rest = rules.lid_m - (thickness[0] if rules.lowest_kept else 0.0)
        thickness[free] *= rest / thickness[free].sum()
    kept: Array = np.log(thickness)
    return kept


def _bounds(rules: Rules, x: Array, radius: float) -> tuple[Array, Array]:
    low, high = np.maximum(x - radius, np.log(THINNEST_M)), x + radius
    if rules.lowest_kept:
        low[0] = high[0] = rules.start[0]
    return low, high


def _ratio_rows(rules: Rules) -> tuple[Array, Array]:
    """Rows A and bounds b of A x <= b that keep the ratios."""
    n = rules.start.size
    if rules.log_ratio is None:
        return np.zeros((0, n)), np.zeros(0)
    differences = np.diff(np.eye(n), axis=0)
    bound = rules.log_ratio + ROUND_OFF
    return np.vstack([differences, -differences]), np.concatenate([bound, bound])


def _attainable(rules: Rules, cuts: Cuts, x: Array, wanted: float, radius: float) -> float:
    """Largest level, up to the wanted one, that every model reaches; the lid taken linearly."""
    low, high = _bounds(rules, x, radius)
    rows, bound = _ratio_rows(rules)
    thickness, lid = np.exp(x), rules.lid_m
    least, most = (lid, lid) if rules.lid_kept else (lid / LID_REACH, lid * LID_REACH)
    moved = thickness.sum() - thickness @ x
    rows = np.vstack([rows, thickness / lid, -thickness / lid])
    bound = np.concatenate([bound, [(most - moved) / lid, (moved - least) / lid]])
    above = np.column_stack([-cuts.slope, np.ones(cuts.value.size)])
    found = linprog(
        np.append(np.zeros(x.size), -1.0),
        A_ub=np.vstack([np.column_stack([rows, np.zeros(len(rows))]), above]),
        b_ub=np.concatenate([bound, cuts.offset]),
        bounds=[*zip(low, high, strict=True), (None, wanted)],
    )
    return float(found.x[-1]) if found.x is not None else cuts.lowest(x)


def _nearest(rules: Rules, cuts: Cuts, x: Array, level: float, radius: float) -> Array | None:
    """Least change of ln thickness at which every model reaches the level."""
    low, high = _bounds(rules, x, radius)
    free = high > low
    rows, bound = _ratio_rows(rules)
    matrix = np.vstack([-rows, cuts.slope])
    offset = np.concatenate([bound, cuts.offset - level]) + matrix[:, ~free] @ low[~free]
    matrix = matrix[:, free]
    standing, lid, start = float(np.exp(low[~free]).sum()), rules.lid_m, rules.start[free]
    least, most = (1.0, 1.0) if rules.lid_kept else (1 / LID_REACH, LID_REACH)

    def change(y: NDArray[Any]) -> tuple[float, Array]:
        away = y - start
        return float(away @ away), 2 * away

    bounds: list[LinearConstraint | NonlinearConstraint] = [
        LinearConstraint(matrix, -offset, np.inf),
        NonlinearConstraint(
            lambda y: (standing + np.exp(y).sum()) / lid,
            least,
            most,
            jac=lambda y: np.exp(y)[None] / lid,
        ),
    ]
    found = minimize(
        change,
        x[free],
        jac=True,
        bounds=Bounds(low[free], high[free]),
        constraints=bounds,
        method="SLSQP",
        options={"maxiter": 200, "ftol": 1e-10},
    )
    if not np.all(np.isfinite(found.x)):
        return None
    y = np.clip(found.x, low[free], high[free])
    if not found.success and (offset + matrix @ y).min(initial=0.0) < -MISSED:
        return None
    proposed = low.copy()
    proposed[free] = y
    return proposed
