"""What one simulated hour costs."""

from dataclasses import dataclass

from levelstride.column.column import Advice
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.splitting import Splitting

HOUR_S = 3600.0

_NEEDS_NEIGHBOURS = ("horizontal-divergence", "slope-divergence")


@dataclass(frozen=True, slots=True)
class StepCost:
    """What one step needs.

    Parameters
    ----------
    evaluations, solves, exchanges : int
        Explicit evaluations, implicit solves and exchanges with neighbouring columns in one step.
    weighted : float
        Their weighted sum [1].
    """

    evaluations: int
    solves: int
    exchanges: int
    weighted: float


def step_cost(
    tableau: TimeScheme, splitting: Splitting, weights: Advice, *, reference: bool = False
) -> StepCost:
    """Count what one step needs.

    Every explicit evaluation asks for one exchange with neighbours, every solve for one more where
    the divergence is implicit: pressure then sees the new wind. Every substep of a time-split
    scheme exchanges pressure for the new wind and the new wind for pressure; its explicit gradients
    and divergences count with its solve.

    Parameters
    ----------
    tableau : TimeScheme
        The time scheme.
    splitting : Splitting
        The splitting.
    weights : Advice
        Costs of an evaluation, a solve and an exchange.
    reference : bool
        Whether the implicit terms are built on a reference state: what they miss on the air itself
        is then explicit.

    Returns
    -------
    StepCost
        Counts and weighted sum for one step.
    """
    treatments = splitting.treatment
    solves = tableau.implicit_solves if "implicit" in treatments.values() else 0
    evaluates = reference or "explicit" in treatments.values()
    evaluations = tableau.explicit_evaluations if evaluates else 0
    sees_neighbours = any(treatments[term] == "implicit" for term in _NEEDS_NEIGHBOURS)
    exchanges = evaluations + (solves if sees_neighbours else 0)
    if isinstance(tableau, ProgramScheme) and tableau.substeps:
        substeps = tableau.program.evaluations("pressure")
        exchanges += substeps if sees_neighbours else 2 * substeps
    weighted = (
        evaluations * weights.cost_explicit
        + solves * weights.cost_solve
        + exchanges * weights.cost_exchange
    )
    return StepCost(evaluations, solves, exchanges, weighted)
