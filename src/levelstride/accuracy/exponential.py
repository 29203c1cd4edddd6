"""The exact solution of the semi-discrete column: its operator's exponential applied to states."""

from __future__ import annotations

from functools import cached_property
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh, expm

from levelstride.accuracy.modes import ROUND_OFF
from levelstride.errors import CalculationError
from levelstride.operator.bands import Banded

Matrix = NDArray[Any]


class Exponential:
    """exp(t L) of a banded operator in energy coordinates.

    Where L is skew in the energy but for a multiple c of the identity (no shear, nothing that damps
    one field and not another), L - c = i H with H Hermitian, and exp(t L) = exp(c t) V exp(i t W)
    V^H is unitary but for the factor, whatever the time. Elsewhere by Pade approximation with
    scaling and squaring.

    Parameters
    ----------
    operator : Banded
        L [1/s], shape (nstate, nstate).

    Notes
    -----
    Frequencies carry an absolute error of some eps ||L||, so the solution one of some eps ||L|| t,
    by whatever method: `round_off`. A Taylor series applied to the state alone (``expm_multiply``)
    needs some ||L|| t products; with thin layers that takes 20 to 400 times as long as squaring.

    References
    ----------
    A. H. Al-Mohy, N. J. Higham (2009), SIAM Journal on Matrix Analysis and Applications 31(3),
    970-989, doi:10.1137/09074721X.
    """

    def __init__(self, operator: Banded) -> None:
        self._operator = operator
        self._shift = complex(np.mean(operator.diagonal(0)))
        identity = Banded((0,), np.ones((1, operator.size)))
        rest = operator - identity.scaled(self._shift)
        scale = float(np.abs(operator.diagonals).max(initial=0.0))
        excess = np.abs((rest + rest.adjoint()).diagonals).max(initial=0.0)
        self.is_unitary = bool(excess <= ROUND_OFF * scale)
        """Whether exp(t L) is unitary but for a factor, and found by diagonalisation."""
        self._rest = rest

    @cached_property
    def _eigen(self) -> tuple[NDArray[np.float64], Matrix]:
        """Frequencies [1/s] and orthonormal vectors of L - c."""
        dense = -1j * self._rest.to_dense()
        return cast("tuple[NDArray[np.float64], Matrix]", eigh((dense + dense.conj().T) / 2))

    def round_off(self, time_s: float) -> float:
        """What round-off alone may do to a state of unit energy within a time [s]: eps ||L|| t."""
        return float(np.finfo(np.float64).eps * self._operator.norm_bound * abs(time_s))

    def apply(self, time_s: float, state: Matrix) -> Matrix:
        """Return exp(t L) times a state or many.

        Parameters
        ----------
        time_s : float
            t [s].
        state : ndarray, shape (nstate,) or (nstate, nlane)
            In energy coordinates.

        Returns
        -------
        ndarray of complex, of the same shape

        Raises
        ------
        CalculationError
            If the column itself grows beyond all numbers within that time.
        """
        state = np.asarray(state, dtype=np.complex128)
        with np.errstate(over="ignore", invalid="ignore"):
            if self.is_unitary:
                found = self._by_diagonalisation(time_s, state)
            else:
                found = expm(time_s * self._operator.to_dense()) @ state
        if not np.all(np.isfinite(found)):
            raise CalculationError(
                f"the column itself grows beyond all numbers within {time_s:g} s; "
                "ask for a shorter time"
            )
        return found

    def _by_diagonalisation(self, time_s: float, state: Matrix) -> Matrix:
        frequency, vectors = self._eigen
        factor = np.exp((1j * frequency + self._shift) * time_s)
        turned = vectors.conj().T @ state
        return np.asarray(vectors @ (factor.reshape(-1, *[1] * (state.ndim - 1)) * turned))
