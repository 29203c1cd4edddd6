"""The energy of small disturbances, which the windless, undamped operator conserves."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.constants import GRAVITY, HEAT_CAPACITY
from levelstride.operator.state import Layout

FLOOR_N_SQUARED = 1.0e-6
"""Squared Brunt-Vaisala frequency used in the norm where the air is less stable [1/s2]."""


def energy_weights(
    column: Column, air: Background, layout: Layout, *, floor_n_squared: float = FLOOR_N_SQUARED
) -> NDArray[np.float64]:
    """Weights of the energy E = 1/2 sum_i weight_i |q_i|^2.

    Kinetic energy of u, v and w, elastic energy of pi', available potential energy of theta'.

    Parameters
    ----------
    column : Column
    air : Background
    layout : Layout
    floor_n_squared : float
        Where N^2 is smaller, this value stands in for it, so that E is a norm [1/s2].

    Returns
    -------
    ndarray, shape (nstate,)
        Positive weights: kg/m2 for winds, kg/(m2 (m/s)^-2 ...) for the others, so that E is J/m2.
    """
    thickness, spacing = column.levels.thickness_m, column.levels.spacing_m
    mass_layer = thickness * air.density_c
    mass_interface = spacing * air.density_f[1:-1]
    weights = np.empty(layout.size)
    weights[layout.u] = mass_layer
    if layout.rotation:
        weights[layout.v] = mass_layer
    weights[layout.pi] = mass_layer * (HEAT_CAPACITY * air.theta_c) ** 2 / air.sound_speed_squared_c
    weights[layout.w] = mass_interface
    if layout.theta_in_layers:
        n_squared, theta, mass = air.n_squared_c, air.theta_c, mass_layer
    else:
        n_squared, theta, mass = air.n_squared_f, air.theta_f[1:-1], mass_interface
    weights[layout.theta] = mass * (GRAVITY / theta) ** 2 / np.maximum(n_squared, floor_n_squared)
    return weights
