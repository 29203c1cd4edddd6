"""Order conditions of additive Runge-Kutta pairs, generated from two-coloured rooted trees.

Every vertex of a tree has the colour of one part, explicit (slow) or implicit (fast). A pair has
order p when for each tree of at most p vertices the elementary weight equals one over the density.
The weight of a tree is b (of the root's colour) applied to the product of its branches; a branch is
A (of its own root's colour) applied to the product of its branches; a single vertex gives c = A 1.

Trees of one colour are the conditions of one table alone; trees of both colours couple the tables.
Tall trees (no vertex with two branches) are all that linear problems with constant coefficients ask
for.

References
----------
E. Hairer, G. Wanner, S. P. Noersett (1993), Solving Ordinary Differential Equations I, sections
II.2 and II.15 (P-series). A. L. Araujo, A. Murua, J. M. Sanz-Serna (1997), SIAM Journal on
Numerical Analysis 34(5), 1926-1947, doi:10.1137/S0036142995292128.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from functools import cache, cached_property
from math import prod
from typing import Final, Literal, TypeAlias

from levelstride.tableaux.coefficients import CONTEXT, as_decimal
from levelstride.tableaux.tableau import ExactTables

Colour: TypeAlias = Literal["ex", "im"]
Family: TypeAlias = Literal["explicit", "implicit", "coupling"]
Vector: TypeAlias = tuple[Decimal, ...]

COLOURS: Final[tuple[Colour, ...]] = ("ex", "im")


@dataclass(frozen=True)
class Tree:
    """A rooted tree whose vertices have the colour of one part."""

    colour: Colour
    branches: tuple["Tree", ...] = ()

    @cached_property
    def order(self) -> int:
        """Number of vertices."""
        return 1 + sum(branch.order for branch in self.branches)

    @cached_property
    def density(self) -> int:
        """Product over all vertices of the size of the subtree that hangs there."""
        return self.order * prod(branch.density for branch in self.branches)

    @cached_property
    def tall(self) -> bool:
        """Whether no vertex has more than one branch."""
        return len(self.branches) < 2 and all(branch.tall for branch in self.branches)

    @cached_property
    def colours(self) -> frozenset[Colour]:
        """Colours that occur."""
        return frozenset({self.colour}).union(*(branch.colours for branch in self.branches))

    @property
    def family(self) -> Family:
        """Whose condition it is: one table's alone, or the coupling of both."""
        if len(self.colours) == 2:
            return "coupling"
        return "explicit" if self.colour == "ex" else "implicit"

    def condition(self) -> str:
        """The order condition in the letters of the literature; stars multiply pointwise."""
        product = _product(self.branches)
        if len(self.branches) > 1:
            product = f"({product})"
        weight = f"b_{self.colour}.{product}" if self.branches else f"sum b_{self.colour}"
        return f"{weight} = {Fraction(1, self.density)}"


@dataclass(frozen=True, slots=True)
class Residual:
    """By how much one condition is missed."""

    tree: Tree
    value: Decimal
    """Elementary weight minus one over the density [1]."""


@cache
def trees(order: int) -> tuple[Tree, ...]:
    """All two-coloured rooted trees with that many vertices: 2, 4, 14, 52, 214 for 1 to 5.

    Parameters
    ----------
    order : int
        Number of vertices, at least 1.
    """
    return tuple(
        Tree(colour, forest) for colour in COLOURS for forest in _forests(order - 1, order - 1)
    )


def residuals(tables: ExactTables, highest_order: int) -> tuple[Residual, ...]:
    """Residual of every order condition up to the given order, lowest order first.

    Parameters
    ----------
    tables : ExactTables
        Coefficients; evaluated with `levelstride.tableaux.coefficients.DIGITS` digits.
    highest_order : int
        Trees of up to so many vertices.
    """
    weigher = _Weigher(tables)
    return tuple(
        Residual(tree, weigher.residual(tree))
        for order in range(1, highest_order + 1)
        for tree in trees(order)
    )


def _forests(size: int, largest: int, last: int | None = None) -> Iterator[tuple[Tree, ...]]:
    """Multisets of trees with `size` vertices in all, at most `largest` in each, falling.

    `last` is the position, among the trees of `largest` vertices, that must not be exceeded.
    """
    if size == 0:
        yield ()
        return
    for order in range(min(size, largest), 0, -1):
        candidates = trees(order)
        top = len(candidates) - 1 if last is None or order < largest else last
        for position in range(top, -1, -1):
            for rest in _forests(size - order, order, position):
                yield (candidates[position], *rest)


def _product(branches: tuple[Tree, ...]) -> str:
    factors = [
        f"A_{branch.colour}({_product(branch.branches)})"
        if branch.branches
        else f"c_{branch.colour}"
        for branch in branches
    ]
    return " * ".join(factors)


class _Weigher:
    """Elementary weights of one pair; branches met again are not computed again."""

    def __init__(self, tables: ExactTables) -> None:
        rows = {"ex": tables.a_explicit, "im": tables.a_implicit}
        weights = {"ex": tables.b_explicit, "im": tables.b_implicit}
        self.rows = {k: tuple(tuple(map(as_decimal, r)) for r in a) for k, a in rows.items()}
        self.weights = {k: tuple(map(as_decimal, b)) for k, b in weights.items()}
        self.known: dict[Tree, Vector] = {}

    def residual(self, tree: Tree) -> Decimal:
        weight = _dot(self.weights[tree.colour], self._branches(tree))
        return CONTEXT.subtract(weight, CONTEXT.divide(Decimal(1), Decimal(tree.density)))

    def _branch(self, tree: Tree) -> Vector:
        if tree not in self.known:
            inner = self._branches(tree)
            self.known[tree] = tuple(_dot(row, inner) for row in self.rows[tree.colour])
        return self.known[tree]

    def _branches(self, tree: Tree) -> Vector:
        total = (Decimal(1),) * len(self.weights["ex"])
        for branch in tree.branches:
            total = tuple(map(CONTEXT.multiply, total, self._branch(branch)))
        return total


def _dot(left: Vector, right: Vector) -> Decimal:
    total = Decimal(0)
    for x, y in zip(left, right, strict=True):
        if x and y:
            total = CONTEXT.fma(x, y, total)
    return total
