"""What sloping coordinate surfaces add to the pressure gradient and the divergence."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.constants import HEAT_CAPACITY
from levelstride.operator.bands import Banded
from levelstride.operator.pressure import mass_theta_faces, mass_theta_layers, stiffness
from levelstride.operator.setting import Setting


def _slope_flux(setting: Setting) -> NDArray[np.float64]:
    """S rho0 theta0/2 at interior interfaces [K kg/m3], s with its averaging factor."""
    slope = setting.column.slope_f[1:-1] * setting.wave.slope_average
    return slope * mass_theta_faces(setting) / 2


def _lowest_count(setting: Setting) -> NDArray[np.float64]:
    """How often each layer counts: the lowest twice where its one face stands for two."""
    count = np.ones(setting.layout.nlev)
    if setting.column.lowest_slope_gradient == "full":
        count[0] = 2.0
    return count


def slope_pressure_gradient(setting: Setting) -> Banded:
    """u_j <- cp theta0_j [sum of s rho0 theta0 (pi'_f - pi'_{f-1})/2]/(rho0 theta0 dz)_j.

    The sum runs over the interior faces f of the layer.
    """
    at = setting.layout
    flux = _slope_flux(setting)
    factor = (
        HEAT_CAPACITY * setting.air.theta_c * _lowest_count(setting) / mass_theta_layers(setting)
    )
    below, above = factor[:-1] * flux, factor[1:] * flux
    return Banded.from_entries(
        at.size,
        [
            (at.u[:-1], at.pi[1:], below),
            (at.u[:-1], at.pi[:-1], -below),
            (at.u[1:], at.pi[1:], above),
            (at.u[1:], at.pi[:-1], -above),
        ],
    )


def slope_divergence(setting: Setting) -> Banded:
    """pi'_j <- (c^2/(cp theta0))_j (flux_{j+1} - flux_j)/(rho0 theta0 dz)_j, flux rho0 theta0 s u.

    u at a face is the mean of its two layers; ground and lid carry no flux.
    """
    at = setting.layout
    flux = _slope_flux(setting)
    count = _lowest_count(setting)
    factor = stiffness(setting) / mass_theta_layers(setting)
    below, above = factor[:-1] * flux, factor[1:] * flux
    return Banded.from_entries(
        at.size,
        [
            (at.pi[:-1], at.u[:-1], below * count[:-1]),
            (at.pi[:-1], at.u[1:], below * count[1:]),
            (at.pi[1:], at.u[:-1], -above * count[:-1]),
            (at.pi[1:], at.u[1:], -above * count[1:]),
        ],
    )
