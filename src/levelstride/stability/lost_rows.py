"""Which frozen rows of explicit one-way terms bind at the limit or a little beyond it.

The amplification of a frozen row is a function of its symbol alone, so that its limit moves by the
first-order change of the symbol at the worst pair of angles: with g = ln|P(dt z)| - dt rate,
d dt/dh = -(dg/dh)/(dg/dt). See ``courant`` for the criterion itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.polynomial import polynomial
from numpy.typing import NDArray

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.setting import Setting, layout_of
from levelstride.operator.terms import CATALOGUE
from levelstride.operator.wave import Wave
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.amplification import explicit_polynomial
from levelstride.stability.courant import VERTICAL

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

ANGLES = 65
"""Phase angles from 0 to pi in each direction."""

BEYOND = 1.001
"""How far beyond the limit of a row its worst angles are sought."""

SHARP = 1e-6
"""Relative width to which the limit of a row is bisected."""

NEAR = 1e-5
"""Relative difference by which derivatives of factors without a formula are taken."""

Factor: TypeAlias = "_Polynomial | _LargestFactor"

STENCIL = np.arange(-3, 4)
"""Vertical offsets of a row."""

ALIKE = 12
"""Decimals of the coefficients over the largest one in which rows that are one differ."""


@dataclass(frozen=True, eq=False)
class LostRow:
    """One frozen row that grows near the limit.

    Attributes
    ----------
    number : int
        Which air state of the column.
    treatment : str
        ``explicit`` or ``after-step``.
    index : int
        Which unknown.
    kappa, phase : float
        Worst horizontal wavenumber [1/m] and vertical angle [rad].
    own : tuple of float
        The same where the symbol itself grows most.
    layer : int
        Layer, or the layer below the interface.
    step_s : float
        Its own limit [s].
    """

    number: int
    treatment: str
    index: int
    kappa: float
    phase: float
    own: tuple[float, float]
    layer: int
    step_s: float


@dataclass(frozen=True, eq=False)
class _Rows:
    """Coefficients of all rows under one treatment.

    Attributes
    ----------
    vertical : ndarray, shape (nstate, nstencil)
        [1/s]
    wind : ndarray, shape (nstate,)
        [m/s]
    diffusion : float
        Coefficient of horizontal diffusion.
    """

    column: Column
    vertical: Array
    wind: Array
    diffusion: float

    @classmethod
    def of(cls, column: Column, air: Background, splitting: Splitting, treatment: str) -> _Rows:
        """Gather the one-way terms with this treatment."""
        names = {n for n in splitting.terms(treatment) if CATALOGUE[n].one_way} - column.left_out
        layout = layout_of(column)
        setting = Setting(column, air, Wave(0.0, column.horizontal), layout)
        vertical, wind = np.zeros((layout.size, STENCIL.size)), np.zeros(layout.size)
        for name in names.intersection(VERTICAL):
            matrix = CATALOGUE[name].build(setting)
            for k, offset in enumerate(STENCIL):
                vertical[:, k] += matrix.diagonal(int(offset) * layout.stride).real
        if "horizontal-advection" in names:
            wind = layout.spread(air.wind_c, air.wind_f[1:-1])
        diffuses = "horizontal-diffusion" in names
        return cls(column, vertical, wind, column.horizontal_diffusion if diffuses else 0.0)

    def symbol(self, rows: NDArray[np.intp], kappa: float, phases: Array) -> Complex:
        """Symbols, shape (nrow, nphase) [1/s]."""
        wave, order = Wave(kappa, self.column.horizontal), self.column.horizontal_diffusion_order
        horizontal = wave.advection(self.wind[rows]) - self.diffusion * wave.laplacian**order
        vertical = self.vertical[rows] @ np.exp(1j * np.outer(STENCIL, phases))
        symbol: Complex = horizontal[:, None] + vertical
        return symbol

    def at(self, row: int, angles: tuple[float, float]) -> complex:
        """One symbol [1/s]."""
        return complex(self.symbol(np.array([row]), angles[0], np.array(angles[1:]))[0, 0])

    def different(self) -> NDArray[np.intp]:
        """One of all rows that are alike and not zero."""
        every = np.column_stack([self.vertical, self.wind, np.full(self.wind.size, self.diffusion)])
        scale = np.maximum(np.abs(every).max(axis=0), 1e-300)
        _, first = np.unique(np.round(every / scale, ALIKE), axis=0, return_index=True)
        first = np.sort(first)
        return first[np.any(every[first] != 0.0, axis=1)]


def lost_rows(
    column: Column,
    splitting: Splitting,
    tableau: TimeScheme,
    rate: float,
    step: float,
    reach: float,
) -> list[LostRow]:
    """Find the rows that are lost between the limit and somewhat beyond.

    Parameters
    ----------
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    rate : float
        Tolerated growth rate [1/s].
    step : float
        Longest step that every row carries [s].
    reach : float
        How far beyond it rows are sought, as a factor above one.

    Returns
    -------
    list of LostRow
        By ascending limit.
    """
    found = []
    for number, air in enumerate(column.airs):
        for treatment in ("explicit", "after-step"):
            rows = _Rows.of(column, air, splitting, treatment)
            factor = _factor(tableau, treatment)
            found += [
                LostRow(number, treatment, *row)
                for row in _lost(rows, factor, rate, step, max(reach, BEYOND))
            ]
    return sorted(found, key=lambda row: row.step_s)


@dataclass(frozen=True, slots=True, eq=False)
class _Polynomial:
    """Amplification by a polynomial, coefficients ascending."""

    coefficients: Array

    def size(self, z: Complex) -> Array:
        return np.abs(polynomial.polyval(z, self.coefficients))

    def logarithmic(self, z: complex, change: complex) -> float:
        """Change of ln|P(z)| where z changes, to first order."""
        slope = polynomial.polyval(z, polynomial.polyder(self.coefficients))
        return float((slope / polynomial.polyval(z, self.coefficients) * change).real)


@dataclass(frozen=True, slots=True, eq=False)
class _LargestFactor:
    """Amplification by the largest factor of a scheme that is no tableau."""

    scheme: ProgramScheme

    def size(self, z: Complex) -> Array:
        return self.scheme.slow_factor(z)

    def logarithmic(self, z: complex, change: complex) -> float:
        if change == 0:
            return 0.0
        reach = NEAR * abs(z) / abs(change)
        sizes = self.size(np.array([z + reach * change, z - reach * change]))
        return float(np.log(sizes[0] / sizes[1]) / (2 * reach))


def _factor(tableau: TimeScheme, treatment: str) -> Factor:
    """Amplification of a treatment."""
    if treatment != "explicit":
        return _Polynomial(np.ones(2))
    if isinstance(tableau, ProgramScheme):
        return _LargestFactor(tableau)
    return _Polynomial(explicit_polynomial(tableau))


Found = tuple[int, float, float, tuple[float, float], int, float]


def _lost(rows: _Rows, factor: Factor, rate: float, step: float, reach: float) -> list[Found]:
    every = rows.different()
    if every.size == 0:
        return []
    layer_of = layout_of(rows.column).layer_of
    kappas = np.linspace(0, np.pi, ANGLES) / rows.column.horizontal.grid_spacing_m
    phases = np.linspace(-np.pi, np.pi, 2 * ANGLES - 1)
    if not np.any(rows.wind) and rows.diffusion == 0.0:
        kappas = kappas[:1]
    found = []
    for row in every:
        symbols = np.array([rows.symbol(np.array([row]), k, phases)[0] for k in kappas])
        most = np.unravel_index(np.argmax(symbols.real), symbols.shape)
        own = max(0.0, float(symbols.real[most]))

        def excess(dt: float, z: Complex = symbols, own: float = own) -> Array:
            size = factor.size(dt * z)
            return np.log(np.maximum(size, 1e-300)) - dt * (rate + own) - 1e-12

        low, high = step / BEYOND, step * reach
        if excess(high).max() <= 0.0:
            continue
        while high / low > 1 + SHARP:
            middle = float(np.sqrt(low * high))
            low, high = (low, middle) if excess(middle).max() > 0.0 else (middle, high)
        worst = np.unravel_index(np.argmax(excess(BEYOND * low)), symbols.shape)
        grows = (float(kappas[most[0]]), float(phases[most[1]]))
        place = (float(kappas[worst[0]]), float(phases[worst[1]]))
        found.append((int(row), *place, grows, int(layer_of[row]), low))
    return found


class RowDerivative:
    """How the limit of one row moves with the column.

    Parameters
    ----------
    row : LostRow
    column : Column
    splitting : Splitting
    tableau : TimeScheme
    rate : float
        Tolerated growth rate [1/s].
    """

    def __init__(
        self, row: LostRow, column: Column, splitting: Splitting, tableau: TimeScheme, rate: float
    ) -> None:
        self._row, self._splitting = row, splitting
        self._factor = _factor(tableau, row.treatment)
        self._here, self._own = self._symbols(column)
        self._own_counts = self._own.real > 0.0
        tolerated = rate + max(0.0, self._own.real)
        self._along_step = self._logarithmic(self._here) - tolerated

    def between(self, more: Column, less: Column) -> float:
        """First-order difference of the limit between two columns, neighbours of this one [s]."""
        above, below = self._symbols(more), self._symbols(less)
        change = self._logarithmic(self._row.step_s * (above[0] - below[0]))
        if self._own_counts:
            change -= self._row.step_s * (above[1] - below[1]).real
        return -change / self._along_step

    def _symbols(self, column: Column) -> tuple[complex, complex]:
        row = self._row
        rows = _Rows.of(column, column.airs[row.number], self._splitting, row.treatment)
        return rows.at(row.index, (row.kappa, row.phase)), rows.at(row.index, row.own)

    def _logarithmic(self, change: complex) -> float:
        """Change of ln|P(dt z)| where dt z changes."""
        z = self._row.step_s * self._here
        return self._factor.logarithmic(z, change)
