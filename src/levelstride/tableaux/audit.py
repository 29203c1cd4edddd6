"""What the coefficients of a tableau say, held against what its source claims."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from math import inf, isclose, isinf, nan
from typing import Final

from levelstride.tableaux.coefficients import Number, as_decimal, evaluate
from levelstride.tableaux.order_conditions import Residual, Tree, residuals
from levelstride.tableaux.stability import NegativeDiagonal
from levelstride.tableaux.tableau import Tableau, exact_sum

HIGHEST_ORDER: Final = 5
"""Orders are measured up to here; an order of 5 means at least 5."""

_ABSCISSA_TOLERANCE: Final = Fraction(1, 10**12)
_COUNTED: Final = (
    ("stages", "nstage"),
    ("implicit_solves", "implicit_solves"),
    ("explicit_evaluations", "explicit_evaluations"),
)
_FLAGS: Final = ("a_stable", "l_stable", "stiffly_accurate", "globally_stiffly_accurate")
_LIMITS: Final = ("imaginary_axis_limit", "value_at_infinity")


@dataclass(frozen=True, slots=True)
class WorstCondition:
    """The order condition of one order that is missed by most."""

    order: int
    condition: str
    """For example ``b_ex.A_im(c_ex) = 1/6``."""
    residual: float
    """Left minus right hand side [1]."""


@dataclass(frozen=True, slots=True)
class Audit:
    """Everything measured from the coefficients of one tableau, and what contradicts its claims."""

    name: str
    kind: str
    precision: str
    tolerance: float
    """What a condition may miss [1]."""
    declared_order: int
    linear_order: int
    """Order on linear problems with constant coefficients, both parts and their coupling."""
    nonlinear_order: int
    """Classical order of the pair: both tables alone and their coupling."""
    coupling_order: int
    """Largest order up to which every condition that couples the tables holds."""
    explicit_order: int
    implicit_order: int
    worst: tuple[WorstCondition, ...]
    """One for each order from 1 to `HIGHEST_ORDER`."""
    row_sum_difference: float
    """Largest difference between the row sums of the two tables [1]."""
    imaginary_axis_limit: float
    real_axis_limit: float
    value_at_infinity: float
    a_stable: bool
    negative_diagonals: tuple[NegativeDiagonal, ...]
    violations: tuple[str, ...]
    """One line each: which condition or claim fails, and by how much."""

    @property
    def passed(self) -> bool:
        """Whether nothing contradicts the claims."""
        return not self.violations


def audit(tableau: Tableau) -> Audit:
    """Measure a tableau and hold it against its claims.

    Parameters
    ----------
    tableau : Tableau

    Returns
    -------
    Audit
        Axis limits and the value at infinity are not a number where the tables are not triangular.

    Examples
    --------
    >>> from levelstride.tableaux import find
    >>> report = audit(find("SIL3"))
    >>> report.linear_order, report.nonlinear_order, report.coupling_order, report.passed
    (2, 2, 2, True)
    """
    found = residuals(tableau.exact, HIGHEST_ORDER)
    tolerance = as_decimal(tableau.tolerance)
    shape = _shape_violations(tableau)
    sound = not shape

    def order_over(wanted: Callable[[Tree], bool]) -> int:
        missed = (r.tree.order for r in found if wanted(r.tree) and abs(r.value) > tolerance)
        return min(missed, default=HIGHEST_ORDER + 1) - 1

    return Audit(
        name=tableau.name,
        kind=tableau.kind,
        precision=tableau.precision,
        tolerance=float(tolerance),
        declared_order=tableau.order,
        linear_order=order_over(lambda tree: tree.tall),
        nonlinear_order=order_over(lambda tree: True),
        coupling_order=order_over(lambda tree: tree.family == "coupling"),
        explicit_order=order_over(lambda tree: tree.family == "explicit"),
        implicit_order=order_over(lambda tree: tree.family == "implicit"),
        worst=_worst(found),
        row_sum_difference=float(abs(tableau.c_explicit - tableau.c_implicit).max()),
        imaginary_axis_limit=tableau.imaginary_axis_limit if sound else nan,
        real_axis_limit=tableau.real_axis_limit if sound else nan,
        value_at_infinity=tableau.value_at_infinity if sound else nan,
        a_stable=sound and tableau.a_stable,
        negative_diagonals=tableau.negative_diagonals,
        violations=(
            *shape,
            *_order_violations(tableau, found, tolerance),
            *_abscissa_violations(tableau),
            *(_claim_violations(tableau) if sound else ()),
        ),
    )


def _worst(found: Sequence[Residual]) -> tuple[WorstCondition, ...]:
    worst: dict[int, Residual] = {}
    for residual in found:
        order = residual.tree.order
        if order not in worst or abs(residual.value) > abs(worst[order].value):
            worst[order] = residual
    return tuple(
        WorstCondition(order, r.tree.condition(), float(r.value)) for order, r in worst.items()
    )


def _shape_violations(tableau: Tableau) -> tuple[str, ...]:
    def above(table: Sequence[Sequence[Number]], diagonal: int) -> Iterable[tuple[int, int]]:
        size = len(table)
        return ((i, j) for i in range(size) for j in range(i + diagonal, size) if table[i][j])

    text = tableau.coefficient_text
    lines = [
        f"a_explicit row {i + 1} entry {j + 1} is {text.a_explicit[i][j]}; an explicit stage uses "
        "earlier stages only, it must be 0"
        for i, j in above(tableau.exact.a_explicit, 0)
    ]
    lines += [
        f"a_implicit row {i + 1} entry {j + 1} is {text.a_implicit[i][j]}; a stage uses itself and "
        "earlier stages only, it must be 0"
        for i, j in above(tableau.exact.a_implicit, 1)
    ]
    return tuple(lines)


def _order_violations(
    tableau: Tableau, found: Sequence[Residual], tolerance: Decimal
) -> tuple[str, ...]:
    """The worst condition of the lowest failing order, for each family of conditions."""
    linear_order = tableau.declared.get("linear_order", 0)
    claims = {
        "explicit": max(tableau.order, tableau.explicit_order),
        "implicit": max(tableau.order, tableau.implicit_order),
        "coupling": tableau.order,
    }
    if tableau.kind == "explicit":
        claims = {"explicit": tableau.order}
    lines = []
    for family, claim in claims.items():
        missed = [
            r
            for r in found
            if r.tree.family == family
            and (r.tree.order <= claim or (r.tree.tall and r.tree.order <= linear_order))
            and abs(r.value) > tolerance
        ]
        if missed:
            lowest = [r for r in missed if r.tree.order == missed[0].tree.order]
            worst = max(lowest, key=lambda r: abs(r.value))
            others = f" ({len(missed) - 1} more {family} conditions fail)" if missed[1:] else ""
            lines.append(
                f"{family} condition {worst.tree.condition()} of order {worst.tree.order} is "
                f"missed by {float(worst.value):.3g}, allowed is {float(tolerance):.0e} "
                f'at precision "{tableau.precision}"{others}'
            )
    return tuple(lines)


def _abscissa_violations(tableau: Tableau) -> tuple[str, ...]:
    tables = {
        "c": tableau.exact.a_explicit,
        "c_explicit": tableau.exact.a_explicit,
        "c_implicit": tableau.exact.a_implicit,
    }
    lines = []
    for key, table in tables.items():
        for i, stated in enumerate(tableau.declared.get(key, ())):
            miss = exact_sum(table[i]) - Fraction(evaluate(str(stated)))
            if abs(miss) > _ABSCISSA_TOLERANCE:
                lines.append(
                    f"{key} entry {i + 1} is {stated}, the row sum differs by {float(miss):.3g}, "
                    f"allowed is {float(_ABSCISSA_TOLERANCE):.0e}"
                )
    return tuple(lines)


def _claim_violations(tableau: Tableau) -> tuple[str, ...]:
    claims = tableau.declared
    lines = []
    for key, attribute in (*_COUNTED, *((flag, flag) for flag in _FLAGS)):
        measured = getattr(tableau, attribute)
        if key in claims and claims[key] != measured:
            lines.append(f"{key} is stated as {claims[key]}, the coefficients give {measured}")
    single = len(tableau.distinct_diagonals) == 1
    if claims.get("singly_diagonal", single) != single:
        lines.append(f"singly_diagonal is stated as {not single}, the coefficients give {single}")
    for key in _LIMITS:
        if key in claims:
            text = str(claims[key])
            stated = inf if text == "inf" else float(evaluate(text))
            measured = getattr(tableau, key)
            if isinf(stated) != isinf(measured) or not isclose(
                stated, measured, rel_tol=1e-9, abs_tol=1e-9
            ):
                lines.append(f"{key} is stated as {text}, the coefficients give {measured:.12g}")
    return tuple(lines)
