"""Pressure gradients and divergences over flat coordinate surfaces: sound and the Lamb wave."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.constants import HEAT_CAPACITY
from levelstride.operator.bands import Banded
from levelstride.operator.setting import Setting

Array = NDArray[np.float64]


def stiffness(setting: Setting) -> Array:
    """c^2/(cp theta0) in layers [m2/s2], what a divergence does to pi', shape (nlev,)."""
    air = setting.air
    return air.sound_speed_squared_c / (HEAT_CAPACITY * air.theta_c)


def mass_theta_faces(setting: Setting) -> Array:
    """rho0 theta0 at interior interfaces [K kg/m3], shape (nlev-1,)."""
    return setting.air.density_f[1:-1] * setting.air.theta_f[1:-1]


def mass_theta_layers(setting: Setting) -> Array:
    """rho0 theta0 dz in layers [K kg/m2], shape (nlev,)."""
    air = setting.air
    return air.density_c * air.theta_c * setting.column.levels.thickness_m


def vertical_pressure_gradient(setting: Setting) -> Banded:
    """w_f <- -cp theta0_f (pi'_f - pi'_{f-1})/dzf_f."""
    at = setting.layout
    slope = HEAT_CAPACITY * setting.air.theta_f[1:-1] / setting.column.levels.spacing_m
    return Banded.from_entries(at.size, [(at.w, at.pi[1:], -slope), (at.w, at.pi[:-1], slope)])


def vertical_flux_divergence(setting: Setting) -> tuple[Array, Array]:
    """Weights of w at the lower and upper interface of each layer in the divergence [1/m].

    Returns
    -------
    lower, upper : ndarray, shape (nlev,)
        Ground and lid carry no flux: ``lower[0]`` and ``upper[-1]`` are zero.
    """
    faces, layers = mass_theta_faces(setting), mass_theta_layers(setting)
    lower = -np.concatenate(([0.0], faces)) / layers
    upper = np.concatenate((faces, [0.0])) / layers
    return lower, upper


def vertical_divergence(setting: Setting) -> Banded:
    """pi'_j <- -(c^2/(cp theta0))_j (flux_{j+1} - flux_j)/(rho0 theta0 dz)_j, flux rho0 theta0 w.

    Ground and lid carry no flux.
    """
    at = setting.layout
    lower, upper = vertical_flux_divergence(setting)
    factor = -stiffness(setting)
    return Banded.from_entries(
        at.size,
        [
            (at.pi[1:], at.w, (factor * lower)[1:]),
            (at.pi[:-1], at.w, (factor * upper)[:-1]),
        ],
    )


def horizontal_pressure_gradient(setting: Setting) -> Banded:
    """u_j <- -i kx cp theta0_j pi'_j."""
    at = setting.layout
    value = -1j * setting.wave.gradient * HEAT_CAPACITY * setting.air.theta_c
    return Banded.from_entries(at.size, [(at.u, at.pi, value)])


def horizontal_divergence(setting: Setting) -> Banded:
    """pi'_j <- -(c^2/(cp theta0))_j i kx u_j."""
    at = setting.layout
    value = -1j * setting.wave.gradient * stiffness(setting)
    return Banded.from_entries(at.size, [(at.pi, at.u, value)])
