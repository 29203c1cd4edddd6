"""Operators to step: small columns in energy coordinates, where every unknown has the same unit."""

from functools import cache

import numpy as np

from levelstride.column.column import Horizontal
from levelstride.operator.energy import energy_weights
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, split_operator
from levelstride.splitting.splitting import resolve
from oracles.columns import isothermal_column, random_column

SPLITTINGS = (
    "all-explicit",
    "sound",
    "sound+buoyancy",
    "sound+divergence",
    "sound+buoyancy+divergence",
    "sound+slope",
    "sound+buoyancy+slope",
    "sound+transport",
    "sound+buoyancy+divergence+slope+transport+mixing",
    "sound+buoyancy+horizontal-pressure-gradient+horizontal-divergence",
    "all-implicit",
)


def in_energy(parts, column):
    """The parts in coordinates in which the energy is the sum of squares."""
    scale = np.sqrt(energy_weights(column, column.airs[0], parts.layout))
    slow, fast, after, after_implicit = (
        part.similar(scale) for part in (parts.slow, parts.fast, parts.after, parts.after_implicit)
    )
    return Parts(slow, fast, after, after_implicit, parts.layout, parts.implicit_terms)


def parts_of(splitting, column, fraction=0.5):
    """Parts at a fraction of the shortest wave of the grid."""
    wave = Wave(fraction * np.pi / column.horizontal.grid_spacing_m, column.horizontal)
    return in_energy(split_operator(resolve(splitting), column, column.airs[0], wave), column)


@cache
def small_column(kind, staggering):
    """Seven layers: ``flat`` and at rest, with a ``slope``, or with ``everything`` switched on."""
    if kind == "everything":
        return next(
            column
            for seed in range(100)
            if (column := random_column(seed, everything=True, staggering=staggering)).levels.nlev
            == 7
            and column.coriolis_per_s
        )
    slope = np.linspace(0.3, 0.0, 8) if kind == "slope" else np.zeros(8)
    damping = np.concatenate((np.zeros(5), [0.01, 0.02, 0.03]))
    return isothermal_column(
        7,
        14e3,
        ratio=1.3,
        staggering=staggering,
        slope_f=slope,
        upper_damping_f=damping,
        horizontal=Horizontal(3000.0, "staggered", 2),
    )


def tall_column(nlev, staggering, **changes):
    """A stretched column with a lowest layer of about 20 m, 30 km deep."""
    ratio = {40: 1.1, 137: 1.018}[nlev]
    return isothermal_column(nlev, 30e3, ratio=ratio, staggering=staggering, **changes)
