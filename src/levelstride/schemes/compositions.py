"""Strang-type compositions: half a step of fast terms, a step of slow terms, half a step again.

The composition of two Runge-Kutta methods is an additive Runge-Kutta pair, so it is a tableau like
any other: the fast terms by the implicit table of the one, the slow terms by the explicit table of
the other.

References
----------
Strang 1968, SIAM J. Numer. Anal. 5, 506-517, doi:10.1137/0705041. Carried over: Ullrich and
Jablonowski 2012, Mon. Weather Rev. 140, 1257-1284, doi:10.1175/MWR-D-10-05073.1.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from levelstride.tableaux.tableau import CoefficientText, Precision, Tableau, TextTable

Texts = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Half:
    """A method of the fast terms over half a step: its table, weights and order."""

    a: TextTable
    b: Texts
    order: int
    precision: Precision = "exact"


BACKWARD_EULER: Final = Half((("1",),), ("1",), 1)
FORWARD_EULER: Final = Half((("0",),), ("1",), 1)
TRAPEZOID: Final = Half((("0", "0"), ("1/2", "1/2")), ("1/2", "1/2"), 2)

HALVES: Final = {
    "backward-euler": (BACKWARD_EULER, BACKWARD_EULER),
    "trapezoid": (TRAPEZOID, TRAPEZOID),
    "carried": (FORWARD_EULER, BACKWARD_EULER),
}
"""Halves that have names of their own: first and last half of a step.

``carried``: the first half takes the fast tendency with which the last step ended, which is forward
Euler, and the two halves together are of order two.
"""


def halves_of(method: Tableau) -> tuple[Half, Half]:
    """Both halves by the implicit table of a method."""
    text = method.coefficient_text
    half = Half(text.a_implicit, text.b_implicit, method.implicit_order, method.precision)
    return half, half


def strang(name: str, halves: tuple[Half, Half], inner: Tableau) -> Tableau:
    """Compose two methods.

    Parameters
    ----------
    name : str
        Of the composition.
    halves : tuple of Half
        Fast terms over the first and the last half of the step.
    inner : Tableau
        Its explicit table takes the slow terms over the whole step between.
    """
    first, last = halves
    middle = inner.coefficient_text
    n1, n2, n3 = len(first.b), len(middle.b_explicit), len(last.b)
    none1, none2, none3 = (("0",) * n for n in (n1, n2, n3))
    done = _halved(first.b)
    implicit = [(*_halved(row), *none2, *none3) for row in first.a]
    implicit += [(*done, *none2, *none3)] * n2
    implicit += [(*done, *none2, *_halved(row)) for row in last.a]
    explicit = [(*none1, *none2, *none3)] * n1
    explicit += [(*none1, *row, *none3) for row in middle.a_explicit]
    explicit += [(*none1, *middle.b_explicit, *none3)] * n3
    text = CoefficientText(
        tuple(explicit),
        (*none1, *middle.b_explicit, *none3),
        tuple(implicit),
        (*done, *none2, *_halved(last.b)),
    )
    fast = 2 if halves == HALVES["carried"] else min(first.order, last.order)
    precision = min(
        (first.precision, last.precision, inner.precision), key=("decimal", "long", "exact").index
    )
    return Tableau(
        name=name,
        coefficient_text=text,
        order=min(2, fast, inner.explicit_order),
        explicit_order=inner.explicit_order,
        implicit_order=fast,
        source="composition after Strang (1968), SIAM J. Numer. Anal. 5, 506-517",
        note=f"half a step of fast terms, {inner.name} for slow terms, half a step of fast terms",
        precision=precision,
    )


def _halved(row: Texts) -> Texts:
    return tuple("0" if text == "0" else f"({text})/2" for text in row)
