"""Frozen-coefficient limits of explicit one-way terms, row by row.

One-way transport on a column is triangular: its eigenvalues know nothing of the Courant limit, and
a few offending layers hide from power norms too. So every row of the advection and diffusion terms
is frozen, its symbol taken over all vertical and horizontal phase angles (von Neumann analysis,
Hirsch 2007, Numerical Computation of Internal and External Flows, chapter 7), and the amplification
factor of the explicit tableau, or of forward Euler for terms taken after the step, is held against
the tolerated growth.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.setting import Setting, layout_of
from levelstride.operator.state import FIELDS, Layout
from levelstride.operator.terms import CATALOGUE
from levelstride.operator.wave import Wave
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.amplification import slow_amplification

Complex = NDArray[np.complex128]
Factor = Callable[[Complex], NDArray[np.float64]]

ANGLES = 33
"""Phase angles from 0 to pi in each direction of the first look; the binding row gets more."""

FINE_ANGLES = 257
VERTICAL = ("vertical-advection", "vertical-diffusion")
SCAN_RATIO = 1.05
BISECTION = 1.0005

NEAR_FASTEST = 0.9
"""Rows whose largest symbol is at least this share of the largest of all get more angles."""


@dataclass(frozen=True, slots=True)
class CourantLimit:
    """Longest step at which no frozen row grows, and the row that binds.

    Attributes
    ----------
    step_s : float
        [s]
    field : str
        Unknown whose row binds.
    layer : int
        Layer, or the layer below the interface.
    kappa : float
        Wavenumber along one axis of the worst horizontal angle [1/m].
    phase : float
        Vertical angle from layer to layer of the worst symbol, from 0 to pi [rad].
    kind : str
        ``transport`` or ``mixing``, whichever the worst symbol owes more to.
    rate_per_s : float
        Growth rate just beyond the limit [1/s].
    """

    step_s: float
    field: str
    layer: int
    kappa: float
    phase: float
    kind: str
    rate_per_s: float


@dataclass(frozen=True, eq=False)
class _Rows:
    """Frozen rows: vertical stencils and horizontal speeds.

    Attributes
    ----------
    vertical : ndarray, shape (nrow, nstencil)
        Coefficients at vertical offsets ``offsets`` [1/s].
    mixing : ndarray, shape (nrow, nstencil)
        What of ``vertical`` is diffusion [1/s].
    wind : ndarray, shape (nrow,)
        Advecting wind, zero where horizontal advection is not in the set [m/s].
    diffuses : bool
        Whether horizontal diffusion is in the set.
    """

    index: NDArray[np.intp]
    offsets: NDArray[np.intp]
    vertical: NDArray[np.float64]
    mixing: NDArray[np.float64]
    wind: NDArray[np.float64]
    diffuses: bool

    def symbol(self, column: Column, rows: NDArray[np.intp], angles: int) -> Complex:
        """Symbols, shape (nrow, nkappa, nphi) [1/s]."""
        phi = self.phases(rows, angles)
        vertical = self.vertical[rows] @ np.exp(1j * np.outer(self.offsets, phi))
        kappas = self.kappas(column, rows, angles)
        horizontal = np.stack([self._horizontal(column, kappa, rows) for kappa in kappas], axis=1)
        total: Complex = horizontal[:, :, None] + vertical[:, None, :]
        return total

    def phases(self, rows: NDArray[np.intp], angles: int) -> NDArray[np.float64]:
        """Vertical phase angles of the symbol [rad]."""
        if not np.any(self.vertical[rows]):
            return np.zeros(1)
        return np.linspace(-np.pi, np.pi, 2 * angles - 1)

    def mixing_at(self, column: Column, row: int, kappa: float, phi: float) -> complex:
        """What diffusion contributes to one symbol [1/s]."""
        value = complex(self.mixing[row] @ np.exp(1j * self.offsets * phi))
        if self.diffuses:
            laplacian = Wave(kappa, column.horizontal).laplacian
            value -= column.horizontal_diffusion * laplacian**column.horizontal_diffusion_order
        return value

    def kappas(self, column: Column, rows: NDArray[np.intp], angles: int) -> NDArray[np.float64]:
        """Horizontal wavenumbers of the symbol [1/m]."""
        if not self.diffuses and not np.any(self.wind[rows]):
            return np.zeros(1)
        return np.linspace(0, np.pi, angles) / column.horizontal.grid_spacing_m

    def _horizontal(self, column: Column, kappa: float, rows: NDArray[np.intp]) -> Complex:
        wave = Wave(float(kappa), column.horizontal)
        value: Complex = wave.advection(self.wind[rows]).astype(complex)
        if self.diffuses:
            order = column.horizontal_diffusion_order
            value = value - column.horizontal_diffusion * wave.laplacian**order
        return value


def courant_limit(
    column: Column,
    air: Background,
    splitting: Splitting,
    tableau: TimeScheme,
    rate: float,
    largest_s: float,
) -> CourantLimit | None:
    """Longest step that the explicit one-way terms allow by themselves.

    Parameters
    ----------
    column : Column
    air : Background
    splitting : Splitting
    tableau : TimeScheme
    rate : float
        Tolerated growth rate [1/s].
    largest_s : float
        Step up to which the limit is sought [s].

    Returns
    -------
    CourantLimit or None
        None if nothing bites up to ``largest_s``.
    """
    found = []
    for rows, factor in _row_sets(column, air, splitting, tableau):
        limit = _limit_of(rows, column, factor, rate, largest_s)
        if limit is not None:
            found.append(limit)
    return min(found, key=lambda limit: limit.step_s, default=None)


def rows_hold(
    column: Column,
    air: Background,
    splitting: Splitting,
    tableau: TimeScheme,
    rate: float,
    step_s: float,
) -> bool:
    """Whether no frozen row of the explicit one-way terms grows at one step.

    Parameters
    ----------
    column, air, splitting, tableau, rate
        As for ``courant_limit``, which looks at all steps up to its answer.
    step_s : float
        The step [s].
    """
    for rows, factor in _row_sets(column, air, splitting, tableau):
        chosen = np.arange(rows.index.size)
        for angles in (ANGLES, 2 * ANGLES):
            symbols = rows.symbol(column, chosen, angles)
            own = np.maximum(symbols.real.max(axis=(1, 2)), 0.0)
            excess = factor(step_s * symbols).max(axis=(1, 2)) / np.exp(step_s * (rate + own))
            if excess.max() > 1 + 1e-12:
                return False
            fastest = np.abs(symbols).max(axis=(1, 2))
            chosen = chosen[fastest >= NEAR_FASTEST * fastest.max()]
    return True


def _row_sets(
    column: Column, air: Background, splitting: Splitting, tableau: TimeScheme
) -> Iterator[tuple[_Rows, Factor]]:
    """Frozen rows of the stages and of the terms after the step, with their amplification."""
    factors: dict[str, Factor] = {
        "explicit": slow_amplification(tableau),
        "after-step": lambda z: np.abs(1 + z),
    }
    for treatment, factor in factors.items():
        rows = _frozen_rows(column, air, splitting, treatment)
        if rows is not None:
            yield rows, factor


def _frozen_rows(
    column: Column, air: Background, splitting: Splitting, treatment: str
) -> _Rows | None:
    names = {n for n in splitting.terms(treatment) if CATALOGUE[n].one_way} - column.left_out
    layout = layout_of(column)
    setting = Setting(column, air, Wave(0.0, column.horizontal), layout)
    reach = np.arange(-3, 4)
    every = np.arange(layout.size)
    stencils = {name: np.zeros((layout.size, reach.size)) for name in VERTICAL}
    for name in names & stencils.keys():
        matrix = CATALOGUE[name].build(setting)
        for k, offset in enumerate(reach):
            stencils[name][:, k] = matrix.diagonal(int(offset) * layout.stride).real
    mixing = stencils["vertical-diffusion"]
    coefficients = stencils["vertical-advection"] + mixing
    wind = np.zeros(layout.size)
    if "horizontal-advection" in names:
        wind = layout.spread(air.wind_c, air.wind_f[1:-1])
    diffuses = "horizontal-diffusion" in names and column.horizontal_diffusion != 0.0
    if not np.any(coefficients) and not np.any(wind) and not diffuses:
        return None
    keys = np.round(np.column_stack([coefficients, wind]), 14)
    _, first = np.unique(keys, axis=0, return_index=True)
    kept = every[np.sort(first)]
    return _Rows(kept, reach, coefficients[kept], mixing[kept], wind[kept], diffuses)


def _limit_of(
    rows: _Rows, column: Column, factor: Factor, rate: float, largest_s: float
) -> CourantLimit | None:
    every = np.arange(rows.index.size)
    symbols = rows.symbol(column, every, ANGLES)
    own = np.maximum(symbols.real.max(axis=(1, 2)), 0.0)

    def grows(dt: float, z: Complex, extra: NDArray[np.float64]) -> NDArray[np.bool_]:
        allowed = np.exp(dt * (rate + extra)) * (1 + 1e-12)
        return np.asarray((factor(dt * z) > allowed[:, None, None]).any(axis=(1, 2)))

    fastest = float(np.abs(symbols).max())
    if fastest == 0.0:
        return None
    dt = 1e-3 / fastest
    while grows(dt, symbols, own).any():
        dt /= 10
    while not (bad := grows(dt, symbols, own)).any():
        dt *= SCAN_RATIO
        if dt > largest_s:
            return None
    # rows that offend within the last stride, and a look at finer angles for them
    chosen = every[bad]
    fine = rows.symbol(column, chosen, FINE_ANGLES if symbols.shape[1] == 1 else 2 * ANGLES)
    fine_own = np.maximum(fine.real.max(axis=(1, 2)), 0.0)
    low, high = dt / SCAN_RATIO**2, dt
    while high / low > BISECTION:
        middle = np.sqrt(low * high)
        if grows(middle, fine, fine_own).any():
            high = middle
        else:
            low = middle
    return _describe(rows, column, chosen, fine, fine_own, factor, low)


def _describe(
    rows: _Rows,
    column: Column,
    chosen: NDArray[np.intp],
    symbols: Complex,
    own: NDArray[np.float64],
    factor: Factor,
    step: float,
) -> CourantLimit:
    beyond = 1.001 * step
    growth = np.log(np.maximum(factor(beyond * symbols), 1e-300)) / beyond - own[:, None, None]
    row, i, j = (int(k) for k in np.unravel_index(np.argmax(growth), growth.shape))
    kappa = float(rows.kappas(column, chosen, symbols.shape[1])[i])
    phi = float(rows.phases(chosen, (symbols.shape[2] + 1) // 2)[j])
    mixing = rows.mixing_at(column, int(chosen[row]), kappa, phi)
    index = int(rows.index[chosen[row]])
    layout = layout_of(column)
    transport = symbols[row, i, j] - mixing
    return CourantLimit(
        step_s=float(step),
        field=_field_of(layout, index),
        layer=int(layout.layer_of[index]),
        kappa=kappa,
        phase=abs(phi),
        kind="transport" if abs(transport) > abs(mixing) else "mixing",
        rate_per_s=float(growth[row, i, j]),
    )


def _field_of(layout: Layout, index: int) -> str:
    for field in FIELDS:
        if index in layout.places(field):
            return field
    raise ValueError(f"no unknown at {index}")
