"""LU factors of a banded matrix, for every implicit set that has no tridiagonal form."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, cast

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import get_lapack_funcs

from levelstride.operator.bands import Banded

Array = NDArray[Any]

_SINGULAR: Final = 1e-13
"""Reciprocal condition, after equilibration, below which a matrix counts as singular."""


def identity_minus(matrix: Banded, h: float) -> Banded:
    """Return I - h A."""
    one = Banded((0,), np.ones((1, matrix.size)))
    return one - matrix.scaled(h)


@dataclass(frozen=True, slots=True, eq=False)
class BandedFactors:
    """LU factors with row interchanges of a matrix whose rows and columns were scaled to one.

    The unknowns differ in units by many powers of ten; without the scaling neither the choice of
    pivots nor the estimated condition would mean anything.
    """

    factors: Array
    pivots: Array
    lower: int
    upper: int
    row_scale: Array
    column_scale: Array
    weakest: int | None

    @classmethod
    def of(cls, matrix: Banded) -> BandedFactors:
        """Factor a matrix; ``weakest`` is the unknown that makes it singular, None if it is not."""
        lower, upper = matrix.lower, matrix.upper
        rows, columns = _scales(matrix)
        scaled = _scaled(matrix, rows, columns)
        band = _lapack_band(scaled, lower, upper)
        factorise, condition = _lapack("gbtrf", band), _lapack("gbcon", band)
        factors, pivots, info = factorise(band, lower, upper)
        weakest: int | None = int(info) - 1 if info > 0 else None
        if weakest is None:
            norm = np.abs(scaled.diagonals).sum(axis=0).max()
            reciprocal, _ = condition(lower, upper, factors, pivots, norm, norm="I")
            if not reciprocal > _SINGULAR:
                weakest = int(np.argmin(np.abs(factors[lower + upper])))
        return cls(factors, pivots, lower, upper, rows, columns, weakest)

    def solve(self, rhs: Array) -> Array:
        """Solve for many right-hand sides, shape (nstate, nlane), of the factors' own type."""
        backward = _lapack("gbtrs", self.factors)
        scaled = np.asfortranarray(self.row_scale[:, None] * rhs, dtype=self.factors.dtype)
        solution, _ = backward(
            self.factors, self.lower, self.upper, scaled, self.pivots, overwrite_b=True
        )
        return np.ascontiguousarray(self.column_scale[:, None] * solution)


def _lapack(name: str, matrix: Array) -> Any:
    routine: Any
    (routine,) = cast(Any, get_lapack_funcs((name,), (matrix,)))
    return routine


def _power_of_two(largest: Array) -> Array:
    safe = np.where(largest > 0.0, largest, 1.0)
    scale: Array = np.exp2(-np.round(np.log2(safe)))
    return scale


def _scales(matrix: Banded) -> tuple[Array, Array]:
    """Scales, powers of two, after a few rounds of which rows and columns are of size one."""
    n = matrix.size
    rows, columns = np.ones(n), np.ones(n)
    for _ in range(3):
        moduli = np.abs(_scaled(matrix, rows, columns).diagonals)
        rows *= _power_of_two(moduli.max(axis=0))
        moduli = np.abs(_scaled(matrix, rows, columns).diagonals)
        largest = np.zeros(n)
        for k, offset in enumerate(matrix.offsets):
            low, high = max(0, -offset), min(n, n - offset)
            target = largest[low + offset : high + offset]
            np.maximum(target, moduli[k, low:high], out=target)
        columns *= _power_of_two(largest)
    return rows, columns


def _scaled(matrix: Banded, rows: Array, columns: Array) -> Banded:
    n, diagonals = matrix.size, matrix.diagonals * rows
    for k, offset in enumerate(matrix.offsets):
        low, high = max(0, -offset), min(n, n - offset)
        diagonals[k, low:high] *= columns[low + offset : high + offset]
    return Banded(matrix.offsets, diagonals)


def _lapack_band(matrix: Banded, lower: int, upper: int) -> Array:
    """Column-aligned band with room for the fill-in, shape (2 lower + upper + 1, nstate)."""
    n = matrix.size
    band = np.zeros((2 * lower + upper + 1, n), dtype=matrix.diagonals.dtype, order="F")
    for k, offset in enumerate(matrix.offsets):
        low, high = max(0, -offset), min(n, n - offset)
        band[lower + upper - offset, low + offset : high + offset] = matrix.diagonals[k, low:high]
    return band
