"""Columns, tableaux and splittings drawn at random, the same for the same seed."""

from typing import Any

import numpy as np

from levelstride.column.column import Column
from levelstride.column.read import build
from levelstride.errors import InputError
from levelstride.splitting import resolve
from levelstride.splitting.splitting import Splitting
from levelstride.tableaux.lookup import find, names
from levelstride.tableaux.tableau import Tableau

SPLITS = (
    "sound",
    "sound+buoyancy",
    "sound+divergence",
    "sound+buoyancy+divergence",
    "sound+slope",
    "all-explicit",
    "sound+buoyancy+horizontal-pressure-gradient+horizontal-divergence",
)


def random_case(seed: int, *, most_layers: int = 8) -> tuple[Column, Tableau, Splitting]:
    """A column of a few layers with whatever it may have, and how it is stepped."""
    rng = np.random.default_rng(seed)
    while True:
        definition = _definition(rng, most_layers)
        tableau, splitting = find(str(rng.choice(names()))), resolve(str(rng.choice(SPLITS)))
        try:
            return build(definition), tableau, splitting
        except InputError:
            continue  # layers too thin or a step of thickness too large: draw again


def _definition(rng: np.random.Generator, most_layers: int) -> dict[str, Any]:
    layers, top_m = int(rng.integers(3, most_layers + 1)), float(rng.uniform(3e3, 2e4))
    airs: list[dict[str, Any]] = [
        {"kind": "standard"},
        {"kind": "isothermal", "temperature_k": float(rng.uniform(220, 290))},
        {
            "kind": "constant-n",
            "surface_temperature_k": 290.0,
            "buoyancy_frequency_per_s": float(rng.uniform(0.004, 0.02)),
        },
    ]
    definition: dict[str, Any] = {
        "levels": {
            "kind": "geometric",
            "layers": layers,
            "top_m": top_m,
            "lowest_layer_m": float(rng.uniform(0.2, 1.0) * top_m / layers),
        },
        "air": airs[rng.integers(len(airs))],
        "horizontal": {
            "grid_spacing_m": float(10 ** rng.uniform(2.5, 4.3)),
            "directions": int(rng.integers(1, 3)),
            "gradient": str(rng.choice(["staggered", "centred-2", "centred-4", "exact"])),
        },
        "column": {"staggering": str(rng.choice(["lorenz", "charney-phillips"]))},
    }
    extras: dict[str, tuple[float, dict[str, Any]]] = {
        "terrain": (0.4, {"slope": float(rng.uniform(0.02, 0.5))}),
        "wind": (0.3, {"kind": "uniform", "speed_m_per_s": float(rng.uniform(3, 40))}),
        "reference": (0.2, {"kind": "isothermal", "temperature_k": 300.0}),
        "upper_damping": (0.2, {"rate_per_s": 0.05, "base_m": 0.7 * top_m}),
        "updraft": (0.2, {"speed_m_per_s": float(rng.uniform(0.5, 10))}),
    }
    return definition | {name: x for name, (p, x) in extras.items() if rng.random() < p}
