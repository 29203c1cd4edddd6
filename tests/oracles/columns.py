"""Columns for tests, made from plain records: random ones, and isothermal ones with known answers.

The random backgrounds are not in hydrostatic balance on purpose: what the operator promises must
hold whatever the numbers are.
"""

from dataclasses import replace

import numpy as np
from hypothesis import strategies as st

from levelstride.column.air import Background
from levelstride.column.background import Motion, evaluate
from levelstride.column.column import Advice, Column, Horizontal
from levelstride.column.levels import Levels
from levelstride.column.profiles import PiecewiseLinearAir
from levelstride.operator.wave import Wave

STAGGERINGS = ("charney-phillips", "lorenz")
GRADIENTS = ("staggered", "centred-2", "centred-4", "exact", "given")
ADVECTIONS = ("centred-2", "centred-4", "centred-6", "upwind-3", "upwind-5")
VERTICAL_ADVECTIONS = ("centred", "upwind-1", "upwind-3")


def column_of(levels, airs, *, horizontal=None, **changes):
    """A column at rest on flat ground without damping, but for ``changes``."""
    n = levels.nlev
    plain = {
        "title": "test",
        "source": "<memory>",
        "digest": "",
        "reference": None,
        "staggering": "charney-phillips",
        "slope_f": np.zeros(n + 1),
        "lowest_slope_gradient": "half",
        "vertical_advection": "centred",
        "diffusivity_c": np.zeros(n),
        "diffusivity_f": np.zeros(n + 1),
        "horizontal_diffusion": 0.0,
        "horizontal_diffusion_order": 1,
        "divergence_damping": 0.0,
        "divergence_damping_form": "horizontal",
        "upper_damping_f": np.zeros(n + 1),
        "coriolis_per_s": 0.0,
        "wind_given": False,
        "split": None,
        "advice": Advice(),
        "definition": {},
    }
    horizontal = horizontal or Horizontal(3000.0, "staggered", 1)
    return Column(levels=levels, airs=tuple(airs), horizontal=horizontal, **(plain | changes))


def resting(levels):
    n = levels.nlev
    return Motion(np.zeros(n), np.zeros(n + 1), np.zeros(n), np.zeros(n + 1))


def isothermal_air(levels, temperature_k, motion=None):
    profile = PiecewiseLinearAir(
        nodes_m=np.array([0.0]),
        temperatures_k=np.array([temperature_k]),
        anchor_m=0.0,
        anchor_pa=101325.0,
    )
    return evaluate("isothermal", profile, levels, motion or resting(levels))


def isothermal_column(nlev=40, top_m=20e3, temperature_k=250.0, ratio=1.0, **changes):
    """An isothermal column; each layer ``ratio`` times as thick as the one below."""
    thickness = ratio ** np.arange(nlev)
    interfaces = np.concatenate([[0.0], np.cumsum(thickness)]) * top_m / thickness.sum()
    levels = Levels(interfaces)
    return column_of(levels, [isothermal_air(levels, temperature_k)], **changes)


def _array(rng, n, low, high):
    return rng.uniform(low, high, n)


def random_air(rng, n, levels, *, stable=True, moving=False):
    """Independent random numbers for everything but the plain differences of theta0."""
    theta_c = 280.0 + np.cumsum(_array(rng, n, 0.05, 12.0))
    theta_f = 280.0 + np.cumsum(_array(rng, n + 1, 0.05, 12.0))
    if not stable:
        theta_c, theta_f = rng.permutation(theta_c), rng.permutation(theta_f)
    still = np.zeros(n + 1)
    wind_f = _array(rng, n + 1, -40, 40) if moving else still
    wind_c = _array(rng, n, -40, 40) if moving else still[1:]
    updraft_f, updraft_c = still, still[1:]
    if moving:
        updraft_f = np.concatenate([[0.0], _array(rng, n - 1, -3, 3), [0.0]])
        updraft_c = _array(rng, n, -3, 3)
    return Background(
        name="random",
        temperature_c=_array(rng, n, 200, 320),
        temperature_f=_array(rng, n + 1, 200, 320),
        pressure_c=_array(rng, n, 1e3, 1e5),
        pressure_f=_array(rng, n + 1, 1e3, 1e5),
        theta_c=theta_c,
        theta_f=theta_f,
        density_c=_array(rng, n, 0.05, 1.3),
        density_f=_array(rng, n + 1, 0.05, 1.3),
        sound_speed_squared_c=_array(rng, n, 7e4, 1.3e5),
        sound_speed_squared_f=_array(rng, n + 1, 7e4, 1.3e5),
        dtheta_dz_c=np.diff(theta_f) / levels.thickness_m,
        dtheta_dz_f=np.diff(theta_c) / levels.spacing_m,
        wind_c=wind_c,
        wind_f=wind_f,
        updraft_c=updraft_c,
        updraft_f=updraft_f,
    )


def random_column(seed, *, everything=False, stable=True, reference=False, **changes):
    """A random irregular column; ``everything`` switches every term on."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(2, 12))
    thickness = np.exp(rng.uniform(np.log(5.0), np.log(2000.0), n))
    levels = Levels(np.concatenate([[0.0], np.cumsum(thickness)]))
    gradient = rng.choice(GRADIENTS)
    horizontal = Horizontal(
        grid_spacing_m=float(rng.uniform(100, 1e5)),
        gradient=str(gradient),
        directions=int(rng.integers(1, 3)),
        largest_gradient_per_m=1.7e-3 if gradient == "given" else None,
        advection=str(rng.choice(ADVECTIONS)),
    )
    parts = {
        "staggering": str(rng.choice(STAGGERINGS)),
        "slope_f": rng.uniform(-0.5, 0.5, n + 1),
        "lowest_slope_gradient": str(rng.choice(["half", "full"])),
        "coriolis_per_s": float(rng.choice([0.0, 1.2e-4])),
    }
    if everything:
        parts |= {
            "vertical_advection": str(rng.choice(VERTICAL_ADVECTIONS)),
            "diffusivity_c": rng.uniform(0, 50, n),
            "diffusivity_f": rng.uniform(0, 50, n + 1),
            "horizontal_diffusion": float(rng.uniform(0, 10)),
            "horizontal_diffusion_order": int(rng.integers(1, 4)),
            "divergence_damping": float(rng.uniform(1, 1e4)),
            "divergence_damping_form": str(rng.choice(["horizontal", "three-dimensional"])),
            "upper_damping_f": rng.uniform(0, 0.1, n + 1),
        }
    airs = [random_air(rng, n, levels, stable=stable, moving=everything)]
    base = random_air(rng, n, levels, stable=stable, moving=everything) if reference else None
    column = column_of(levels, airs, horizontal=horizontal, reference=base, **parts)
    return replace(column, **changes) if changes else column


def random_wave(seed, column):
    rng = np.random.default_rng(seed + 1)
    return Wave(
        float(rng.uniform(0.01, 1)) * np.pi / column.horizontal.grid_spacing_m, column.horizontal
    )


seeds = st.integers(0, 2**32 - 2)
