"""Stability of a tableau's two parts on their own: limits on the axes, behaviour at infinity.

With the tables ``a`` (nstage, nstage) and weights ``b`` (nstage) of one part, one step of
``q' = lambda q`` multiplies q by the stability function R(z), z = dt lambda. For an explicit table
R is the polynomial 1 + sum_k b A^(k-1) 1 z^k; for an implicit one R = N/D, D = prod_i (1 - a_ii z).

References
----------
E. Hairer, G. Wanner (1996), Solving Ordinary Differential Equations II, sections IV.2 and IV.3.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from math import inf, sqrt

from levelstride.tableaux.coefficients import CONTEXT, Number, as_decimal
from levelstride.tableaux.polynomials import (
    Polynomial,
    first_positive,
    multiply,
    square_on_axis,
    stripped,
    subtract,
)

Table = Sequence[Sequence[Number]]
Weights = Sequence[Number]


@dataclass(frozen=True, slots=True)
class NegativeDiagonal:
    """One negative diagonal entry of the implicit table.

    The stage cannot be solved where dt lambda = `pole` on the negative real axis: damping meets it.
    """

    stage: int
    """Stage, counted from 1."""
    value: float
    """The entry a_ii [1]."""
    pole: float
    """-1/|a_ii|, in units of dt lambda [1]."""


def series(a: Table, b: Weights) -> Polynomial:
    """Coefficients 1, b.1, b.A.1, b.A.A.1, ... of the stability function, up to z^nstage."""
    table = [[as_decimal(x) for x in row] for row in a]
    weights = [as_decimal(x) for x in b]
    stages = [Decimal(1)] * len(weights)
    found = [Fraction(1)]
    for _ in weights:
        found.append(Fraction(_dot(weights, stages)))
        stages = [_dot(row, stages) for row in table]
    return tuple(found)


def imaginary_axis_limit(a: Table, b: Weights, tolerance: Fraction) -> float:
    """Largest Y with |P(iy)| <= 1 for all 0 <= y <= Y, P the polynomial of an explicit table.

    Parameters
    ----------
    a, b : (nstage, nstage) and (nstage) exact numbers
    tolerance : Fraction
        Excess of |P|^2 over one that counts as none.

    Returns
    -------
    float
        Zero where P grows at once, ``inf`` where P is one (no explicit part).
    """
    excess = subtract(square_on_axis(series(a, b)), (Fraction(1),))
    return sqrt(first_positive(excess, tolerance))


def real_axis_limit(a: Table, b: Weights, tolerance: Fraction) -> float:
    """Largest X with |P(-x)| <= 1 for all 0 <= x <= X, P the polynomial of an explicit table."""
    mirrored = tuple((-1) ** k * c for k, c in enumerate(series(a, b)))
    return first_positive(subtract(multiply(mirrored, mirrored), (Fraction(1),)), tolerance)


def fraction_parts(a: Table, b: Weights, tolerance: Fraction) -> tuple[Polynomial, Polynomial]:
    """Numerator N and denominator D of the stability function of a lower triangular table."""
    denominator: Polynomial = (Fraction(1),)
    for i, row in enumerate(a):
        denominator = multiply(denominator, (Fraction(1), -Fraction(as_decimal(row[i]))))
    numerator = multiply(series(a, b), denominator)[: len(b) + 1]
    return stripped(numerator, tolerance), stripped(denominator, tolerance)


def value_at_infinity(a: Table, b: Weights, tolerance: Fraction) -> float:
    """Limit of the implicit stability function at infinity; ``inf`` if it is unbounded."""
    numerator, denominator = fraction_parts(a, b, tolerance)
    if len(numerator) > len(denominator):
        return inf
    if len(numerator) < len(denominator):
        return 0.0
    return float(numerator[-1] / denominator[-1])


def is_a_stable(a: Table, b: Weights, tolerance: Fraction) -> bool:
    """Whether |R(z)| <= 1 in the whole left half plane: no pole there, and |R| <= 1 on its edge."""
    numerator, denominator = fraction_parts(a, b, tolerance)
    for i, row in enumerate(a):
        if row[i] < 0 and not _vanishes(numerator, row[i], tolerance):
            return False
    excess = subtract(square_on_axis(numerator), square_on_axis(denominator))
    return first_positive(excess, tolerance) == inf


def negative_diagonals(a: Table) -> tuple[NegativeDiagonal, ...]:
    """Every negative diagonal entry of an implicit table, with its pole."""
    return tuple(
        NegativeDiagonal(i + 1, float(row[i]), float(1 / as_decimal(row[i])))
        for i, row in enumerate(a)
        if row[i] < 0
    )


def _vanishes(numerator: Polynomial, entry: Number, tolerance: Fraction) -> bool:
    """Whether the numerator cancels the pole at z = 1/entry."""
    z = 1 / Fraction(as_decimal(entry))
    return abs(sum((c * z**k for k, c in enumerate(numerator)), Fraction(0))) <= tolerance


def _dot(left: Sequence[Decimal], right: Sequence[Decimal]) -> Decimal:
    total = Decimal(0)
    for x, y in zip(left, right, strict=True):
        if x and y:
            total = CONTEXT.fma(x, y, total)
    return total
