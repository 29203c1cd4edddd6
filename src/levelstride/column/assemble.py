"""From a definition to the records of the column; what tables mean together is checked here."""

import hashlib
import json
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from . import terrain as ground
from .air import Background
from .air_states import check_reach, profile_of
from .background import Motion, evaluate
from .column import Advice, Column, Horizontal
from .cross_checks import check_optional_tables, place
from .definition import Definition, HybridPressureLevels, OneAir, SoundingAir
from .embedding import content_digest
from .evaluation import background, coriolis, diffusivity, slope, upper_damping
from .level_sets import THINNEST, hybrid_interfaces, interfaces_of
from .levels import Levels
from .problems import Problems
from .profiles import Profile


@dataclass(slots=True)
class _Parts:
    """What has been made so far; None or empty where a mistake stands in the way."""

    levels: Levels | None = None
    airs: list[tuple[str, OneAir, Profile]] = field(default_factory=list)
    places: list[str] = field(default_factory=list)
    reference: Profile | None = None


def _name_airs(definition: Definition, problems: Problems) -> list[str]:
    names: list[str] = []
    for i, air in enumerate(definition.air):
        name = air.name or air.kind
        if air.name is None:
            count = 2
            while name in names:
                name, count = f"{air.kind} {count}", count + 1
        elif name in names:
            problems.add(f"{place(definition, i)}.name", "names must differ; choose another", name)
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
                'layers are squeezed; raise the top or write compression = "none"',
                altitude,
            )
            return None
        heights = ground.squeezed(heights, altitude)
        if np.min(np.diff(heights)) < THINNEST:
            problems.add(
                "terrain.surface_altitude_m",
                f"squeezes layers to less than {THINNEST:g} m; raise the top or write compression "
                '= "none"',
                altitude,
            )
            return None
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
            profiles.append(profile_of(air, place(definition, i), altitude, problems))
    if definition.reference is not None and "reference" not in broken:
        parts.reference = profile_of(definition.reference, "reference", altitude, problems)
    if "levels" not in broken:
        first = profiles[0] if profiles else None
        parts.levels = _make_levels(definition, first, problems)
    for i, profile in enumerate(profiles):
        if profile is not None:
            parts.airs.append((names[i], definition.air[i], profile))
            parts.places.append(place(definition, i))
    return parts


def _check_on_levels(definition: Definition, parts: _Parts, problems: Problems) -> None:
    levels = parts.levels
    if levels is None:
        return
    lid = levels.surface_altitude_m + levels.top_m
    for where, (_, air, profile) in zip(parts.places, parts.airs, strict=True):
        check_reach(air, profile, where, lid, problems)
    if parts.reference is not None and definition.reference is not None:
        check_reach(definition.reference, parts.reference, "reference", lid, problems)
    damping = definition.upper_damping
    if damping is not None and damping.base_m >= levels.top_m:
        problems.add(
            "upper_damping.base_m",
            f"must lie below the lid, which is {levels.top_m:g} m above the ground; lower it",
            damping.base_m,
        )


def _reference(definition: Definition, parts: _Parts, levels: Levels) -> Background | None:
    """Reference state, with the wind of the first air unless it is an ascent with its own."""
    if parts.reference is None or definition.reference is None:
        return None
    _, first_air, first_profile = parts.airs[0]
    own = definition.reference
    made = background(definition, own.name or "reference", own, parts.reference, levels)
    if isinstance(own, SoundingAir) and own.winds_m_per_s is not None:
        return made
    moved = background(definition, "", first_air, first_profile, levels)
    motion = Motion(moved.wind_c, moved.wind_f, moved.updraft_c, moved.updraft_f)
    return evaluate(made.name, parts.reference, levels, motion)


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
    check_optional_tables(definition, broken, problems)
    _check_on_levels(definition, parts, problems)
    problems.raise_if_any()
    levels = parts.levels
    assert levels is not None
    plain = definition.model_dump(exclude_none=True)
    diffusion, divergence = definition.diffusion, definition.divergence_damping
    return Column(
        title=definition.title,
        source=source,
        digest=digest_of(plain),
        levels=levels,
        airs=tuple(background(definition, *state, levels) for state in parts.airs),
        reference=_reference(definition, parts, levels),
        horizontal=_horizontal(definition),
        staggering=definition.column.staggering,
        slope_f=slope(definition, levels),
        lowest_slope_gradient=definition.terrain.lowest_slope_gradient,
        vertical_advection=definition.updraft.scheme if definition.updraft else "upwind-3",
        diffusivity_c=diffusivity(definition, levels.centres_m),
        diffusivity_f=diffusivity(definition, levels.interfaces_m),
        horizontal_diffusion=diffusion.horizontal_coefficient if diffusion else 0.0,
        horizontal_diffusion_order=diffusion.horizontal_order if diffusion else 1,
        divergence_damping=divergence.coefficient_m2_per_s if divergence else 0.0,
        divergence_damping_form=divergence.form if divergence else "horizontal",
        upper_damping_f=upper_damping(definition, levels),
        coriolis_per_s=coriolis(definition),
        wind_given=definition.wind is not None,
        split=_split(definition),
        advice=_advice(definition),
        definition=plain,
    )
