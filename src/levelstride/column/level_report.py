"""The arithmetic behind ``levelstride check``: what a level set and its air look like."""

from collections.abc import Sized
from dataclasses import dataclass
from typing import Final

import numpy as np

from .air import Background
from .arrays import Array
from .column import Column

LARGEST_RATIO: Final = 1.2
"""Thickness ratio of neighbouring layers above which a jump is reported [1]."""

LEAST_RICHARDSON: Final = 0.25
"""Richardson number below which shear may break a layer up (Miles 1961, Howard 1961) [1]."""


@dataclass(frozen=True, slots=True)
class Jump:
    """Two neighbouring layers of very different thickness.

    Parameters
    ----------
    layer : int
        The lower of the two, counted from the ground and from 0.
    height_m : float
        Height of the interface between them above the ground [m].
    ratio : float
        Thicker over thinner [1].
    """

    layer: int
    height_m: float
    ratio: float


@dataclass(frozen=True, slots=True)
class AirReport:
    """One air state on the levels; ranges are (smallest, largest).

    Parameters
    ----------
    name : str
        Name of the air state.
    sound_speed_m_per_s : (float, float)
        Speed of sound c at layer centres [m/s].
    buoyancy_frequency_per_s : (float, float) or None
        Brunt-Vaisala frequency N of the layers that are stable [1/s]; None where none is.
    wind_m_per_s : (float, float)
        Wind U at layer centres [m/s].
    unstable_layers : tuple of int
        Layers with N^2 < 0, from differences between their interfaces.
    unstable_interfaces : tuple of int
        Interior interfaces with N^2 < 0, from differences between layer centres.
    sheared_layers : tuple of int
        Layers with shear whose Richardson number N^2/(dU/dz)^2 lies below 1/4.
    least_richardson : float or None
        Smallest Richardson number of a layer with shear; None without shear.
    """

    name: str
    sound_speed_m_per_s: tuple[float, float]
    buoyancy_frequency_per_s: tuple[float, float] | None
    wind_m_per_s: tuple[float, float]
    unstable_layers: tuple[int, ...]
    unstable_interfaces: tuple[int, ...]
    sheared_layers: tuple[int, ...]
    least_richardson: float | None


@dataclass(frozen=True, slots=True)
class LevelReport:
    """What ``levelstride check`` tells.

    Parameters
    ----------
    title, source, digest : str
        Of the column.
    layers : int
        Number of layers.
    lowest_layer_m, thickest_layer_m, top_m : float
        Thickness of the lowest and of the thickest layer, height of the lid above the ground [m].
    thinnest_layer_m : float
        Thickness of the thinnest layer [m].
    surface_altitude_m : float
        Altitude of the ground [m].
    largest_ratio : float
        Largest thickness ratio of neighbouring layers, thicker over thinner [1].
    jumps : tuple of Jump
        Every ratio above 1.2.
    steepness : float
        s_0 dx/dz_0: rise of the ground over one grid spacing in lowest layers [1].
    airs : tuple of AirReport
        The air states.
    reference : AirReport or None
        The reference state.
    findings : tuple of str
        What deserves attention, in plain words; none of it makes the file unusable.
    """

    title: str
    source: str
    digest: str
    layers: int
    lowest_layer_m: float
    thickest_layer_m: float
    thinnest_layer_m: float
    top_m: float
    surface_altitude_m: float
    largest_ratio: float
    jumps: tuple[Jump, ...]
    steepness: float
    airs: tuple[AirReport, ...]
    reference: AirReport | None
    findings: tuple[str, ...]

    @property
    def verdict(self) -> str:
        """One sentence: whether the file is sound."""
        if not self.findings:
            return "The file is sound."
        count = len(self.findings)
        points = "1 point deserves" if count == 1 else f"{count} points deserve"
        return f"The file is sound; {points} attention."


def thickness_jumps(interfaces_m: Array) -> tuple[float, tuple[Jump, ...]]:
    """Largest ratio of neighbouring thicknesses, and every one above 1.2.

    Parameters
    ----------
    interfaces_m : (nlev+1,) array
        Heights of the interfaces [m].
    """
    thickness = np.diff(interfaces_m)
    ratios = thickness[1:] / thickness[:-1]
    ratios = np.maximum(ratios, 1.0 / ratios)
    beyond = np.flatnonzero(ratios > LARGEST_RATIO * (1.0 + 1e-12))
    jumps = tuple(Jump(int(j), float(interfaces_m[j + 1]), float(ratios[j])) for j in beyond)
    return float(np.max(ratios)), jumps


def _range(values: Array) -> tuple[float, float]:
    return float(np.min(values)), float(np.max(values))


def _indices(mask: np.typing.NDArray[np.bool_], first: int = 0) -> tuple[int, ...]:
    return tuple(int(i) + first for i in np.flatnonzero(mask))


def describe_air(air: Background, thickness_m: Array) -> AirReport:
    """Describe one air state.

    Parameters
    ----------
    air : Background
        The air state.
    thickness_m : (nlev,) array
        Thickness of the layers [m].
    """
    shear_squared = (np.diff(air.wind_f) / thickness_m) ** 2
    sheared = shear_squared > 0.0
    richardson = air.n_squared_c[sheared] / shear_squared[sheared]
    below = np.zeros(thickness_m.size, dtype=np.bool_)
    below[sheared] = richardson < LEAST_RICHARDSON
    stable = air.n_squared_c[air.n_squared_c >= 0.0]
    return AirReport(
        name=air.name,
        sound_speed_m_per_s=_range(np.sqrt(air.sound_speed_squared_c)),
        buoyancy_frequency_per_s=_range(np.sqrt(stable)) if stable.size else None,
        wind_m_per_s=_range(air.wind_c),
        unstable_layers=_indices(air.n_squared_c < 0.0),
        unstable_interfaces=_indices(air.n_squared_f < 0.0, first=1),
        sheared_layers=_indices(below),
        least_richardson=float(np.min(richardson)) if richardson.size else None,
    )


def runs(indices: tuple[int, ...]) -> str:
    """Write indices as runs: 0-2, 7."""
    parts: list[str] = []
    start = previous = None
    for index in (*indices, None):
        if previous is not None and index != previous + 1:
            parts.append(str(start) if start == previous else f"{start}-{previous}")
            start = None
        start = index if start is None else start
        previous = index
    return ", ".join(parts)


def _count(things: Sized, noun: str) -> str:
    return f"{len(things)} {noun}" + ("" if len(things) == 1 else "s")


def _air_findings(air: AirReport, staggering: str) -> list[str]:
    found = []
    if staggering == "lorenz" and air.unstable_layers:
        found.append(
            f"{air.name}: N^2 < 0 in {_count(air.unstable_layers, 'layer')} "
            f"({runs(air.unstable_layers)}); the air itself convects there, and that growth is "
            "part of every answer"
        )
    if staggering == "charney-phillips" and air.unstable_interfaces:
        found.append(
            f"{air.name}: N^2 < 0 at {_count(air.unstable_interfaces, 'interface')} "
            f"({runs(air.unstable_interfaces)}); the air itself convects there, and that growth is "
            "part of every answer"
        )
    if air.sheared_layers:
        found.append(
            f"{air.name}: Richardson number below 1/4 in {_count(air.sheared_layers, 'layer')} "
            f"({runs(air.sheared_layers)}); shear may break them up"
        )
    return found


def _findings(
    column: Column, jumps: tuple[Jump, ...], steepness: float, airs: tuple[AirReport, ...]
) -> tuple[str, ...]:
    found = []
    if jumps:
        worst = max(jumps, key=lambda jump: jump.ratio)
        places = _count(jumps, "place")
        found.append(
            f"layer thickness jumps by more than {LARGEST_RATIO:g} in {places}; the largest ratio "
            f"is {worst.ratio:.3g}, {worst.height_m:.5g} m above the ground: waves are reflected "
            "there"
        )
    if abs(steepness) > 1.0:
        found.append(
            f"the ground rises by {abs(steepness):.3g} lowest layers over one grid spacing: slope "
            "terms left explicit will bite; search both treatments of lowest_slope_gradient"
        )
    for air in airs:
        found += _air_findings(air, column.staggering)
    if not column.wind_given:
        found.append("no wind was given: every limit is for air at rest")
        listed = column.definition["air"]
        if any("winds_m_per_s" in air for air in listed):
            found.append(
                'an ascent carries wind that is not used; write [wind] kind = "sounding" to use it'
            )
    return tuple(found)


def level_report(column: Column) -> LevelReport:
    """Describe the levels and the air of a column.

    Parameters
    ----------
    column : Column
        The column.

    Returns
    -------
    LevelReport
        Numbers and findings, layers counted from the ground and from 0.

    References
    ----------
    Miles, J. W. (1961), doi:10.1017/S0022112061000305; Howard, L. N. (1961),
    doi:10.1017/S0022112061000317.
    """
    levels = column.levels
    thickness = levels.thickness_m
    ratio, jumps = thickness_jumps(levels.interfaces_m)
    steepness = float(column.slope_f[0]) * column.horizontal.grid_spacing_m / float(thickness[0])
    airs = tuple(describe_air(air, thickness) for air in column.airs)
    reference = column.reference
    return LevelReport(
        title=column.title,
        source=column.source,
        digest=column.digest,
        layers=levels.nlev,
        lowest_layer_m=float(thickness[0]),
        thickest_layer_m=float(np.max(thickness)),
        thinnest_layer_m=float(np.min(thickness)),
        top_m=levels.top_m,
        surface_altitude_m=levels.surface_altitude_m,
        largest_ratio=ratio,
        jumps=jumps,
        steepness=steepness,
        airs=airs,
        reference=describe_air(reference, thickness) if reference is not None else None,
        findings=_findings(column, jumps, steepness, airs),
    )
