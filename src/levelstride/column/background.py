"""From an air profile to the background state on a level set."""

from dataclasses import dataclass

import numpy as np

from ..constants import GAS_CONSTANT, HEAT_CAPACITY_RATIO, REFERENCE_PRESSURE
from .air import Background
from .arrays import Array
from .levels import Levels
from .profiles import KAPPA, Profile


@dataclass(frozen=True, slots=True, eq=False)
class Motion:
    """Horizontal wind and frozen updraft on the levels, ``_c`` (nlev,), ``_f`` (nlev+1,) [m/s]."""

    wind_c: Array
    wind_f: Array
    updraft_c: Array
    updraft_f: Array


def evaluate(name: str, profile: Profile, levels: Levels, motion: Motion) -> Background:
    """Evaluate an air profile at layer centres and interfaces.

    Parameters
    ----------
    name : str
        Name of the air state.
    profile : Profile
        Hydrostatic air as a function of altitude.
    levels : Levels
        The level set with its surface altitude.
    motion : Motion
        Wind and updraft on the same levels.

    Returns
    -------
    Background
        With the stratification taken by plain differences of potential temperature.
    """
    centres = levels.surface_altitude_m + levels.centres_m
    interfaces = levels.surface_altitude_m + levels.interfaces_m
    t_c, t_f = profile.temperature(centres), profile.temperature(interfaces)
    p_c, p_f = profile.pressure(centres), profile.pressure(interfaces)
    theta_c = t_c * (REFERENCE_PRESSURE / p_c) ** KAPPA
    theta_f = t_f * (REFERENCE_PRESSURE / p_f) ** KAPPA
    return Background(
        name=name,
        temperature_c=t_c,
        temperature_f=t_f,
        pressure_c=p_c,
        pressure_f=p_f,
        theta_c=theta_c,
        theta_f=theta_f,
        density_c=p_c / (GAS_CONSTANT * t_c),
        density_f=p_f / (GAS_CONSTANT * t_f),
        sound_speed_squared_c=HEAT_CAPACITY_RATIO * GAS_CONSTANT * t_c,
        sound_speed_squared_f=HEAT_CAPACITY_RATIO * GAS_CONSTANT * t_f,
        dtheta_dz_c=np.diff(theta_f) / levels.thickness_m,
        dtheta_dz_f=np.diff(theta_c) / levels.spacing_m,
        wind_c=motion.wind_c,
        wind_f=motion.wind_f,
        updraft_c=motion.updraft_c,
        updraft_f=motion.updraft_f,
    )
