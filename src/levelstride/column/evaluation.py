"""Evaluate the tables of a definition on the levels: motion, slope, diffusivity, rotation."""

import numpy as np

from . import terrain as ground
from .air import Background
from .air_states import ascent_of
from .arrays import Array, read_only
from .background import Motion, evaluate
from .definition import Definition, LinearWind, OneAir, SoundingAir, TableWind, UniformWind
from .levels import Levels
from .profiles import Profile
from .wind import between, sine_updraft, table_updraft


def _updraft(definition: Definition, levels: Levels) -> tuple[Array, Array]:
    updraft = definition.updraft
    if updraft is None:
        return np.zeros(levels.nlev), np.zeros(levels.nlev + 1)
    if updraft.speed_m_per_s is not None:
        return sine_updraft(updraft.speed_m_per_s, levels)
    heights = read_only(updraft.heights_m or [])
    return table_updraft(heights, read_only(updraft.speeds_m_per_s or []), levels)


def _wind_at(
    definition: Definition, air: OneAir, profile: Profile, heights_m: Array, altitude_m: float
) -> Array:
    wind = definition.wind
    if wind is None:
        return np.zeros_like(heights_m)
    if isinstance(wind, UniformWind):
        return np.full_like(heights_m, wind.speed_m_per_s)
    if isinstance(wind, LinearWind):
        return wind.surface_m_per_s + wind.shear_per_s * heights_m
    if isinstance(wind, TableWind):
        return between(read_only(wind.heights_m), read_only(wind.speeds_m_per_s), heights_m)
    speeds = ascent_of(air, "air").wind if isinstance(air, SoundingAir) else None
    nodes = getattr(profile, "nodes_m", None)
    if speeds is None or nodes is None:
        return np.zeros_like(heights_m)
    return between(nodes, speeds, heights_m + altitude_m)


def background(
    definition: Definition, name: str, air: OneAir, profile: Profile, levels: Levels
) -> Background:
    """Evaluate an air state, with the wind and updraft of the definition, on the levels."""
    altitude = levels.surface_altitude_m
    updraft_c, updraft_f = _updraft(definition, levels)
    motion = Motion(
        wind_c=_wind_at(definition, air, profile, levels.centres_m, altitude),
        wind_f=_wind_at(definition, air, profile, levels.interfaces_m, altitude),
        updraft_c=updraft_c,
        updraft_f=updraft_f,
    )
    return evaluate(name, profile, levels, motion)


def slope(definition: Definition, levels: Levels) -> Array:
    """Slope of the coordinate surfaces at the interfaces, (nlev+1,) [1]."""
    terrain = definition.terrain
    if terrain.decay_height_m is not None:
        return ground.exponential_slope(terrain.slope, levels.interfaces_m, terrain.decay_height_m)
    return ground.linear_slope(terrain.slope, levels.interfaces_m)


def diffusivity(definition: Definition, at_m: Array) -> Array:
    """Vertical diffusivity K at heights above the ground, same shape [m2/s]."""
    diffusion = definition.diffusion
    if diffusion is None:
        return np.zeros_like(at_m)
    if diffusion.heights_m is None or diffusion.values_m2_per_s is None:
        return np.full_like(at_m, diffusion.vertical_m2_per_s or 0.0)
    return between(read_only(diffusion.heights_m), read_only(diffusion.values_m2_per_s), at_m)


def upper_damping(definition: Definition, levels: Levels) -> Array:
    """Rate of the absorbing layer at the interfaces, (nlev+1,) [1/s]."""
    damping = definition.upper_damping
    if damping is None:
        return np.zeros(levels.nlev + 1)
    return ground.absorbing_layer(damping.rate_per_s, damping.base_m, levels.interfaces_m)


def coriolis(definition: Definition) -> float:
    """Coriolis parameter [1/s], 0 without rotation."""
    rotation = definition.rotation
    if rotation is None:
        return 0.0
    if rotation.latitude_deg is not None:
        return ground.coriolis(rotation.latitude_deg)
    return rotation.coriolis_per_s or 0.0
