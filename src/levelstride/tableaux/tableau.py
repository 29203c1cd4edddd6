"""One time scheme as data: the two tables of an additive Runge-Kutta pair."""

from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from fractions import Fraction
from functools import cached_property
from types import MappingProxyType
from typing import Any, Final, Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from levelstride.tableaux import stability
from levelstride.tableaux.coefficients import Number, evaluate, rounded

Array: TypeAlias = NDArray[np.float64]
Precision: TypeAlias = Literal["exact", "long", "decimal"]
TextTable: TypeAlias = tuple[tuple[str, ...], ...]

TOLERANCES: Final[Mapping[str, Fraction]] = MappingProxyType(
    {"exact": Fraction(1, 10**40), "long": Fraction(1, 10**20), "decimal": Fraction(1, 10**12)}
)
"""What a condition may miss, by how the coefficients are published [1]."""


@dataclass(frozen=True, slots=True)
class CoefficientText:
    """The coefficients as written in the file, row by row."""

    a_explicit: TextTable
    b_explicit: tuple[str, ...]
    a_implicit: TextTable
    b_implicit: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class ExactTables:
    """The coefficients as exact numbers."""

    a_explicit: tuple[tuple[Number, ...], ...]
    b_explicit: tuple[Number, ...]
    a_implicit: tuple[tuple[Number, ...], ...]
    b_implicit: tuple[Number, ...]


@dataclass(frozen=True, eq=False)
class Tableau:
    """An implicit-explicit additive Runge-Kutta pair, or an explicit method (two equal tables).

    What follows from the coefficients is a property; the orders are those that the source claims
    and the audit measures.
    """

    name: str
    coefficient_text: CoefficientText
    order: int
    explicit_order: int
    implicit_order: int
    kind: Literal["additive", "explicit"] = "additive"
    aliases: tuple[str, ...] = ()
    source: str = ""
    note: str = ""
    precision: Precision = "decimal"
    declared: Mapping[str, Any] = field(default_factory=dict)
    """Every figure that the file states about the scheme, as stated."""

    @cached_property
    def exact(self) -> ExactTables:
        """The coefficients as exact numbers."""
        text = self.coefficient_text
        return ExactTables(
            _exact_table(text.a_explicit),
            tuple(map(evaluate, text.b_explicit)),
            _exact_table(text.a_implicit),
            tuple(map(evaluate, text.b_implicit)),
        )

    @cached_property
    def a_explicit(self) -> Array:
        """Explicit table, (nstage, nstage), strictly lower triangular, read-only."""
        return _read_only(self.exact.a_explicit)

    @cached_property
    def b_explicit(self) -> Array:
        """Explicit weights, (nstage), read-only."""
        return _read_only(self.exact.b_explicit)

    @cached_property
    def a_implicit(self) -> Array:
        """Implicit table, (nstage, nstage), lower triangular, read-only."""
        return _read_only(self.exact.a_implicit)

    @cached_property
    def b_implicit(self) -> Array:
        """Implicit weights, (nstage), read-only."""
        return _read_only(self.exact.b_implicit)

    @property
    def levels(self) -> int:
        """Time levels that a step starts from: one."""
        return 1

    @property
    def fingerprint(self) -> dict[str, Any]:
        """All that its answers depend on, as plain data."""
        return asdict(self.coefficient_text)

    @property
    def nstage(self) -> int:
        """Number of stages."""
        return len(self.coefficient_text.b_explicit)

    @cached_property
    def c_explicit(self) -> Array:
        """Row sums of the explicit table, (nstage)."""
        return _read_only(tuple(exact_sum(row) for row in self.exact.a_explicit))

    @cached_property
    def c_implicit(self) -> Array:
        """Row sums of the implicit table, (nstage)."""
        return _read_only(tuple(exact_sum(row) for row in self.exact.a_implicit))

    @property
    def implicit_solves(self) -> int:
        """Stages that ask for an implicit solve: nonzero diagonal entries of the implicit table."""
        return int(np.count_nonzero(np.diagonal(self.a_implicit)))

    @property
    def explicit_evaluations(self) -> int:
        """Stages whose slow tendency is used."""
        return int(np.count_nonzero(self.a_explicit.any(axis=0) | (self.b_explicit != 0.0)))

    @property
    def stiffly_accurate(self) -> bool:
        """Whether the implicit weights are the last row of the implicit table."""
        return bool(np.array_equal(self.b_implicit, self.a_implicit[-1]))

    @property
    def globally_stiffly_accurate(self) -> bool:
        """Whether both sets of weights are the last rows of their tables."""
        same = np.array_equal(self.b_explicit, self.a_explicit[-1])
        return self.stiffly_accurate and bool(same)

    @property
    def distinct_diagonals(self) -> tuple[float, ...]:
        """The different nonzero diagonal entries of the implicit table, ascending."""
        return tuple(float(x) for x in np.unique(np.diagonal(self.a_implicit)) if x != 0.0)

    @property
    def tolerance(self) -> Fraction:
        """What a condition may miss, given how the coefficients are published [1]."""
        return TOLERANCES[self.precision]

    @cached_property
    def imaginary_axis_limit(self) -> float:
        """Largest Y with |P(iy)| <= 1 up to Y, P the polynomial of the explicit part [1]."""
        return stability.imaginary_axis_limit(
            self.exact.a_explicit, self.exact.b_explicit, self.tolerance
        )

    @cached_property
    def real_axis_limit(self) -> float:
        """Largest X with |P(-x)| <= 1 up to X, P the polynomial of the explicit part [1]."""
        return stability.real_axis_limit(
            self.exact.a_explicit, self.exact.b_explicit, self.tolerance
        )

    @cached_property
    def value_at_infinity(self) -> float:
        """Limit of the implicit stability function at infinity, ``inf`` if unbounded [1]."""
        return stability.value_at_infinity(
            self.exact.a_implicit, self.exact.b_implicit, self.tolerance
        )

    @cached_property
    def a_stable(self) -> bool:
        """Whether the implicit part alone is A-stable."""
        return stability.is_a_stable(self.exact.a_implicit, self.exact.b_implicit, self.tolerance)

    @property
    def l_stable(self) -> bool:
        """Whether the implicit part alone is A-stable and vanishes at infinity."""
        return self.a_stable and self.value_at_infinity == 0.0

    @property
    def negative_diagonals(self) -> tuple[stability.NegativeDiagonal, ...]:
        """Negative diagonal entries of the implicit table with their poles."""
        return stability.negative_diagonals(self.exact.a_implicit)


def _exact_table(rows: Sequence[Sequence[str]]) -> tuple[tuple[Number, ...], ...]:
    return tuple(tuple(map(evaluate, row)) for row in rows)


def exact_sum(row: Sequence[Number]) -> Fraction:
    """Sum of a row of coefficients, every digit kept."""
    return sum((Fraction(x) for x in row), Fraction(0))


def _read_only(values: Sequence[Any]) -> Array:
    array = np.array(
        [[rounded(x) for x in row] if isinstance(row, tuple) else rounded(row) for row in values],
        dtype=np.float64,
    )
    array.flags.writeable = False
    return array
