"""What bites: the state that grows just beyond the limit, and where in the column it lives."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.state import FIELDS, Layout
from levelstride.operator.wave_basis import KINDS, wave_basis
from levelstride.stability.powers import power_peak
from levelstride.stability.time_modes import mode_in_time
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.wave_problem import WaveProblem

Matrix = NDArray[Any]

BEYOND = 1.001
"""How far beyond the limit the critical state is taken."""

ALIKE = 0.9
"""States that grow at least this share of the fastest growth are described together."""

SHARE = 0.9
"""Share of the energy that the named layers hold."""

ROUND_OFF = 1e-9

ALTERNATES = 2.25
"""Vertical wavelength in layers up to which a state counts as alternating from layer to layer: an
envelope over ten layers makes 2.2 of 2."""


@dataclass(frozen=True, eq=False)
class CriticalState:
    """The invariant subspace that grows, or the state that is amplified most.

    Attributes
    ----------
    basis : ndarray, shape (nstate, nvector)
        Orthonormal in the energy.
    vector : ndarray, shape (nstate,)
        The fastest growing or most amplified state itself, of energy norm one.
    growth_per_s : float
        [1/s]
    period_s : float or None
        Period of the fastest growing state [s]; None where it does not turn.
    time_mode : str or None
        ``physical``, ``computational`` or ``merged`` with a scheme of several time levels.
    """

    basis: Matrix
    vector: Matrix
    growth_per_s: float
    period_s: float | None
    time_mode: str | None = None


@dataclass(frozen=True)
class Anatomy:
    """Where the energy of a critical state is.

    Attributes
    ----------
    energy_share : dict of str to float
        By field.
    kind_share : dict of str to float
        By kind of wave.
    layer_lowest, layer_highest : int
        Shortest run of layers that holds 90 % of the energy, counted from 0 at the ground.
    wavelength_layers : float or None
        Vertical wavelength within that run [layers].
    energy_by_layer : ndarray, shape (nlev,)
        Shares of the energy; that of an interface is shared by the two layers it parts.
    """

    energy_share: dict[str, float]
    kind_share: dict[str, float]
    layer_lowest: int
    layer_highest: int
    wavelength_layers: float | None
    energy_by_layer: NDArray[np.float64]

    @property
    def alternates(self) -> bool:
        """Whether the state changes sign from layer to layer, the shortest vertical wave."""
        return self.wavelength_layers is not None and self.wavelength_layers <= ALTERNATES


def critical_state(problem: WaveProblem, step: float, tolerance: Tolerance) -> CriticalState:
    """Find what grows just beyond a limit.

    Parameters
    ----------
    problem : WaveProblem
        The binding wave.
    step : float
        Its longest stable step [s].
    tolerance : Tolerance
    """
    dt = BEYOND * step
    matrix = problem.matrix(dt)
    values, vectors = np.linalg.eig(matrix)
    with np.errstate(divide="ignore"):
        growth = np.log(np.abs(values)) / dt
    fastest = int(np.argmax(growth))
    if growth[fastest] <= problem.rate(tolerance):
        return _most_amplified(problem, matrix, dt, tolerance)
    chosen = growth >= ALIKE * growth[fastest]
    newest = problem.newest(vectors)
    basis, singular, _ = np.linalg.svd(newest[:, chosen], full_matrices=False)
    basis = basis[:, singular > 1e-8 * singular[0]]
    turn = abs(float(np.angle(values[fastest])))
    period = 2 * np.pi * dt / turn if turn > 1e-9 else None
    vector = _normalised(newest[:, fastest])
    mode = mode_in_time(problem.parts, problem.tableau, dt, complex(values[fastest]), vector)
    return CriticalState(basis, vector, float(growth[fastest]), period, mode)


def _most_amplified(
    problem: WaveProblem, matrix: Matrix, dt: float, tolerance: Tolerance
) -> CriticalState:
    rate = problem.rate(tolerance)
    peak = power_peak(matrix, dt, rate, tolerance.horizon)
    power = np.linalg.matrix_power(matrix, peak.steps)
    largest = np.abs(power).max()
    _, _, right = np.linalg.svd(power / largest if largest > 0 else power)
    growth = peak.log_norm / (peak.steps * dt)
    vector = _normalised(problem.newest(right[0].conj()))
    return CriticalState(vector[:, None], vector, float(growth), None)


def _normalised(vector: Matrix) -> Matrix:
    """Vector of energy norm one; as it is where it has that already, but for round-off."""
    norm = float(np.linalg.norm(vector))
    return vector if abs(norm - 1.0) < ROUND_OFF or norm == 0.0 else vector / norm


def anatomy(problem: WaveProblem, basis: Matrix) -> Anatomy:
    """Describe a critical state by field, kind of wave and layer.

    Parameters
    ----------
    problem : WaveProblem
    basis : ndarray, shape (nstate, nvector)
        Orthonormal in the energy.
    """
    layout = problem.parts.layout
    energy = (np.abs(basis) ** 2).sum(axis=1)
    energy /= energy.sum()
    fields = {name: float(energy[layout.places(name)].sum()) for name in FIELDS}
    by_layer = energy_by_layer(layout, energy)
    lowest, highest = layers_holding(by_layer, SHARE)
    return Anatomy(
        {name: share for name, share in fields.items() if layout.places(name).size},
        _kind_shares(problem, basis),
        lowest,
        highest,
        _wavelength(layout, basis, fields, lowest, highest),
        by_layer,
    )


def _kind_shares(problem: WaveProblem, basis: Matrix) -> dict[str, float]:
    """Energy on the normal modes of the windless, undamped column, by kind."""
    found = problem.wave_terms
    waves = wave_basis(found.terms, problem.parts.layout, found.weights)
    energy = (np.abs(waves.vectors.conj().T @ basis) ** 2).sum(axis=1)
    energy /= energy.sum()
    shares = {kind: float(energy[waves.kind == kind].sum()) for kind in KINDS}
    return {kind: share for kind, share in shares.items() if np.any(waves.kind == kind)}


def energy_by_layer(layout: Layout, energy: NDArray[np.float64]) -> NDArray[np.float64]:
    """Energy of each layer, that of an interface shared by the two layers it parts."""
    by_layer = np.zeros(layout.nlev)
    for name in FIELDS:
        places = layout.places(name)
        if places.size == layout.nlev:
            by_layer += energy[places]
        elif places.size:
            by_layer[:-1] += energy[places] / 2
            by_layer[1:] += energy[places] / 2
    return by_layer


def layers_holding(energy: NDArray[np.float64], share: float) -> tuple[int, int]:
    """Shortest run of layers that holds a share of the energy; the fullest of equally short ones.

    Returns
    -------
    lowest, highest : int
        Both belong to the run.
    """
    below = np.concatenate(([0.0], np.cumsum(energy)))
    target = share * below[-1] * (1 - 1e-12)
    best = (energy.size, -np.inf, 0)
    for low in range(energy.size):
        high = int(np.searchsorted(below, below[low] + target))
        if high > energy.size:
            break
        best = min(best, (high - low, -(below[high] - below[low]), low))
    return best[2], best[2] + best[0] - 1


def _wavelength(
    layout: Layout, basis: Matrix, fields: dict[str, float], lowest: int, highest: int
) -> float | None:
    """Vertical wavelength of the field that holds most energy, from neighbouring differences.

    A pure wave of phase step p between layers has sum |q_{j+1} - q_j|^2 = (2 - 2 cos p) sum |q|^2.
    """
    field = max(fields, key=lambda name: fields[name])
    places = layout.places(field)[lowest : highest + 1]
    if places.size < 2:
        return None
    profile = basis[places]
    scale = (np.abs(profile[1:]) ** 2 + np.abs(profile[:-1]) ** 2).sum() / 2
    if scale == 0:
        return None
    ratio = float((np.abs(np.diff(profile, axis=0)) ** 2).sum() / scale)
    phase = float(np.arccos(np.clip(1 - ratio / 2, -1.0, 1.0)))
    return 2 * np.pi / phase if phase > 1e-3 else None
