"""One-way terms that carry disturbances along: advection and shear."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.operator.setting import Setting
from levelstride.operator.state import FIELDS

Array = NDArray[np.float64]
Stencil = tuple[list[int], list[int], list[float]]


def horizontal_advection(setting: Setting) -> Banded:
    """Every unknown q <- -U a(kappa) q, U at the unknown's own height."""
    at, air = setting.layout, setting.air
    wind = at.spread(air.wind_c, air.wind_f[1:-1])
    if not np.any(wind):
        return Banded.zeros(at.size)
    every = np.arange(at.size)
    return Banded.from_entries(at.size, [(every, every, setting.wave.advection(wind))])


def shear(setting: Setting) -> Banded:
    """u <- -w dU/dz, w in a layer the mean of its two interfaces, dU/dz from U at them."""
    at = setting.layout
    wind_shear = np.diff(setting.air.wind_f) / setting.column.levels.thickness_m
    half = -wind_shear / 2
    return Banded.from_entries(at.size, [(at.u[1:], at.w, half[1:]), (at.u[:-1], at.w, half[:-1])])


def vertical_advection(setting: Setting) -> Banded:
    """Every unknown q <- -W dq/dz with the frozen updraft W."""
    at, air, levels = setting.layout, setting.air, setting.column.levels
    if not np.any(air.updraft_f) and not np.any(air.updraft_c):
        return Banded.zeros(at.size)
    scheme = setting.column.vertical_advection
    faces = levels.interfaces_m
    entries = []
    for field in FIELDS:
        places = at.places(field)
        if field == "w":
            # w is known at ground and lid, so these count as points of the polynomial
            extended = np.concatenate(([-1], places, [-1]))
            rows, columns, weights = derivative(faces, air.updraft_f, scheme, (1.0, 1.0))
            inner = (extended[rows] >= 0) & (extended[columns] >= 0)
            rows, columns, weights = extended[rows][inner], extended[columns][inner], weights[inner]
            speed = np.zeros(at.size)
            speed[places] = air.updraft_f[1:-1]
            entries.append((rows, columns, -speed[rows] * weights))
            continue
        if places.size == 0:
            continue
        if places.size == at.nlev:
            points, speed = levels.centres_m, air.updraft_c
            ghosts = (levels.thickness_m[0], levels.thickness_m[-1])
        else:
            points, speed = faces[1:-1], air.updraft_f[1:-1]
            ghosts = (levels.thickness_m[0], levels.thickness_m[-1])
        rows, columns, weights = derivative(points, speed, scheme, ghosts)
        entries.append((places[rows], places[columns], -speed[rows] * weights))
    return Banded.from_entries(at.size, entries)


def derivative(
    points: Array, speed: Array, scheme: str, ghosts: tuple[float, float]
) -> tuple[NDArray[np.intp], NDArray[np.intp], Array]:
    """Weights of d/dz at every point by the Lagrange polynomial through its neighbours.

    Parameters
    ----------
    points : ndarray, shape (npoint,)
        Ascending heights [m].
    speed : ndarray, shape (npoint,)
        Its sign says which side is upwind [m/s].
    scheme : {"centred", "upwind-1", "upwind-3"}
    ghosts : tuple of float
        Distance to the point beyond the first and the last one [m]; the outermost value goes on
        there, so the gradient across is zero.

    Returns
    -------
    rows, columns : ndarray of int
    weights : ndarray [1/m]
    """
    last = points.size - 1
    rows: list[int] = []
    columns: list[int] = []
    weights: list[float] = []
    for i in range(points.size):
        stencil = _stencil(i, last, speed[i], scheme)
        places = np.array([_height(points, k, ghosts) for k in stencil])
        for k, weight in zip(stencil, _lagrange(places, stencil.index(i)), strict=True):
            rows.append(i)
            columns.append(min(max(k, 0), last))
            weights.append(weight)
    return np.array(rows), np.array(columns), np.array(weights)


def _stencil(i: int, last: int, speed: float, scheme: str) -> list[int]:
    if scheme == "centred":
        return [i - 1, i, i + 1]
    upwind = -1 if speed >= 0 else 1
    reach = [i + 2 * upwind, i + upwind, i, i - upwind]
    if scheme == "upwind-3" and min(reach) >= 0 and max(reach) <= last:
        return reach
    return [i + upwind, i]


def _height(points: Array, k: int, ghosts: tuple[float, float]) -> float:
    if k < 0:
        return float(points[0] - ghosts[0])
    if k >= points.size:
        return float(points[-1] + ghosts[1])
    return float(points[k])


def _lagrange(z: Array, at: int) -> list[float]:
    """Weights of the derivative at ``z[at]`` of the polynomial through all points ``z`` [1/m]."""
    weights = []
    for k in range(z.size):
        others = [m for m in range(z.size) if m != k]
        if k == at:
            weights.append(float(sum(1 / (z[at] - z[m]) for m in others)))
            continue
        rest = [m for m in others if m != at]
        top = np.prod([z[at] - z[m] for m in rest]) if rest else 1.0
        weights.append(float(top / np.prod([z[k] - z[m] for m in others])))
    return weights
