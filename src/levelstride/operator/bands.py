"""Square matrices kept by their non-zero diagonals."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Matrix = NDArray[Any]


@dataclass(frozen=True, slots=True, eq=False)
class Banded:
    """A square matrix stored diagonal by diagonal.

    Attributes
    ----------
    offsets : tuple of int
        Ascending offsets (column minus row) of the stored diagonals.
    diagonals : ndarray, shape (noffset, nstate)
        ``diagonals[k, i]`` is the entry in row ``i`` and column ``i + offsets[k]``; zero where that
        column does not exist. Real or complex.
    """

    offsets: tuple[int, ...]
    diagonals: Matrix

    @classmethod
    def zeros(cls, size: int) -> Banded:
        """Return the zero matrix of the given size."""
        return cls((), np.zeros((0, size)))

    @classmethod
    def from_entries(cls, size: int, entries: Iterable[tuple[Matrix, Matrix, Matrix]]) -> Banded:
        """Build from (rows, columns, values) triples; repeated places add up."""
        triples = [tuple(map(np.atleast_1d, np.broadcast_arrays(*e))) for e in entries]
        if not triples:
            return cls.zeros(size)
        rows, columns, values = (np.concatenate(part) for part in zip(*triples, strict=True))
        offsets, position = np.unique(columns - rows, return_inverse=True)
        diagonals = np.zeros((offsets.size, size), dtype=values.dtype)
        np.add.at(diagonals, (position, rows), values)
        return cls(tuple(int(o) for o in offsets), diagonals).trimmed()

    @property
    def size(self) -> int:
        """Number of rows, nstate."""
        return int(self.diagonals.shape[1])

    @property
    def lower(self) -> int:
        """Number of diagonals below the main one that must be stored."""
        return max(0, *(-o for o in self.offsets), 0)

    @property
    def upper(self) -> int:
        """Number of diagonals above the main one that must be stored."""
        return max(0, *self.offsets, 0)

    @property
    def is_real(self) -> bool:
        """Whether every entry is real."""
        return not np.iscomplexobj(self.diagonals) or not np.any(self.diagonals.imag)

    @property
    def is_zero(self) -> bool:
        """Whether every entry is zero."""
        return not np.any(self.diagonals)

    def real(self) -> Banded:
        """Return the same matrix in real arithmetic.

        Raises
        ------
        ValueError
            If an entry has an imaginary part.
        """
        if not self.is_real:
            raise ValueError("matrix has complex entries")
        return Banded(self.offsets, np.ascontiguousarray(self.diagonals.real))

    def trimmed(self) -> Banded:
        """Drop diagonals that hold nothing but zeros."""
        keep = [k for k in range(len(self.offsets)) if np.any(self.diagonals[k])]
        if len(keep) == len(self.offsets):
            return self
        return Banded(tuple(self.offsets[k] for k in keep), self.diagonals[keep])

    def diagonal(self, offset: int) -> Matrix:
        """Return one diagonal, row-aligned, zeros if it is not stored."""
        found: Matrix = np.zeros(self.size, dtype=self.diagonals.dtype)
        if offset in self.offsets:
            found = self.diagonals[self.offsets.index(offset)]
        return found

    def entries(self, rows: ArrayLike, columns: ArrayLike) -> Matrix:
        """Return the entries at the given places, broadcast against one another."""
        rows, columns = np.broadcast_arrays(np.asarray(rows), np.asarray(columns))
        found = np.zeros(rows.shape, dtype=self.diagonals.dtype)
        for k, offset in enumerate(self.offsets):
            here = columns - rows == offset
            found[here] = self.diagonals[k, rows[here]]
        return found

    def __add__(self, other: Banded) -> Banded:
        offsets = sorted(set(self.offsets) | set(other.offsets))
        dtype = np.result_type(self.diagonals, other.diagonals)
        diagonals = np.zeros((len(offsets), self.size), dtype=dtype)
        for part in (self, other):
            for k, offset in enumerate(part.offsets):
                diagonals[offsets.index(offset)] += part.diagonals[k]
        return Banded(tuple(offsets), diagonals)

    def scaled(self, factor: complex) -> Banded:
        """Return the matrix times a number."""
        return Banded(self.offsets, self.diagonals * factor)

    def __sub__(self, other: Banded) -> Banded:
        return self + other.scaled(-1.0)

    def apply(self, x: Matrix) -> Matrix:
        """Multiply with one state or many.

        Parameters
        ----------
        x : ndarray, shape (nstate,) or (nstate, nlane)

        Returns
        -------
        ndarray of the same shape
        """
        y = np.zeros(x.shape, dtype=np.result_type(self.diagonals, x))
        n = self.size
        for k, offset in enumerate(self.offsets):
            low, high = max(0, -offset), min(n, n - offset)
            weights = self.diagonals[k, low:high]
            if x.ndim == 2:
                weights = weights[:, None]
            y[low:high] += weights * x[low + offset : high + offset]
        return y

    def adjoint(self) -> Banded:
        """Return the conjugate transpose."""
        n = self.size
        turned = np.zeros_like(self.diagonals)
        for k, offset in enumerate(self.offsets):
            low, high = max(0, -offset), min(n, n - offset)
            turned[k, low + offset : high + offset] = self.diagonals[k, low:high].conj()
        order = np.argsort([-offset for offset in self.offsets], kind="stable")
        return Banded(tuple(-self.offsets[k] for k in order), turned[order])

    @property
    def frobenius(self) -> float:
        """Frobenius norm."""
        return float(np.linalg.norm(self.diagonals))

    @property
    def norm_bound(self) -> float:
        """Upper bound of the spectral norm: root of the largest row sum times column sum."""
        rows, columns = (
            float(np.abs(one.diagonals).sum(axis=0).max(initial=0.0))
            for one in (self, self.adjoint())
        )
        return float(np.sqrt(rows * columns))

    def to_dense(self) -> Matrix:
        """Return the full matrix, shape (nstate, nstate)."""
        n = self.size
        full = np.zeros((n, n), dtype=self.diagonals.dtype)
        for k, offset in enumerate(self.offsets):
            low, high = max(0, -offset), min(n, n - offset)
            rows = np.arange(low, high)
            full[rows, rows + offset] = self.diagonals[k, low:high]
        return full

    def similar(self, scale: Matrix) -> Banded:
        """Return D A D^-1 for the diagonal matrix D with entries ``scale``."""
        diagonals = np.zeros(self.diagonals.shape, np.result_type(self.diagonals, scale))
        n = self.size
        for k, offset in enumerate(self.offsets):
            low, high = max(0, -offset), min(n, n - offset)
            diagonals[k, low:high] = (
                self.diagonals[k, low:high] * scale[low:high] / scale[low + offset : high + offset]
            )
        return Banded(self.offsets, diagonals)


def total(size: int, parts: Iterable[Banded]) -> Banded:
    """Add matrices of one size; the empty sum is the zero matrix."""
    result = Banded.zeros(size)
    for part in parts:
        result = result + part
    return result
