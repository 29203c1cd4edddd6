"""The record of what bites: the critical state of a wave, or a frozen row."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.results.biting import Bites, FieldProfile
from levelstride.stability.bites import ALTERNATES, anatomy, critical_state
from levelstride.stability.courant import CourantLimit
from levelstride.stability.portrait import Profile, portrait
from levelstride.stability.spectrum import steepest_wavenumber
from levelstride.stability.step_limit import Bracket
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import StableStep

DIGITS = 7
"""Digits of a profile that are kept: it is a picture."""

SAME = 1e-6
"""Relative difference up to which two wavenumbers are one."""


def what_bites(column: Column, found: StableStep, tolerance: Tolerance) -> Bites | None:
    """Describe what grows just beyond a stable step.

    Parameters
    ----------
    column : Column
    found : StableStep
        The stable step with what binds it.
    tolerance : Tolerance

    Returns
    -------
    Bites or None
        None if nothing bites.
    """
    if found.waves_bind and found.bracket is not None:
        return _of_wave(column, found.bracket, tolerance)
    if found.courant_binds and found.courant is not None:
        return _of_row(column, found.courant)
    return None


def binding_air(found: StableStep) -> str:
    """Name the air state that binds a stable step; empty if nothing does."""
    if found.waves_bind and found.bracket is not None:
        return found.bracket.problem.air.name
    return found.courant_air if found.courant_binds else ""


def _of_wave(column: Column, bracket: Bracket, tolerance: Tolerance) -> Bites:
    problem = bracket.problem
    state = critical_state(problem, bracket.low, tolerance)
    where = anatomy(problem, state.basis)
    faces = column.levels.interfaces_m
    return Bites(
        wavenumber_per_m=problem.kappa,
        growth_per_s=state.growth_per_s,
        kind=max(where.kind_share, key=lambda kind: where.kind_share[kind]),
        layer_lowest=where.layer_lowest,
        layer_highest=where.layer_highest,
        bottom_m=float(faces[where.layer_lowest]),
        top_m=float(faces[where.layer_highest + 1]),
        energy_share=where.energy_share,
        kind_share=where.kind_share,
        wavelength_layers=where.wavelength_layers,
        wavelength_m=2 * np.pi / problem.kappa,
        period_s=state.period_s,
        time_mode=state.time_mode,
        shortest_horizontal=_is(problem.kappa, np.pi / column.horizontal.grid_spacing_m),
        steepest_horizontal=_is(problem.kappa, steepest_wavenumber(column.horizontal)),
        shortest_vertical=where.alternates,
        along_diagonal=column.horizontal.directions == 2,
        energy_by_layer=_kept(where.energy_by_layer),
        profiles=tuple(_profile(one) for one in portrait(column, problem, state.vector)),
    )


def _of_row(column: Column, courant: CourantLimit) -> Bites:
    faces = column.levels.interfaces_m
    layers = 2 * np.pi / courant.phase if courant.phase > 0 else None
    return Bites(
        wavenumber_per_m=courant.kappa,
        growth_per_s=courant.rate_per_s,
        kind=courant.kind,
        layer_lowest=courant.layer,
        layer_highest=courant.layer,
        bottom_m=float(faces[courant.layer]),
        top_m=float(faces[courant.layer + 1]),
        energy_share={courant.field: 1.0},
        wavelength_layers=layers,
        wavelength_m=2 * np.pi / courant.kappa if courant.kappa > 0 else None,
        shortest_horizontal=_is(courant.kappa, np.pi / column.horizontal.grid_spacing_m),
        steepest_horizontal=_is(courant.kappa, steepest_wavenumber(column.horizontal)),
        shortest_vertical=layers is not None and layers <= ALTERNATES,
        along_diagonal=column.horizontal.directions == 2 and courant.kappa > 0,
    )


def _is(kappa: float, other: float) -> bool:
    return abs(kappa / other - 1) < SAME


def _profile(one: Profile) -> FieldProfile:
    return FieldProfile(
        field=one.field,
        heights_m=tuple(float(z) for z in one.heights_m),
        amplitude=_kept(one.amplitude),
        phase_rad=_kept(one.phase),
    )


def _kept(values: NDArray[np.float64]) -> tuple[float, ...]:
    return tuple(float(f"{value:.{DIGITS - 1}e}") for value in values)
