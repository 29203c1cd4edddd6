"""What ground, lid and latitude do: squeezed layers, sloping surfaces, absorption, rotation."""

from typing import Final

import numpy as np

from .arrays import Array

EARTH_ROTATION: Final = 7.292115e-5
"""Angular velocity of the Earth [rad/s] (IAU/GRS 1980; Moritz 2000, doi:10.1007/s001900050278)."""


def squeezed(interfaces_m: Array, altitude_m: float) -> Array:
    """Heights above the ground after linear compression by (top - altitude)/top, same shape [m]."""
    top = float(interfaces_m[-1])
    return interfaces_m * ((top - altitude_m) / top)


def linear_slope(slope: float, interfaces_m: Array) -> Array:
    """Slope that decays linearly from the ground to zero at the lid, (nlev+1,) [1]."""
    return slope * (1.0 - interfaces_m / float(interfaces_m[-1]))


def exponential_slope(slope: float, interfaces_m: Array, decay_height_m: float) -> Array:
    """Slope times exp(-z/h), (nlev+1,) [1]."""
    slopes: Array = slope * np.exp(-interfaces_m / decay_height_m)
    return slopes


def absorbing_layer(rate_per_s: float, base_m: float, interfaces_m: Array) -> Array:
    """Rate r = rate sin^2(pi/2 (z - base)/(top - base)) above the base, (nlev+1,) [1/s]."""
    share = np.clip((interfaces_m - base_m) / (interfaces_m[-1] - base_m), 0.0, 1.0)
    rates: Array = rate_per_s * np.sin(0.5 * np.pi * share) ** 2
    return rates


def coriolis(latitude_deg: float) -> float:
    """Coriolis parameter 2 Omega sin(latitude) [1/s]."""
    return float(2.0 * EARTH_ROTATION * np.sin(np.deg2rad(latitude_deg)))
