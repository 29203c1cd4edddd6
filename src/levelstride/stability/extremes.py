"""Extreme eigenvalues and norms of banded matrices at a cost that grows with their size alone."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import LinAlgError, cholesky_banded
from scipy.sparse.linalg import ArpackError, LinearOperator, eigs, eigsh

from levelstride.operator.bands import Banded

FEW_UNKNOWNS = 200
"""Up to so many unknowns full matrices answer at once and exactly."""

PRECISION = 1e-6
"""Relative precision of what is found by iteration."""


def spectral_norm(matrix: Banded) -> float:
    """Largest singular value; by Lanczos iteration to ``PRECISION`` where unknowns are many.

    Notes
    -----
    Lehoucq, Sorensen and Yang 1998, ARPACK Users' Guide. Where the iteration does not converge, the
    root of the largest row sum times the largest column sum stands in, which is not smaller.
    """
    if matrix.size <= FEW_UNKNOWNS:
        return float(np.linalg.norm(matrix.to_dense(), 2))
    if matrix.is_zero:
        return 0.0
    adjoint = matrix.adjoint()
    squared = _operator(matrix, lambda x: adjoint.apply(matrix.apply(x)))
    found = _largest_singular(squared)
    return matrix.norm_bound if found is None else found


def full_spectral_norm(matrix: NDArray[Any]) -> float:
    """Largest singular value of a full matrix; see ``spectral_norm`` for how."""
    if matrix.shape[0] <= FEW_UNKNOWNS or not np.any(matrix):
        return float(np.linalg.norm(matrix, 2))
    turned = matrix.conj().T
    squared = LinearOperator(matrix.shape, lambda x: turned @ (matrix @ x), dtype=matrix.dtype)
    found = _largest_singular(squared)
    return float(np.linalg.norm(matrix, 2)) if found is None else found


def _largest_singular(squared: LinearOperator) -> float | None:
    try:
        (largest,) = eigsh(squared, 1, which="LM", v0=_start(squared.shape[0]), tol=PRECISION,
                           return_eigenvectors=False)  # fmt: skip
    except ArpackError:
        return None
    return float(np.sqrt(max(largest, 0.0)))


def largest_modulus(matrix: Banded) -> float:
    """Largest modulus of the eigenvalues; see ``spectral_norm`` for how."""
    if matrix.size <= FEW_UNKNOWNS:
        return float(np.abs(np.linalg.eigvals(matrix.to_dense())).max())
    if matrix.is_zero:
        return 0.0
    try:
        (largest,) = eigs(_operator(matrix, matrix.apply), 1, which="LM", tol=PRECISION,
                          v0=_start(matrix.size), return_eigenvectors=False)  # fmt: skip
    except ArpackError:
        return spectral_norm(matrix)
    return float(np.abs(largest))


def is_skew(matrix: Banded, share: float) -> bool:
    """Whether A + A^H is zero but for a share of the size of A, so that all growth rates are."""
    return (matrix + matrix.adjoint()).frobenius <= share * matrix.frobenius


def only_damps(matrix: Banded, allowance: float) -> bool:
    """Whether no state gains energy: no eigenvalue of (A + A^H)/2 is above an allowance.

    Told by whether the allowance minus that matrix has a Cholesky factor.
    """
    n = matrix.size
    hermitian = (matrix + matrix.adjoint()).scaled(-0.5)
    band = np.zeros((hermitian.upper + 1, n), dtype=hermitian.diagonals.dtype)
    for offset in range(hermitian.upper + 1):
        band[offset, : n - offset] = hermitian.diagonal(-offset)[offset:]
    band[0] += allowance
    try:
        cholesky_banded(band, lower=True)
    except LinAlgError:
        return False
    return True


def _operator(matrix: Banded, apply: Any) -> LinearOperator:
    n = matrix.size
    return LinearOperator((n, n), matvec=apply, dtype=matrix.diagonals.dtype)


def _start(n: int) -> NDArray[np.float64]:
    """The same first vector every time, so that answers repeat to the last digit."""
    start: NDArray[np.float64] = np.random.default_rng(n).standard_normal(n)
    return start
