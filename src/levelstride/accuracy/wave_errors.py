"""What one step does to waves that the semi-discrete column carries exactly."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.accuracy.modes import Modes, mode_weights, modes_of, resolved_gravity
from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.bands import Banded
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.parts import Parts, sort_terms
from levelstride.splitting.splitting import Splitting
from levelstride.stepper.any_scheme import AnyStepper, levels_of, stepper_of, with_history

Array = NDArray[np.float64]
Matrix = NDArray[Any]

SHORTEST_WAVELENGTH = 8
"""Shortest horizontal wavelength, along an axis, of a resolved gravity wave [grid spacings]."""

LARGEST_EXPONENT = 700.0
"""Growth within a period beyond exp of this is reported as that: a float holds no more."""

NO_TURN = 1.0e-12
"""A mode that turns by less in one step stands still [rad]."""


@dataclass(frozen=True, slots=True, eq=False)
class ModeErrors:
    """What one step does to each mode, apart from what the air itself does.

    Modes that stand still have no period; both errors are 0 for them.

    Attributes
    ----------
    factor : ndarray of complex, shape (nmode,)
        Amplification of the mode, projected back on it in the energy [1].
    frequency_error : ndarray, shape (nmode,)
        Relative error of the frequency, never negative [1]. At least 1 where a step spans half a
        period or more or damps the mode away, so that the step holds no phase.
    amplitude_change_per_period : ndarray, shape (nmode,)
        Relative change of amplitude in one period, negative for damping [1].
    """

    factor: NDArray[np.complex128]
    frequency_error: Array
    amplitude_change_per_period: Array


@dataclass(frozen=True, slots=True)
class WaveErrors:
    """The worst that one step does to the resolved gravity waves.

    Attributes
    ----------
    frequency_error : float or None
        Largest relative error of a frequency [1]; None where no gravity wave is resolved.
    frequency_kappa, frequency_order : float and int, or None
        Wavenumber [1/m] and vertical order of that wave.
    amplitude_change_per_period : float or None
        The change of amplitude that is largest in size, negative for damping [1].
    amplitude_kappa, amplitude_order : float and int, or None
        Wavenumber [1/m] and vertical order of that wave.
    nwave : int
        Number of waves looked at.
    """

    frequency_error: float | None = None
    frequency_kappa: float | None = None
    frequency_order: int | None = None
    amplitude_change_per_period: float | None = None
    amplitude_kappa: float | None = None
    amplitude_order: int | None = None
    nwave: int = 0


def mode_errors(modes: Modes, stepped: Matrix, dt: float) -> ModeErrors:
    """Compare stepped modes with the exact ones.

    With x a mode, y its dual and lambda = y^H R x / y^H x, the frequency error is
    |arg(lambda / exp(i omega dt))| / (|omega| dt) and the amplitude change per period
    (|lambda| / exp(growth dt))^(2 pi / (|omega| dt)) - 1. omega is the mode's frequency, or its
    intrinsic frequency where that is larger: a wave that stands still in the wind has a phase too.

    Parameters
    ----------
    modes : Modes
    stepped : ndarray, shape (nstate, nmode)
        One step of length ``dt`` applied to ``modes.vectors``.
    dt : float
        Step [s].
    """
    factor = np.sum(modes.duals.conj() * stepped, axis=0).astype(np.complex128)
    turn = np.maximum(np.abs(modes.frequency), np.abs(modes.intrinsic_frequency)) * dt
    per_turn = np.where(turn > NO_TURN, 1.0 / np.maximum(turn, NO_TURN), 0.0)
    error = np.abs(np.angle(factor * np.exp(-1j * modes.frequency * dt))) * per_turn
    unresolvable = (turn >= np.pi) | (factor == 0)
    error[unresolvable] = np.maximum(error[unresolvable], 1.0)
    size = np.maximum(np.abs(factor), np.finfo(np.float64).tiny)
    exponent = (np.log(size) - modes.growth * dt) * 2 * np.pi * per_turn
    change = np.expm1(np.clip(exponent, -LARGEST_EXPONENT, LARGEST_EXPONENT))
    return ModeErrors(factor, error, change)


@dataclass(frozen=True, slots=True, eq=False)
class ResolvedWaves:
    """The resolved gravity waves, or all waves, of one air at one wavenumber, with what steps them.

    Attributes
    ----------
    kappa : float
        Wavenumber along one axis [1/m].
    modes : Modes
        Resolved gravity waves only, or all. Where the operator is real, waves both ways do the
        same and those of positive frequency stand for both.
    terms, on_reference : mapping of str to Banded
        The catalogue on the air and on the reference, in the energy coordinates of ``modes``.
    air : str
        Name of the air state.
    own_growth_per_s : float
        Largest growth of any mode there, resolved or not, zero if all decay [1/s].
    """

    kappa: float
    modes: Modes
    terms: Mapping[str, Banded]
    on_reference: Mapping[str, Banded]
    air: str = ""
    own_growth_per_s: float = 0.0

    def parts(self, splitting: Splitting) -> Parts:
        """Sort the terms by treatment, in energy coordinates."""
        return sort_terms(splitting, self.terms, self.on_reference, self.modes.layout)


def resolved_waves(
    column: Column, air: Background, waves: Iterable[Wave]
) -> tuple[ResolvedWaves, ...]:
    """Find the resolved gravity waves: to be done once for many tableaux, splittings and steps.

    Parameters
    ----------
    column : Column
    air : Background
    waves : iterable of Wave
        Those shorter than 8 grid spacings along an axis are passed over.
    """
    return tuple(_at_wave(column, air, wave, all_kinds=False) for wave in long_enough(waves))


def all_waves(column: Column, air: Background, waves: Iterable[Wave]) -> tuple[ResolvedWaves, ...]:
    """Find the waves of every kind and order at the wavenumbers of ``resolved_waves``."""
    return tuple(_at_wave(column, air, wave, all_kinds=True) for wave in long_enough(waves))


def long_enough(waves: Iterable[Wave]) -> Iterable[Wave]:
    """Pass over waves shorter than 8 grid spacings along an axis."""
    for wave in waves:
        shortest = SHORTEST_WAVELENGTH * wave.horizontal.grid_spacing_m
        if wave.kappa <= 2 * np.pi / shortest * (1 + 1e-9):
            yield wave


def _at_wave(column: Column, air: Background, wave: Wave, *, all_kinds: bool) -> ResolvedWaves:
    layout, weights = layout_of(column), mode_weights(column, air)
    scale = np.sqrt(weights)

    def in_energy(state: Background) -> dict[str, Banded]:
        return {name: term.similar(scale) for name, term in assemble(column, state, wave).items()}

    terms = in_energy(air)
    on_reference = in_energy(column.reference) if column.reference else terms
    modes = modes_of(terms, layout, weights)
    wanted = np.full(layout.size, True) if all_kinds else resolved_gravity(modes)
    if all(term.is_real for term in (*terms.values(), *on_reference.values())):
        wanted &= modes.frequency >= 0
    own = max(0.0, float(modes.growth.max()))
    return ResolvedWaves(
        float(wave.kappa), modes.select(wanted), terms, on_reference, air.name, own
    )


class StepErrors:
    """Errors of one tableau and splitting at any step.

    Parameters
    ----------
    waves : sequence of ResolvedWaves
    splitting : Splitting
    tableau : TimeScheme
    """

    def __init__(
        self, waves: Sequence[ResolvedWaves], splitting: Splitting, tableau: TimeScheme
    ) -> None:
        self._waves = [wave for wave in waves if wave.modes.frequency.size]
        self._parts = [wave.parts(splitting) for wave in self._waves]
        self._steppers: list[AnyStepper] = []
        self._tableau = tableau

    def at(self, dt: float) -> WaveErrors:
        """Return the worst errors of the resolved gravity waves at one step [s].

        Raises
        ------
        CalculationError
            If an implicit stage has no solution at this step.
        """
        return worst_of(self.each(dt))

    def each(self, dt: float) -> list[WaveErrors]:
        """Return the worst errors at each of the waves that have any resolved, in order."""
        if self._steppers:
            self._steppers = [stepper.at_step(dt) for stepper in self._steppers]
        else:
            self._steppers = [stepper_of(parts, self._tableau, dt) for parts in self._parts]
        return [self._one(k, dt) for k in range(len(self._waves))]

    def _one(self, k: int, dt: float) -> WaveErrors:
        wave = self._waves[k]
        errors = mode_errors(wave.modes, _stepped(self._steppers[k], wave.modes, dt), dt)
        order = wave.modes.vertical_order
        turned = int(np.argmax(errors.frequency_error))
        changed = int(np.argmax(np.abs(errors.amplitude_change_per_period)))
        return WaveErrors(
            frequency_error=float(errors.frequency_error[turned]),
            frequency_kappa=wave.kappa,
            frequency_order=int(order[turned]),
            amplitude_change_per_period=float(errors.amplitude_change_per_period[changed]),
            amplitude_kappa=wave.kappa,
            amplitude_order=int(order[changed]),
            nwave=order.size,
        )


def _stepped(stepper: AnyStepper, modes: Modes, dt: float) -> Matrix:
    """One step of the modes, the exact modes standing for the time levels before."""
    factors = np.exp((modes.growth + 1j * modes.frequency) * dt)
    history = with_history(modes.vectors, factors, levels_of(stepper))
    return stepper.step(history)[: stepper.layout.size]


def worst_of(found: Iterable[WaveErrors]) -> WaveErrors:
    """Join the errors of several wavenumbers or air states into the worst of each."""
    seen = [errors for errors in found if errors.nwave]
    if not seen:
        return WaveErrors()
    turned = max(seen, key=lambda e: e.frequency_error or 0.0)
    changed = max(seen, key=lambda e: abs(e.amplitude_change_per_period or 0.0))
    return WaveErrors(
        turned.frequency_error,
        turned.frequency_kappa,
        turned.frequency_order,
        changed.amplitude_change_per_period,
        changed.amplitude_kappa,
        changed.amplitude_order,
        sum(errors.nwave for errors in seen),
    )


def resolved_gravity_errors(
    column: Column,
    air: Background,
    splitting: Splitting,
    tableau: TimeScheme,
    dt: float,
    waves: Iterable[Wave],
) -> WaveErrors:
    """Return the worst errors of the resolved gravity waves of one air at one step.

    For many tableaux, splittings or steps, find the waves once with ``resolved_waves`` and ask
    ``StepErrors``.

    Parameters
    ----------
    column : Column
    air : Background
    splitting : Splitting
    tableau : TimeScheme
    dt : float
        Step [s].
    waves : iterable of Wave

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.
    """
    return StepErrors(resolved_waves(column, air, waves), splitting, tableau).at(dt)
