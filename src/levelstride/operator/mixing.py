"""One-way terms that take energy out: diffusion and damping."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.operator.pressure import vertical_flux_divergence
from levelstride.operator.setting import Setting
from levelstride.operator.state import Index

Array = NDArray[np.float64]
Entry = tuple[Index, Index, Array]


def vertical_diffusion(setting: Setting) -> Banded:
    """u, v, w, theta' <- (1/rho0) d/dz(rho0 K dq/dz), rho0 K where the flux is.

    No flux of u, v and theta' through ground and lid; w is zero there.
    """
    at, air, column = setting.layout, setting.air, setting.column
    size = at.size
    if not np.any(column.diffusivity_c) and not np.any(column.diffusivity_f):
        return Banded.zeros(size)
    thickness, spacing = column.levels.thickness_m, column.levels.spacing_m
    conductance = air.density_f[1:-1] * column.diffusivity_f[1:-1] / spacing
    through_layers = air.density_c * column.diffusivity_c / thickness
    entries = []
    layer_fields = [at.u, at.v] + ([at.theta] if at.theta_in_layers else [])
    for places in layer_fields:
        if places.size:
            entries += _exchange(places, conductance, air.density_c * thickness)
    inertia = air.density_f[1:-1] * spacing
    entries += _exchange(at.w, through_layers[1:-1], inertia)
    ends = np.array([0, -1])
    entries.append((at.w[ends], at.w[ends], -through_layers[ends] / inertia[ends]))
    if not at.theta_in_layers:
        entries += _exchange(at.theta, through_layers[1:-1], inertia)
    return Banded.from_entries(size, entries)


def _exchange(places: Index, conductance: Array, inertia: Array) -> list[Entry]:
    """Entries of an exchange between neighbours, conserving sum of inertia times value."""
    low, high = places[:-1], places[1:]
    down, up = conductance / inertia[:-1], conductance / inertia[1:]
    return [(low, high, down), (low, low, -down), (high, low, up), (high, high, -up)]


def upper_damping(setting: Setting) -> Banded:
    """w <- -r(z) w."""
    at = setting.layout
    rate = setting.column.upper_damping_f[1:-1]
    return Banded.from_entries(at.size, [(at.w, at.w, -rate)])


def divergence_damping(setting: Setting) -> Banded:
    """u <- alpha i kx D, D the horizontal or the three-dimensional divergence."""
    at, column = setting.layout, setting.column
    if column.divergence_damping == 0.0:
        return Banded.zeros(at.size)
    slope = 1j * setting.wave.gradient
    strength = column.divergence_damping * slope
    entries = [(at.u, at.u, np.full(at.nlev, strength * slope))]
    if column.divergence_damping_form == "three-dimensional":
        lower, upper = vertical_flux_divergence(setting)
        entries.append((at.u[1:], at.w, strength * lower[1:]))
        entries.append((at.u[:-1], at.w, strength * upper[:-1]))
    return Banded.from_entries(at.size, entries)


def horizontal_diffusion(setting: Setting) -> Banded:
    """Every unknown q <- -nu K2^m q."""
    at, column = setting.layout, setting.column
    rate = column.horizontal_diffusion * setting.wave.laplacian**column.horizontal_diffusion_order
    every = np.arange(at.size)
    return Banded.from_entries(at.size, [(every, every, np.full(at.size, -rate))])
