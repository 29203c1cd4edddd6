"""From a [levels] table to interface heights, with every mistake named."""

import os
from collections.abc import Callable, Sequence
from typing import Final

import numpy as np

from . import grids
from .arrays import Array
from .definition import (
    GeometricLevels,
    HybridPressureLevels,
    Table,
    TableLevels,
    TanhLevels,
    UniformLevels,
)
from .problems import Problems
from .profiles import Profile

THINNEST: Final = 1e-3
"""Layers thinner than this are taken for a mistake [m]."""

HIGHEST: Final = 1e6
"""Heights above this are taken for a mistake [m]."""

Label = Callable[[int], str]


def memory_bytes() -> int:
    """Physical memory of this machine [bytes]; 8 GB where the system does not say."""
    try:
        return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    except (AttributeError, OSError, ValueError):
        return 8_000_000_000


def most_layers() -> int:
    """Layers whose dense step matrices fit into memory.

    Up to 5 unknowns per layer and 4 complex matrices at once: 4 * 16 * (5 nlev)^2 bytes.
    """
    return int((memory_bytes() / 1600.0) ** 0.5)


def check_layers(layers: int, problems: Problems, where: str = "levels.layers") -> bool:
    """Refuse more layers than memory allows, before anything of that size is made."""
    limit = most_layers()
    if layers <= limit:
        return True
    size = "" if layers > 10**9 else f" ({1600.0 * layers**2 / 1e9:.0f} GB of step matrices)"
    problems.add(
        where,
        f"more layers than the memory of this machine allows{size}; use at most {limit}",
        layers,
    )
    return False


def check_heights(
    values: Sequence[float],
    at: str,
    order: str,
    label: Label,
    problems: Problems,
    file: str | None = None,
) -> bool:
    """Check listed heights: number, finiteness, order, thickness, ground."""
    heights = np.asarray(values, dtype=np.float64)
    needed = 3 if at == "interfaces" else 2
    if heights.size < needed:
        problems.add(
            label(-1),
            f"has {heights.size} heights; a column has at least two layers: list {needed} or more "
            f"{at}",
            file=file,
        )
        return False
    if not check_layers(heights.size - (at == "interfaces"), problems, label(-1)):
        return False
    bad = np.flatnonzero(~(np.abs(heights) <= HIGHEST))
    if bad.size:
        problems.add_many(
            [label(int(i)) for i in bad],
            f"must be a finite height of at most {HIGHEST:g} m; give a number for every level",
            float(heights[bad[0]]),
            file=file,
        )
        return False
    return _check_order(heights, order, label, problems, file) and _check_ground(
        heights, at, order, label, problems, file
    )


def _check_order(
    heights: Array, order: str, label: Label, problems: Problems, file: str | None
) -> bool:
    steps = np.diff(heights)
    upward = steps if order == "bottom-up" else -steps
    if np.all(upward >= THINNEST):
        return True
    if np.all(upward < 0.0):
        other = "top-down" if order == "bottom-up" else "bottom-up"
        problems.add(
            label(-1),
            f'the heights run {other} but order says "{order}"; write order = "{other}"',
            file=file,
        )
        return False
    repeated = np.flatnonzero(np.abs(steps) < THINNEST)
    if repeated.size:
        problems.add_many(
            [label(int(i) + 1) for i in repeated],
            f"repeats the height before it; layers must be at least {THINNEST:g} m thick: remove "
            "it",
            float(heights[repeated[0] + 1]),
            file=file,
        )
    turned = np.flatnonzero(upward <= -THINNEST)
    if turned.size:
        first = int(turned[0])
        problems.add_many(
            [label(int(i) + 1) for i in turned],
            f"follows {heights[first]:g} m, which makes a layer of negative thickness "
            f'({upward[first]:g} m); with order = "{order}" heights must '
            f"{'rise' if order == 'bottom-up' else 'fall'} from each to the next",
            float(heights[first + 1]),
            file=file,
        )
    return False


def _check_ground(
    heights: Array, at: str, order: str, label: Label, problems: Problems, file: str | None
) -> bool:
    index = 0 if order == "bottom-up" else heights.size - 1
    lowest = float(heights[index])
    if at == "interfaces" and lowest != 0.0:
        problems.add(
            label(index),
            "the lowest interface is the ground and must be 0; heights count from the ground (if "
            "these "
            'are layer centres write at = "centres"; if altitudes, subtract the ground\'s)',
            lowest,
            file=file,
        )
        return False
    if at == "centres":
        try:
            made = grids.interfaces_from_centres(heights if order == "bottom-up" else heights[::-1])
        except ValueError as error:
            problems.add(label(-1), str(error), file=file)
            return False
        if np.min(np.diff(made)) < THINNEST:
            problems.add(
                label(-1),
                f"these centres make a layer thinner than {THINNEST:g} m; give the interfaces "
                'instead, with at = "interfaces"',
                file=file,
            )
            return False
    return True


def _listed(table: TableLevels, problems: Problems) -> Array | None:
    def label(i: int) -> str:
        return "levels.heights_m" + (f"[{i}]" if i >= 0 else "")

    if not check_heights(table.heights_m, table.at, table.order, label, problems):
        return None
    heights = np.array(table.heights_m, dtype=np.float64)
    heights = heights if table.order == "bottom-up" else heights[::-1]
    return heights if table.at == "interfaces" else grids.interfaces_from_centres(heights)


def interfaces_of(table: Table, problems: Problems) -> Array | None:
    """Interface heights of every kind of level set that needs no air.

    Parameters
    ----------
    table : Table
        The [levels] table, any kind but hybrid-pressure; files already embedded.
    problems : Problems
        Where mistakes are added.

    Returns
    -------
    (nlev+1,) array or None
        Heights above the ground before compression [m]; None where there was a mistake.
    """
    if isinstance(table, TableLevels):
        return _listed(table, problems)
    if not isinstance(table, UniformLevels | GeometricLevels | TanhLevels):
        return None
    if not check_layers(table.layers, problems):
        return None
    try:
        if isinstance(table, UniformLevels):
            heights = grids.uniform(table.layers, table.top_m)
        elif isinstance(table, GeometricLevels):
            heights = grids.geometric(table.layers, table.top_m, table.lowest_layer_m)
        else:
            heights = grids.tanh(table.layers, table.top_m, table.lowest_layer_m)
    except ValueError as error:
        lowest = getattr(table, "lowest_layer_m", None)
        problems.add("levels.lowest_layer_m", str(error), lowest)
        return None
    thinnest = float(np.min(np.diff(heights)))
    if thinnest < THINNEST:
        problems.add(
            "levels",
            f"these numbers make a layer of {thinnest:.2g} m; layers must be at least "
            f"{THINNEST:g} m thick: use fewer layers, another lowest_layer_m or a higher top_m",
        )
        return None
    return heights


def hybrid_interfaces(
    table: HybridPressureLevels, profile: Profile, ground_m: float, problems: Problems
) -> Array | None:
    """Interface heights of hybrid-pressure levels in the first air state, (nlev+1,) [m], or None.

    The pressures are p = a p_ref + b p_s with p_s the pressure of that air at the ground; heights
    follow by inverting its hydrostatic profile.
    """
    pressures = _hybrid_pressures(table, profile, ground_m, problems)
    if pressures is None:
        return None
    if np.isfinite(profile.ceiling_m):
        least = float(profile.pressure(np.array([profile.ceiling_m]))[0])
        if pressures[-1] < least:
            problems.add(
                "levels",
                f"the lid at {pressures[-1]:g} Pa lies above the first air state, which ends at "
                f"{profile.ceiling_m / 1000.0:g} km with {least:g} Pa; cut the highest interfaces "
                "or use another air",
            )
            return None
    with np.errstate(invalid="ignore", divide="ignore"):
        heights = profile.altitude_of(pressures) - ground_m
    heights[0] = 0.0
    if not np.all(np.isfinite(heights)) or heights[-1] > HIGHEST:
        problems.add(
            "levels",
            f"the first air state never reaches the lid's pressure of {pressures[-1]:g} Pa; cut "
            "the highest interfaces or use another air",
        )
        return None
    if np.min(np.diff(heights)) < THINNEST:
        where = int(np.argmin(np.diff(heights)))
        problems.add(
            "levels",
            f"layer {where} (from the ground) is thinner than {THINNEST:g} m; merge it with the "
            "next",
        )
        return None
    return heights


def _hybrid_pressures(
    table: HybridPressureLevels, profile: Profile, ground_m: float, problems: Problems
) -> Array | None:
    name = "a" if table.a is not None else "ap"
    first = table.a if table.a is not None else table.ap
    if first is None or (table.a is not None and table.ap is not None):
        problems.add("levels", "needs exactly one of a [1] and ap [Pa] beside b; give one")
        return None
    if len(first) != len(table.b) or len(table.b) < 3:
        problems.add(
            f"levels.{name}",
            f"{name} has {len(first)} and b {len(table.b)} entries; both need one per interface, "
            "ground and lid included, at least 3",
        )
        return None
    if not check_layers(len(table.b) - 1, problems, "levels.b"):
        return None
    scale = table.reference_pressure_pa if table.a is not None else 1.0
    surface = float(profile.pressure(np.array([ground_m]))[0])
    pressures = scale * np.array(first) + surface * np.array(table.b)
    if table.order == "top-down":
        pressures = pressures[::-1]
    falls = np.diff(pressures) < 0.0
    if not falls.any():
        other = "top-down" if table.order == "bottom-up" else "bottom-up"
        problems.add(
            "levels.order", f'the pressures run {other}; write order = "{other}"', table.order
        )
    elif not falls.all():
        at = int(np.flatnonzero(~falls)[0])
        problems.add(
            f"levels.{name}",
            f"with surface pressure {surface:.1f} Pa the pressure does not fall from interface "
            f"{at} ({pressures[at]:.6g} Pa) to {at + 1} ({pressures[at + 1]:.6g} Pa), counted "
            "from the ground; it must fall at every interface",
        )
    elif abs(pressures[0] - surface) > 1e-6 * surface:
        problems.add(
            f"levels.{name}",
            f"the lowest interface lies at {pressures[0]:.6g} Pa, not at the surface pressure of "
            f"{surface:.6g} Pa; it must have {name} = 0 and b = 1",
        )
    elif pressures[-1] <= 0.0:
        problems.add(
            f"levels.{name}",
            "the highest interface has no pressure, so the lid would be infinitely high; cut "
            "that interface or give it a pressure above 0",
        )
    else:
        return pressures
    return None
