"""Buoyancy and its partner, the vertical transport of the background stratification."""

from __future__ import annotations

import numpy as np

from levelstride.constants import GRAVITY
from levelstride.operator.bands import Banded
from levelstride.operator.setting import Setting


def buoyancy(setting: Setting) -> Banded:
    """w_f <- g theta'_f/theta0_f, on Lorenz levels averaged from the two layers."""
    at, air = setting.layout, setting.air
    if not at.theta_in_layers:
        return Banded.from_entries(at.size, [(at.w, at.theta, GRAVITY / air.theta_f[1:-1])])
    half = GRAVITY * setting.column.levels.thickness_m / (2 * air.theta_c)
    spacing = setting.column.levels.spacing_m
    return Banded.from_entries(
        at.size,
        [(at.w, at.theta[:-1], half[:-1] / spacing), (at.w, at.theta[1:], half[1:] / spacing)],
    )


def stratification(setting: Setting) -> Banded:
    """theta' <- -w dtheta0/dz, on Lorenz levels with rho0 w averaged to the layer."""
    at, air = setting.layout, setting.air
    if not at.theta_in_layers:
        return Banded.from_entries(at.size, [(at.theta, at.w, -air.dtheta_dz_f)])
    factor = -air.dtheta_dz_c / (2 * air.density_c)
    flux = air.density_f[1:-1]
    return Banded.from_entries(
        at.size,
        [(at.theta[1:], at.w, factor[1:] * flux), (at.theta[:-1], at.w, factor[:-1] * flux)],
    )


def rotation(setting: Setting) -> Banded:
    """u <- f v, v <- -f u."""
    at, f = setting.layout, setting.column.coriolis_per_s
    if not at.rotation:
        return Banded.zeros(at.size)
    ones = np.ones(at.nlev)
    return Banded.from_entries(at.size, [(at.u, at.v, f * ones), (at.v, at.u, -f * ones)])
