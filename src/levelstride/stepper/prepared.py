"""What a stepper knows of an operator and a tableau whatever the length of the step."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from levelstride.operator.bands import Banded
from levelstride.splitting.parts import Parts
from levelstride.stepper.helmholtz import Couplings, obstacles
from levelstride.stepper.kernels import Rows
from levelstride.stepper.plan import Plan, Scheme


def rows_of(matrix: Banded) -> Rows:
    """Turn a banded matrix into rows, leaving out the zeros of its diagonals."""
    n, offsets = matrix.size, np.array(matrix.offsets, dtype=np.int64)
    by_row = matrix.diagonals.T
    row, k = np.nonzero(by_row)
    start = np.zeros(n + 1, dtype=np.int64)
    np.cumsum(np.bincount(row, minlength=n), out=start[1:])
    return Rows(start, row + offsets[k], np.ascontiguousarray(by_row[row, k]))


class Prepared:
    """An operator sorted for a tableau: shared by all steps of a scan.

    Parameters
    ----------
    parts : Parts
    scheme : Scheme

    Attributes
    ----------
    dtype : numpy.dtype
        float64 where the whole operator is real, complex128 otherwise.
    fast, after, after_implicit : Banded
        Of that type; no fast part for a tableau of kind ``explicit``.
    slow_rows, fast_rows : Rows
    plan : Plan
    obstacles : frozenset of str
        Implicit terms that forbid the tridiagonal form.
    couplings : Couplings or None
        None where that form is forbidden or nothing is solved.
    """

    def __init__(self, parts: Parts, scheme: Scheme) -> None:
        self.layout = parts.layout
        self.dtype = np.dtype(np.float64 if parts.is_real else np.complex128)
        explicit = scheme.kind == "explicit"
        slow = self._typed(parts.slow + parts.fast if explicit else parts.slow)
        self.fast = self._typed(Banded.zeros(slow.size) if explicit else parts.fast)
        self.after = self._typed(parts.after)
        self.after_implicit = self._typed(parts.after_implicit)
        self.plan = Plan(scheme, has_slow=not slow.is_zero, has_fast=not self.fast.is_zero)
        self.slow_rows = rows_of(slow)
        self.fast_rows = rows_of(self.fast)
        self.obstacles = obstacles(parts.implicit_terms)
        self.couplings: Couplings | None = None
        if self.plan.solves and not self.obstacles:
            self.couplings = Couplings.of(self.fast, parts.layout, self.dtype)

    def _typed(self, matrix: Banded) -> Banded:
        if self.dtype.kind == "f":
            return matrix.real()
        return Banded(matrix.offsets, matrix.diagonals.astype(self.dtype))


@lru_cache(maxsize=64)
def prepare(parts: Parts, scheme: Scheme) -> Prepared:
    """Keep what is known of the latest operators: a search for a step comes back to each."""
    return Prepared(parts, scheme)
