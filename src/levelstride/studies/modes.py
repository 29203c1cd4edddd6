"""The normal modes of a column: what they are, and how far levels and a step distort them."""

import pickle
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import Executor
from math import pi
from typing import Final, TypeAlias

import numpy as np

from levelstride.accuracy.by_kind import step_wave_errors
from levelstride.accuracy.isothermal import IsothermalWaves, isothermal_waves
from levelstride.accuracy.modes import LARGEST_CONDITION, Modes, normal_modes
from levelstride.accuracy.structure import vertical_wavelength
from levelstride.column.air import Background
from levelstride.column.column import Column, Horizontal
from levelstride.constants import GRAVITY
from levelstride.errors import InputError
from levelstride.operator.wave import Wave
from levelstride.operator.wave_basis import KINDS
from levelstride.results.modes_found import (
    ColumnModes,
    ModeFound,
    ModesAtStep,
    OnGrid,
    WaveModes,
)
from levelstride.splitting.splitting import resolve
from levelstride.stability.bites import SHARE, energy_by_layer, layers_holding
from levelstride.stability.blas import on_one_thread
from levelstride.stability.spectrum import sampled_wavenumbers, steepest_wavenumber
from levelstride.studies.grid_distortion import (
    SPLIT_INTO,
    STAGGERINGS,
    GridFound,
    GridItem,
    compare_grids,
)
from levelstride.studies.methods import tableau_of
from levelstride.studies.share_out import share_out
from levelstride.studies.summary import column_summary, provenance, wind_note

Progress: TypeAlias = Callable[[int, int, str], None]

TELLING_CELLS: Final = (128.0, 32.0, 8.0)
"""Wavelengths in grid spacings of the waves shown by default, beside the steepest one; the last is
the shortest that an accuracy limit binds."""

NOT_TURNING: Final = 1e-10
"""Share of the largest frequency below which a mode stands still."""


UNIFORM: Final = 1.5
"""Thickest layer over thinnest up to which levels count as uniform."""


@on_one_thread
def modes(
    column: Column,
    *,
    wavenumbers_per_m: Sequence[float] | None = None,
    kinds: Sequence[str] | None = None,
    grids: bool = True,
    step_s: float | None = None,
    tableau: str | None = None,
    split: str | Mapping[str, str] | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> ColumnModes:
    """Find the normal modes of a column.

    Parameters
    ----------
    column : Column
        The column; every air state is looked at.
    wavenumbers_per_m : sequence of float, optional
        Wavenumbers along one axis [1/m]; by default four of the sampled ones: 128, 32 and 8 grid
        spacings and the wave of largest gradient.
    kinds : sequence of str, optional
        sound, Lamb, gravity, computational, vortical; all by default.
    grids : bool
        Whether to compare with levels of which each is split in four, under both staggerings.
    step_s : float, optional
        A step [s] whose effect on the modes of all sampled waves is to be found as well.
    tableau, split : str, optional
        Its tableau and splitting; the splitting of the column file by default.
    executor : concurrent.futures.Executor, optional
        Who compares the grids; this process by default.
    progress : callable, optional
        Told how many parts of the work are done, of how many, and what is being worked on.

    Returns
    -------
    ColumnModes
        By air state and wave.

    Raises
    ------
    InputError
        If a wavenumber, kind or name is none, or a step is given without its tableau.
    CalculationError
        If an implicit stage has no solution at the step.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "uniform", "layers": 10, "top_m": 10000.0},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> found = levelstride.modes(column, wavenumbers_per_m=[2e-4], kinds=["Lamb"])
    >>> lamb = found.waves[0].modes[0]
    >>> round(lamb.frequency_per_s / lamb.isothermal_per_s, 9), round(lamb.period_s, 1)
    (1.0, 70.6)
    """
    kappas = _wavenumbers(column, wavenumbers_per_m)
    wanted = _kinds(kinds)
    at_step = _method(column, step_s, tableau, split)
    report = progress or (lambda done, total, on: None)
    items = {
        place: GridItem(pickle.dumps(column), air, kappa, staggering)
        for place, (air, kappa, staggering) in enumerate(
            (air, kappa, staggering)
            for air in range(len(column.airs))
            for kappa in kappas
            for staggering in STAGGERINGS
        )
    }
    total = (len(items) if grids else 0) + (at_step is not None)
    report(0, total, "finer levels")
    compared: dict[int, GridFound] = {}
    for place, found in share_out(compare_grids, items if grids else {}, executor):
        if isinstance(found, Exception):
            raise found
        compared[place] = found
        report(len(compared), total, "finer levels")
    waves = []
    for number, (air, kappa) in enumerate((a, k) for a in column.airs for k in kappas):
        of_wave = [compared[2 * number + s] for s in range(2)] if grids else []
        waves.append(_wave_modes(column, air, kappa, wanted, of_wave))
    stepped = None
    if at_step is not None and step_s is not None:
        report(len(compared), total, f"a step of {step_s:g} s")
        stepped = _at_step(column, step_s, *at_step)
        report(total, total, "")
    return ColumnModes(
        title=column.title,
        column=column_summary(column),
        staggering=column.staggering,
        split_into=SPLIT_INTO if grids else 1,
        waves=tuple(waves),
        at_step=stepped,
        notes=_notes(column, waves, grids=grids),
        provenance=provenance(column, "dense eigenvalues or singular values of every wave"),
    )


def _wavenumbers(column: Column, given: Sequence[float] | None) -> list[float]:
    horizontal = column.horizontal
    shortest = pi / horizontal.grid_spacing_m
    if given is None:
        return telling_wavenumbers(horizontal)
    problems = [
        f"wavenumber {kappa!r}: must lie above 0 and up to {shortest:.6g} 1/m, that of two grid "
        f"spacings ({2 * horizontal.grid_spacing_m:g} m)"
        for kappa in given
        if not 0.0 < kappa <= shortest * (1 + 1e-9)
    ]
    if problems:
        raise InputError(*problems)
    return sorted({float(kappa) for kappa in given})


def telling_wavenumbers(horizontal: Horizontal) -> list[float]:
    """Choose a few of the sampled wavenumbers, the steepest among them, ascending."""
    sampled = sampled_wavenumbers(horizontal)
    wished = [2 * pi / (cells * horizontal.grid_spacing_m) for cells in TELLING_CELLS]
    chosen = {float(sampled[np.argmin(np.abs(np.log(sampled / kappa)))]) for kappa in wished}
    return sorted(chosen | {steepest_wavenumber(horizontal)})


def _kinds(given: Sequence[str] | None) -> frozenset[str]:
    if given is None:
        return frozenset(KINDS)
    by_name = {kind.lower(): kind for kind in KINDS}
    unknown = [name for name in given if name.strip().lower() not in by_name]
    if unknown:
        raise InputError(
            *(f"kind '{name}': unknown; known are {', '.join(KINDS)}" for name in unknown)
        )
    return frozenset(by_name[name.strip().lower()] for name in given)


def _method(
    column: Column,
    step_s: float | None,
    tableau: str | None,
    split: str | Mapping[str, str] | None,
) -> tuple[str, str | Mapping[str, str]] | None:
    """Tableau and splitting of the step, if one is asked for."""
    if step_s is None:
        if tableau is not None or split is not None:
            raise InputError("tableau and split: go with a step only; give one, or leave them out")
        return None
    if not 0.0 < step_s < 1e9:
        raise InputError(f"step {step_s!r}: must be a time above 0 [s]")
    if tableau is None:
        raise InputError("step: whose? name a tableau, e.g. ARS(2,3,2)")
    if split is None and column.split is None:
        raise InputError(
            f"step: no splitting given and {column.source} has no [split]; name one, e.g. sound"
        )
    tableau_of(column, tableau)
    chosen = split if split is not None else column.split
    assert chosen is not None
    resolve(chosen)
    return tableau, chosen


def _at_step(
    column: Column, step_s: float, tableau: str, split: str | Mapping[str, str]
) -> ModesAtStep:
    from levelstride.studies.transient import transient_at_step

    method, splitting = tableau_of(column, tableau), resolve(split)
    return ModesAtStep(
        tableau=method.name,
        split=splitting.name,
        errors=step_wave_errors(column, splitting, method, step_s),
        transient=transient_at_step(column, splitting, method, step_s),
    )


def _wave_modes(
    column: Column,
    air: Background,
    kappa: float,
    wanted: frozenset[str],
    compared: Sequence[GridFound],
) -> WaveModes:
    wave = Wave(kappa, column.horizontal)
    found = normal_modes(column, air, wave)
    closed = isothermal_waves(column, air)
    gradient = abs(wave.gradient)
    keep = np.isin(found.kind, list(wanted)) & _stand_for_all(found)
    order = np.flatnonzero(keep)
    order = order[np.argsort(-np.abs(found.frequency[order]), kind="stable")]
    exact = kappa * float(np.sqrt(column.horizontal.directions))
    return WaveModes(
        air=air.name,
        wavenumber_per_m=kappa,
        wavelength_m=2 * pi / kappa,
        wavelength_cells=2 * pi / (kappa * column.horizontal.grid_spacing_m),
        gradient_per_m=gradient,
        gradient_to_exact=gradient / exact,
        isothermal_k=None if closed is None else closed.temperature_k,
        energy_conserved=found.is_normal,
        modes=tuple(_mode(column, found, int(i), gradient, closed, compared) for i in order),
    )


def _stand_for_all(found: Modes) -> np.ndarray:
    """Leave out the waves the other way where they are the same."""
    still = NOT_TURNING * float(np.abs(found.frequency).max(initial=0.0))
    mirrored = np.allclose(
        np.sort(found.frequency), np.sort(-found.frequency), rtol=0.0, atol=10 * still + 1e-300
    )
    return found.frequency >= -still if mirrored else np.full(found.frequency.size, True)


def _mode(
    column: Column,
    found: Modes,
    i: int,
    gradient: float,
    closed: IsothermalWaves | None,
    compared: Sequence[GridFound],
) -> ModeFound:
    kind, order = str(found.kind[i]), int(found.vertical_order[i])
    vector = found.vectors[:, i]
    by_layer = energy_by_layer(found.layout, np.abs(vector) ** 2)
    lowest, highest = layers_holding(by_layer, SHARE)
    upright = None if kind == "Lamb" else vertical_wavelength(column.levels, found.layout, vector)
    faces = column.levels.interfaces_m
    frequency, intrinsic = float(found.frequency[i]), float(found.intrinsic_frequency[i])
    turns = abs(frequency) > NOT_TURNING * float(np.abs(found.frequency).max())
    speed = intrinsic / gradient if gradient > 0 else None
    exact = None if closed is None else closed.frequency(kind, order, gradient)
    return ModeFound(
        kind=kind,
        vertical_order=order,
        frequency_per_s=frequency if turns else 0.0,
        intrinsic_frequency_per_s=intrinsic,
        period_s=2 * pi / abs(frequency) if turns else None,
        growth_per_s=float(found.growth[i]),
        entangled=bool(found.condition[i] > LARGEST_CONDITION),
        equivalent_depth_m=None if speed is None or not turns else speed**2 / GRAVITY,
        vertical_wavelength_m=None if upright is None else upright[0],
        wavelength_layers=None if upright is None else upright[1],
        layer_lowest=lowest,
        layer_highest=highest,
        bottom_m=float(faces[lowest]),
        top_m=float(faces[highest + 1]),
        isothermal_per_s=exact,
        grids=_on_grids((kind, order), exact, compared),
    )


def _on_grids(
    name: tuple[str, int], exact: float | None, compared: Sequence[GridFound]
) -> tuple[OnGrid, ...]:
    """What both staggerings make of a wave, matched by kind and vertical order."""
    return tuple(
        OnGrid(
            staggering=staggering,
            frequency_per_s=grid.own[name],
            to_finer=grid.own[name] / grid.finer[name] if grid.finer.get(name) else None,
            to_isothermal=grid.own[name] / exact if exact else None,
        )
        for staggering, grid in zip(STAGGERINGS, compared, strict=False)
        if name in grid.own
    )


def _notes(column: Column, waves: Sequence[WaveModes], *, grids: bool) -> tuple[str, ...]:
    found = []
    if (note := wind_note(column)) is not None:
        found.append(note)
    if not all(wave.energy_conserved for wave in waves):
        found.append(
            "modes are not orthogonal here, since wind, damping or unstable air is in them; kind "
            "and order are those of the waves at rest that hold most of their energy"
        )
        if grids:
            found.append("the comparison with finer levels is that of the column at rest")
    thickness = column.levels.thickness_m
    if grids and thickness.max() > UNIFORM * thickness.min():
        found.append(
            "short vertical waves gather where layers are thin, on finer levels in thinner ones: "
            "ratios of high vertical orders compare waves at different heights"
        )
    return tuple(found)
