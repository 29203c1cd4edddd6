"""Real polynomials with exact coefficients: where does one first become positive?

Coefficients are listed from the constant upwards. Roots are counted with Sturm's theorem, so that
a polynomial that only touches zero (optimal stability polynomials do) is told from a crossing one.
"""

from collections.abc import Callable, Sequence
from decimal import Decimal
from fractions import Fraction
from itertools import pairwise
from math import inf
from typing import TypeAlias

from levelstride.tableaux.coefficients import CONTEXT, as_decimal

Polynomial: TypeAlias = tuple[Fraction, ...]
"""Coefficients from the constant upwards."""


def stripped(coefficients: Sequence[Fraction], tolerance: Fraction) -> Polynomial:
    """Polynomial with coefficients within the tolerance set to zero, without leading zeros."""
    kept = [c if abs(c) > tolerance else Fraction(0) for c in coefficients]
    while kept and kept[-1] == 0:
        kept.pop()
    return tuple(kept)


def multiply(left: Polynomial, right: Polynomial) -> Polynomial:
    """Product of two polynomials."""
    product = [Fraction(0)] * max(len(left) + len(right) - 1, 0)
    for i, a in enumerate(left):
        for j, b in enumerate(right):
            product[i + j] += a * b
    return tuple(product)


def square_on_axis(polynomial: Polynomial) -> Polynomial:
    """|P(iy)|^2 as a polynomial in x = y^2."""
    even = tuple((-1) ** k * c for k, c in enumerate(polynomial[0::2]))
    odd = tuple((-1) ** k * c for k, c in enumerate(polynomial[1::2]))
    total = [Fraction(0)] * max(len(polynomial), 1)
    for k, c in enumerate(multiply(even, even)):
        total[k] += c
    for k, c in enumerate(multiply(odd, odd)):
        total[k + 1] += c
    return tuple(total)


def subtract(left: Polynomial, right: Polynomial) -> Polynomial:
    """Difference of two polynomials."""
    size = max(len(left), len(right))
    padded = [(*p, *[Fraction(0)] * (size - len(p))) for p in (left, right)]
    return tuple(a - b for a, b in zip(*padded, strict=True))


def first_positive(polynomial: Sequence[Fraction], tolerance: Fraction) -> float:
    """Supremum of X such that the polynomial is not positive on 0 <= x <= X.

    Parameters
    ----------
    polynomial : sequence of Fraction
        Must not be positive at zero by more than the tolerance.
    tolerance : Fraction
        Coefficients and values within it count as zero.

    Returns
    -------
    float
        ``inf`` if it never becomes positive.
    """
    kept = stripped(polynomial, tolerance)
    if not kept:
        return inf
    lowest = next(k for k, c in enumerate(kept) if c != 0)
    if kept[lowest] > 0:
        return 0.0
    shifted = (kept[lowest] - tolerance, *kept[lowest + 1 :])
    if len(shifted) == 1:
        return inf
    root = _smallest_root(_sturm_chain(shifted))
    return float(_without_tolerance(kept[lowest:], root, as_decimal(tolerance)))


def _sturm_chain(polynomial: Polynomial) -> list[tuple[Decimal, ...]]:
    chain = [polynomial, tuple(k * c for k, c in enumerate(polynomial))[1:]]
    while len(chain[-1]) > 1:
        remainder = _negative_remainder(chain[-2], chain[-1])
        if not remainder:
            break
        chain.append(remainder)
    return [tuple(as_decimal(c) for c in p) for p in chain]


def _negative_remainder(dividend: Polynomial, divisor: Polynomial) -> Polynomial:
    rest = list(dividend)
    while len(rest) >= len(divisor):
        factor = rest[-1] / divisor[-1]
        offset = len(rest) - len(divisor)
        for k, c in enumerate(divisor):
            rest[offset + k] -= factor * c
        rest.pop()
    while rest and rest[-1] == 0:
        rest.pop()
    largest = max((abs(c) for c in rest), default=Fraction(1))
    return tuple(-c / largest for c in rest)


def _value(polynomial: Sequence[Decimal], x: Decimal) -> Decimal:
    total = Decimal(0)
    for c in reversed(polynomial):
        total = CONTEXT.fma(total, x, c)
    return total


def _sign_changes(values: Sequence[Decimal]) -> int:
    signs = [v > 0 for v in values if v != 0]
    return sum(a != b for a, b in pairwise(signs))


def _without_tolerance(exact: Polynomial, root: Decimal, tolerance: Decimal) -> Decimal:
    """Crossing of the polynomial itself, next to the root of polynomial minus tolerance."""
    if not root.is_finite():
        return root
    polynomial = [as_decimal(c) for c in exact]
    for halvings in range(45, 9, -1):
        low = CONTEXT.multiply(root, 1 - Decimal(2) ** -halvings)
        if _value(polynomial, low) <= -tolerance:
            return _bisected(low, root, lambda x: _value(polynomial, x) > 0)
    return root


def _bisected(low: Decimal, high: Decimal, beyond: Callable[[Decimal], bool]) -> Decimal:
    for _ in range(80):
        middle = CONTEXT.divide(CONTEXT.add(low, high), Decimal(2))
        low, high = (low, middle) if beyond(middle) else (middle, high)
    return high


def _smallest_root(chain: list[tuple[Decimal, ...]]) -> Decimal:
    at_zero = _sign_changes([p[0] for p in chain])

    def roots_below(x: Decimal) -> bool:
        return at_zero > _sign_changes([_value(p, x) for p in chain])

    if at_zero == _sign_changes([p[-1] for p in chain]):
        return Decimal("Infinity")
    high = Decimal(1)
    while not roots_below(high):
        high *= 2
    return _bisected(Decimal(0), high, roots_below)
