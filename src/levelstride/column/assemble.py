"""From a definition to the records of the column; what tables mean together is checked here."""

import hashlib
import json
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from . import terrain as ground
from .air import Background
from .air_states import ascent_of, check_reach, profile_of
from .arrays import Array, read_only
from .background import Motion, evaluate
from .column import Advice, Column, Horizontal
from .definition import (
    Definition,
    HybridPressureLevels,
    LinearWind,
    OneAir,
    SoundingAir,
    TableWind,
    UniformWind,
)
from .embedding import content_digest
from .level_sets import hybrid_interfaces, interfaces_of
from .levels import Levels
from .problems import Problems
from .profiles import Profile
from .wind import between, sine_updraft, table_updraft


@dataclass(slots=True)
class _Parts:
    """What has been made so far; None or empty where a mistake stands in the way."""

    levels: Levels | None = None
    airs: list[tuple[str, OneAir, Profile]] = field(default_factory=list)
    reference: Profile | None = None


def _place(definition: Definition, index: int) -> str:
    return "air" if len(definition.air) == 1 else f"air[{index}]"


def _name_airs(definition: Definition, problems: Problems) -> list[str]:
    names: list[str] = []
    for i, air in enumerate(definition.air):
        name = air.name or air.kind
        if air.name is None:
            count = 2
            while name in names:
                name, count = f"{air.kind} {count}", count + 1
        elif name in names:
            problems.add(f"{_place(definition, i)}.name", "names must differ; choose another", name)
        names.append(name)
    return names


def _altitude(definition: Definition) -> float:
    return definition.terrain.surface_altitude_m


def _make_levels(
    definition: Definition, profile: Profile | None, problems: Problems
) -> Levels | None:
    altitude = _altitude(definition)
    if isinstance(definition.levels, HybridPressureLevels):
        if profile is None:
            return None
        heights = hybrid_interfaces(definition.levels, profile, altitude, problems)
        return None if heights is None else Levels(heights, altitude)
    heights = interfaces_of(definition.levels, problems)
    if heights is None:
        return None
    if definition.terrain.compression == "linear":
        if altitude >= heights[-1]:
            problems.add(
                "terrain.surface_altitude_m",
                f"must lie below the top of the level set at {heights[-1]:g} m, into which the "
                "layers are "
                'squeezed; raise the top or write compression = "none"',
                altitude,
            )
            return None
        heights = ground.squeezed(heights, altitude)
    return Levels(heights, altitude)


def _make_parts(
    definition: Definition, broken: frozenset[str], names: list[str], problems: Problems
) -> _Parts:
    parts = _Parts()
    if "terrain" in broken:
        return parts
    altitude = _altitude(definition)
    profiles: list[Profile | None] = []
    if "air" not in broken:
        for i, air in enumerate(definition.air):
            profiles.append(profile_of(air, _place(definition, i), altitude, problems))
    if definition.reference is not None and "reference" not in broken:
        parts.reference = profile_of(definition.reference, "reference", altitude, problems)
    if "levels" not in broken:
        first = profiles[0] if profiles else None
        parts.levels = _make_levels(definition, first, problems)
    for name, air, profile in zip(names, definition.air, profiles, strict=False):
        if profile is not None:
            parts.airs.append((name, air, profile))
    return parts


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


def _check_optional_tables(
    definition: Definition, broken: frozenset[str], problems: Problems
) -> None:
    """Check what the optional tables demand of themselves."""
    wind, updraft, rotation = definition.wind, definition.updraft, definition.rotation
    if isinstance(wind, TableWind):
        names = ("heights_m", "speeds_m_per_s")
        _check_table("wind", wind.heights_m, wind.speeds_m_per_s, names, problems)
    if updraft is not None:
        listed = updraft.heights_m is not None or updraft.speeds_m_per_s is not None
        if listed == (updraft.speed_m_per_s is not None):
            problems.add(
                "updraft", "needs either speed_m_per_s or heights_m with speeds_m_per_s; give one"
            )
        elif listed:
            names = ("heights_m", "speeds_m_per_s")
            heights, speeds = updraft.heights_m or [], updraft.speeds_m_per_s or []
            _check_table("updraft", heights, speeds, names, problems)
    if rotation is not None and (rotation.coriolis_per_s is None) == (
        rotation.latitude_deg is None
    ):
        problems.add("rotation", "needs exactly one of coriolis_per_s and latitude_deg; give one")
    diffusion = definition.diffusion
    if diffusion is not None:
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
    terrain = definition.terrain
    if (terrain.decay == "exponential") != (terrain.decay_height_m is not None):
        problems.add(
            "terrain.decay_height_m",
            'belongs to decay = "exponential" and only to it; add or remove it',
        )
    horizontal = definition.horizontal
    if (horizontal.gradient == "given") != (horizontal.largest_gradient_per_m is not None):
        problems.add(
            "horizontal.largest_gradient_per_m",
            'belongs to gradient = "given" and only to it; add or remove it',
        )
    split = definition.split
    if split is not None and "name" in split and len(split) > 1:
        problems.add("split", "has a name and single terms; keep either", split["name"])
    _check_wind_of_soundings(definition, broken, problems)


def _check_wind_of_soundings(
    definition: Definition, broken: frozenset[str], problems: Problems
) -> None:
    if definition.wind is None or definition.wind.kind != "sounding" or "air" in broken:
        return
    for i, air in enumerate(definition.air):
        if not isinstance(air, SoundingAir) or air.winds_m_per_s is None:
            problems.add(
                "wind.kind",
                f"{_place(definition, i)} has no wind; every air state must be a sounding with "
                "the column "
                "wind_m_per_s, or give another kind of wind",
                "sounding",
            )


def _check_on_levels(definition: Definition, parts: _Parts, problems: Problems) -> None:
    levels = parts.levels
    if levels is None:
        return
    lid = levels.surface_altitude_m + levels.top_m
    for i, (_, air, profile) in enumerate(parts.airs):
        check_reach(air, profile, _place(definition, i), lid, problems)
    if parts.reference is not None and definition.reference is not None:
        check_reach(definition.reference, parts.reference, "reference", lid, problems)
    damping = definition.upper_damping
    if damping is not None and damping.base_m >= levels.top_m:
        problems.add(
            "upper_damping.base_m",
            f"must lie below the lid, which is {levels.top_m:g} m above the ground; lower it",
            damping.base_m,
        )


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


def _background(
    definition: Definition, name: str, air: OneAir, profile: Profile, levels: Levels
) -> Background:
    altitude = levels.surface_altitude_m
    updraft_c, updraft_f = _updraft(definition, levels)
    motion = Motion(
        wind_c=_wind_at(definition, air, profile, levels.centres_m, altitude),
        wind_f=_wind_at(definition, air, profile, levels.interfaces_m, altitude),
        updraft_c=updraft_c,
        updraft_f=updraft_f,
    )
    return evaluate(name, profile, levels, motion)


def _reference(definition: Definition, parts: _Parts, levels: Levels) -> Background | None:
    """Reference state, with the wind of the first air unless it is an ascent with its own."""
    if parts.reference is None or definition.reference is None:
        return None
    _, first_air, first_profile = parts.airs[0]
    own = definition.reference
    made = _background(definition, own.name or "reference", own, parts.reference, levels)
    if isinstance(own, SoundingAir) and own.winds_m_per_s is not None:
        return made
    moved = _background(definition, "", first_air, first_profile, levels)
    motion = Motion(moved.wind_c, moved.wind_f, moved.updraft_c, moved.updraft_f)
    return evaluate(made.name, parts.reference, levels, motion)


def _slope(definition: Definition, levels: Levels) -> Array:
    terrain = definition.terrain
    if terrain.decay_height_m is not None:
        return ground.exponential_slope(terrain.slope, levels.interfaces_m, terrain.decay_height_m)
    return ground.linear_slope(terrain.slope, levels.interfaces_m)


def _diffusivity(definition: Definition, at_m: Array) -> Array:
    diffusion = definition.diffusion
    if diffusion is None:
        return np.zeros_like(at_m)
    if diffusion.heights_m is None or diffusion.values_m2_per_s is None:
        return np.full_like(at_m, diffusion.vertical_m2_per_s or 0.0)
    return between(read_only(diffusion.heights_m), read_only(diffusion.values_m2_per_s), at_m)


def _coriolis(definition: Definition) -> float:
    rotation = definition.rotation
    if rotation is None:
        return 0.0
    if rotation.latitude_deg is not None:
        return ground.coriolis(rotation.latitude_deg)
    return rotation.coriolis_per_s or 0.0


def _horizontal(definition: Definition) -> Horizontal:
    table = definition.horizontal
    return Horizontal(
        grid_spacing_m=table.grid_spacing_m,
        gradient=table.gradient,
        directions=table.directions,
        largest_gradient_per_m=table.largest_gradient_per_m,
        advection=definition.wind.advection if definition.wind is not None else "upwind-3",
    )


def _advice(definition: Definition) -> Advice:
    plain: dict[str, Any] = definition.advice.model_dump()
    for name in ("tableaux", "splits", "divides_s"):
        plain[name] = tuple(plain[name])
    return Advice(**plain)


def _split(definition: Definition) -> dict[str, str] | str | None:
    split = definition.split
    return split["name"] if split is not None and "name" in split else split


def digest_of(definition: dict[str, Any]) -> str:
    """SHA-256 of a resolved definition as canonical JSON."""
    named = definition["advice"].get("tableau_file")
    if named is not None:
        advice = definition["advice"] | {"tableau_file": content_digest(named)}
        definition = definition | {"advice": advice}
    text = json.dumps(definition, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()


def assemble(
    definition: Definition, broken: frozenset[str], source: str, problems: Problems
) -> Column:
    """Make the column.

    Parameters
    ----------
    definition : Definition
        The model of the file, referenced files embedded.
    broken : frozenset of str
        Tables that are stand-ins for broken ones.
    source : str
        The file as the user named it.
    problems : Problems
        The mistakes found so far.

    Returns
    -------
    Column
        The frozen records.

    Raises
    ------
    InputError
        With every mistake found, if there is any.
    """
    names = _name_airs(definition, problems)
    parts = _make_parts(definition, broken, names, problems)
    _check_optional_tables(definition, broken, problems)
    _check_on_levels(definition, parts, problems)
    problems.raise_if_any()
    levels = parts.levels
    assert levels is not None
    plain = definition.model_dump(exclude_none=True)
    damping, diffusion = definition.upper_damping, definition.diffusion
    divergence = definition.divergence_damping
    return Column(
        title=definition.title,
        source=source,
        digest=digest_of(plain),
        levels=levels,
        airs=tuple(_background(definition, *state, levels) for state in parts.airs),
        reference=_reference(definition, parts, levels),
        horizontal=_horizontal(definition),
        staggering=definition.column.staggering,
        slope_f=_slope(definition, levels),
        lowest_slope_gradient=definition.terrain.lowest_slope_gradient,
        vertical_advection=definition.updraft.scheme if definition.updraft else "upwind-3",
        diffusivity_c=_diffusivity(definition, levels.centres_m),
        diffusivity_f=_diffusivity(definition, levels.interfaces_m),
        horizontal_diffusion=diffusion.horizontal_coefficient if diffusion else 0.0,
        horizontal_diffusion_order=diffusion.horizontal_order if diffusion else 1,
        divergence_damping=divergence.coefficient_m2_per_s if divergence else 0.0,
        divergence_damping_form=divergence.form if divergence else "horizontal",
        upper_damping_f=ground.absorbing_layer(
            damping.rate_per_s, damping.base_m, levels.interfaces_m
        )
        if damping
        else np.zeros(levels.nlev + 1),
        coriolis_per_s=_coriolis(definition),
        wind_given=definition.wind is not None,
        split=_split(definition),
        advice=_advice(definition),
        definition=plain,
    )
