"""What the semi-discrete operator does by itself, before any time scheme touches it."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.bands import Banded, total
from levelstride.stability.extremes import is_skew, largest_modulus, only_damps, spectral_norm
from levelstride.stability.powers import power_norms

Matrix = NDArray[Any]

ROUND_OFF = 1e-12
"""Share of the operator's norm below which its Hermitian part counts as round-off."""

LOG_OVERFLOW = 600.0
"""ln of a norm beyond which following exp(t L) tells nothing more."""


class OperatorFacts:
    """Growth and size of the semi-discrete operator L of one air state and wave.

    Parameters
    ----------
    operator : Banded
        L in energy coordinates.
    horizon : float
        Time up to which exp(t L) is followed [s].

    Attributes
    ----------
    largest_eigenvalue : float
        Largest modulus of the eigenvalues of L [1/s].
    gains_energy : bool
        Whether any state gains energy, for however short a time.
    """

    def __init__(self, operator: Banded, horizon: float) -> None:
        self._operator, self._horizon = operator, horizon
        self._size = spectral_norm(operator)
        self.largest_eigenvalue, self.gains_energy = self._size, False
        if not is_skew(operator, ROUND_OFF):
            self.largest_eigenvalue = largest_modulus(operator)
            self.gains_energy = not only_damps(operator, ROUND_OFF * self._size)

    @cached_property
    def own_growth(self) -> float:
        """Largest real part of the eigenvalues of L, zero if negative [1/s]."""
        if not self.gains_energy:
            return 0.0
        eigenvalues = np.linalg.eigvals(self._operator.to_dense())
        return max(0.0, float(eigenvalues.real.max()))

    @cached_property
    def _exponential(self) -> tuple[tuple[float, float], ...]:
        if not self.gains_energy:
            return ()
        return _exponential_norms(self._operator.to_dense(), self._size, self._horizon)

    def log_exponential_peak(self, rate: float) -> float:
        """Logarithm of the largest ||exp(t L)|| exp(-t rate) over t >= 0, at least zero."""
        return max([0.0, *(log_norm - t * rate for t, log_norm in self._exponential)])


def _exponential_norms(
    operator: Matrix, size: float, horizon: float
) -> tuple[tuple[float, float], ...]:
    """Follow ln ||exp(t L)|| by powers of exp(t0 L), t0 a quarter of 1/||L||."""
    first = 0.25 / size
    norms = []
    for steps, log_norm in power_norms(expm(operator * first), horizon / first):
        norms.append((steps * first, log_norm))
        if log_norm > LOG_OVERFLOW:
            break
    return tuple(norms)


def cause_of_growth(terms: Mapping[str, Banded], column: Column, air: Background) -> str:
    """Name what makes the semi-discrete operator grow, by taking terms away.

    Parameters
    ----------
    terms : mapping of str to Banded
        All terms on the air.
    column : Column
    air : Background

    Returns
    -------
    str
        ``convection``, ``shear`` or ``formulation (...)``.
    """
    whole = _growth(terms, ())
    candidates = [
        ("convection", ("buoyancy", "stratification"), _turns_over(air)),
        ("shear", ("shear",), _richardson_below_quarter(column, air)),
        ("formulation (frozen updraft)", ("vertical-advection",), True),
        (
            "formulation (shear along slopes)",
            ("slope-pressure-gradient", "slope-divergence"),
            bool(np.any(column.slope_f)),
        ),
        ("formulation (shear)", ("shear", "horizontal-advection"), True),
        ("formulation (divergence damping)", ("divergence-damping",), True),
    ]
    for name, removed, possible in candidates:
        if possible and _growth(terms, removed) < 0.5 * whole:
            return name
    return "formulation (several terms together)"


def _growth(terms: Mapping[str, Banded], without: tuple[str, ...]) -> float:
    kept = [matrix for name, matrix in terms.items() if name not in without]
    operator = total(next(iter(terms.values())).size, kept).to_dense()
    return float(np.linalg.eigvals(operator).real.max())


def _richardson_below_quarter(column: Column, air: Background) -> bool:
    shear = np.diff(air.wind_f) / column.levels.thickness_m
    return bool(np.any(air.n_squared_c < 0.25 * shear**2))


def _turns_over(air: Background) -> bool:
    return bool(np.any(air.n_squared_c < 0) or np.any(air.n_squared_f < 0))
