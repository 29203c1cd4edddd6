"""What the values of one table, or of two, demand of each other."""

import numpy as np

from .definition import Definition, SoundingAir, TableWind
from .problems import Problems


def place(definition: Definition, index: int) -> str:
    """Key path of an air state: air, or air[i] where there are several."""
    return "air" if len(definition.air) == 1 else f"air[{index}]"


def _check_table(
    where: str,
    heights: list[float],
    values: list[float],
    names: tuple[str, str],
    problems: Problems,
) -> bool:
    if len(heights) != len(values) or not heights:
        problems.add(
            f"{where}.{names[1]}",
            f"has {len(values)} entries and {names[0]} {len(heights)}; give one per height",
        )
        return False
    wrong = np.flatnonzero(np.diff(heights) < 1e-3)
    if wrong.size:
        first = int(wrong[0]) + 1
        problems.add_many(
            [f"{where}.{names[0]}[{int(i) + 1}]" for i in wrong],
            f"must lie above the height before it ({heights[first - 1]:g} m); list heights upward",
            heights[first],
        )
        return False
    return True


def _check_motion(definition: Definition, problems: Problems) -> None:
    wind, updraft = definition.wind, definition.updraft
    names = ("heights_m", "speeds_m_per_s")
    if isinstance(wind, TableWind):
        _check_table("wind", wind.heights_m, wind.speeds_m_per_s, names, problems)
    if updraft is None:
        return
    listed = updraft.heights_m is not None or updraft.speeds_m_per_s is not None
    if listed == (updraft.speed_m_per_s is not None):
        problems.add(
            "updraft", "needs either speed_m_per_s or heights_m with speeds_m_per_s; give one"
        )
    elif listed:
        heights, speeds = updraft.heights_m or [], updraft.speeds_m_per_s or []
        _check_table("updraft", heights, speeds, names, problems)


def _check_diffusion(definition: Definition, problems: Problems) -> None:
    diffusion = definition.diffusion
    if diffusion is None:
        return
    listed = diffusion.heights_m is not None or diffusion.values_m2_per_s is not None
    if listed and diffusion.vertical_m2_per_s is not None:
        problems.add(
            "diffusion",
            "has both vertical_m2_per_s and a table of heights_m and values_m2_per_s; keep one",
        )
    elif listed:
        names = ("heights_m", "values_m2_per_s")
        heights, values = diffusion.heights_m or [], diffusion.values_m2_per_s or []
        _check_table("diffusion", heights, values, names, problems)


def _check_companion(
    key: str, value: float | None, choice: str, *, chosen: bool, problems: Problems
) -> None:
    """A key that one choice of another key needs and every other choice refuses."""
    if chosen and value is None:
        problems.add(key, f"this key is missing; {choice} needs it: add it")
    elif not chosen and value is not None:
        problems.add(key, f"goes with {choice} only; remove it or write {choice}", value)


def check_optional_tables(
    definition: Definition, broken: frozenset[str], problems: Problems
) -> None:
    """Check what tables demand of themselves and of each other, levels and air apart.

    Parameters
    ----------
    definition : Definition
        The model of the file, referenced files embedded.
    broken : frozenset of str
        Tables that are stand-ins and cannot be judged.
    problems : Problems
        Where mistakes are added.
    """
    _check_motion(definition, problems)
    _check_diffusion(definition, problems)
    _check_wind_of_soundings(definition, broken, problems)
    rotation, terrain = definition.rotation, definition.terrain
    if rotation and (rotation.coriolis_per_s is None) == (rotation.latitude_deg is None):
        problems.add("rotation", "needs exactly one of coriolis_per_s and latitude_deg; give one")
    _check_companion(
        "terrain.decay_height_m",
        terrain.decay_height_m,
        'decay = "exponential"',
        chosen=terrain.decay == "exponential",
        problems=problems,
    )
    _check_companion(
        "horizontal.largest_gradient_per_m",
        definition.horizontal.largest_gradient_per_m,
        'gradient = "given"',
        chosen=definition.horizontal.gradient == "given",
        problems=problems,
    )
    split = definition.split
    if split is not None and "name" in split and len(split) > 1:
        problems.add("split", "has a name and single terms; keep either", split["name"])


def _check_wind_of_soundings(
    definition: Definition, broken: frozenset[str], problems: Problems
) -> None:
    if definition.wind is None or definition.wind.kind != "sounding" or "air" in broken:
        return
    for i, air in enumerate(definition.air):
        if not isinstance(air, SoundingAir) or air.winds_m_per_s is None:
            problems.add(
                "wind.kind",
                f"{place(definition, i)} has no wind; every air state must be a sounding with the "
                "column wind_m_per_s, or give another kind of wind",
                "sounding",
            )
