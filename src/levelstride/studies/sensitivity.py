"""Which layers cost the step."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.column.variants import with_levels
from levelstride.errors import InputError
from levelstride.results.mending import InterfaceCost, LayerCost, LayerSensitivity, LostFirst
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.lost_rows import RowDerivative, lost_rows
from levelstride.stability.lost_states import lost_states
from levelstride.stability.sensitivity import Pair, step_derivatives
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.studies.limit import DEFAULT_SPLIT
from levelstride.studies.methods import tableau_of

Array = NDArray[np.float64]

TOGETHER = 1.005
"""States whose limits are within this factor of the smallest count as critical together."""

MOVE_SHARE = 1e-4
"""How far an interface is moved both ways, as a share of the thinner of its layers."""

METHOD = (
    "first-order perturbation of the critical eigenvalue (of the largest power norm for the "
    "transient criterion, of the symbol of the frozen row for the courant criterion) at its limit; "
    f"the step of columns with one interface moved by {MOVE_SHARE:g} of the thinner layer both ways"
)


@dataclass(frozen=True, eq=False)
class Branch:
    """One state that is lost near the limit, and how its limit moves with the interfaces.

    Attributes
    ----------
    lost : LostFirst
    by_height : ndarray, shape (nlev,)
        Derivative of its limit with respect to the heights of the interfaces 1 to nlev, each moved
        alone [s/m].
    """

    lost: LostFirst
    by_height: Array

    @property
    def by_thickness(self) -> Array:
        """Derivative with respect to the thickness of each layer, shape (nlev,) [s/m].

        All above the layer moves with it.
        """
        return np.cumsum(self.by_height[::-1])[::-1]


@on_one_thread
def layer_sensitivity(
    column: Column,
    *,
    tableau: str,
    split: str | Mapping[str, str] | None = None,
    efolding_s: float | None = None,
    found: StableStep | None = None,
) -> LayerSensitivity:
    """Find the derivative of the stable step with respect to the thickness of each layer.

    Parameters
    ----------
    column : Column
    tableau : str
        Published name, alias or bare form.
    split : str or mapping, optional
        As for ``limit``.
    efolding_s : float, optional
        Tolerated e-folding time [s]; by default the column's own.
    found : StableStep, optional
        The stable step of this column under this tableau, splitting and tolerance, if it is known.

    Returns
    -------
    LayerSensitivity

    Raises
    ------
    InputError
        If a name is unknown.
    CalculationError
        If no step is stable, however short, or the critical state has no derivative.

    Examples
    --------
    >>> import levelstride
    >>> column = levelstride.build({
    ...     "levels": {"kind": "table", "heights_m": [0.0, 500.0, 600.0, 1100.0, 1600.0]},
    ...     "air": {"kind": "isothermal", "temperature_k": 250.0},
    ...     "horizontal": {"grid_spacing_m": 2000.0},
    ... })
    >>> found = layer_sensitivity(column, tableau="ARS(2,3,2)", split="all-explicit")
    >>> max(found.layers, key=lambda layer: layer.step_per_m).layer
    1
    """
    splitting = resolve(split if split is not None else column.split or DEFAULT_SPLIT)
    method = tableau_of(column, tableau)
    tolerance = Tolerance(efolding_s or column.advice.efolding_s, column.advice.transient_limit)
    verdict = ColumnVerdict(column, splitting, method)
    if found is None:
        found = verdict.stable_step(tolerance)
    branches = branches_at(column, verdict, found, tolerance, TOGETHER)
    return LayerSensitivity(
        tableau=method.name,
        split=splitting.name,
        stable_step_s=found.step_s,
        efolding_s=tolerance.efolding_s,
        layers=_layers(column, found.step_s, branches),
        interfaces=_interfaces(column, branches),
        lost_first=tuple(branch.lost for branch in branches),
        method=METHOD,
    )


def branches_at(
    column: Column,
    verdict: ColumnVerdict,
    found: StableStep,
    tolerance: Tolerance,
    reach: float,
    most: int | None = None,
) -> list[Branch]:
    """Find what is lost at the limit or a little beyond it, with derivatives.

    Parameters
    ----------
    column : Column
    verdict : ColumnVerdict
        Of that column.
    found : StableStep
        Its stable step.
    tolerance : Tolerance
    reach : float
        How far beyond the limit, as a factor above one.
    most : int, optional
        How many, at most.

    Returns
    -------
    list of Branch
        By ascending limit; empty if nothing bites.
    """
    if found.step_s is None:
        return []
    problems, binding = verdict.search.problems(), None
    if found.bracket is not None and found.bracket.low <= reach * found.step_s:
        bracket = found.bracket
        number = next(i for i, air in enumerate(column.airs) if air is bracket.problem.air)
        binding = replace(bracket, problem=verdict.problem(number, bracket.problem.kappa))
        problems = list(dict.fromkeys([*problems, binding.problem]))
    states = lost_states(problems, tolerance, found.step_s, reach, binding)[:most]
    rows = lost_rows(
        column, verdict.splitting, verdict.tableau, tolerance.rate, found.step_s, reach
    )[:most]
    pairs = moved_pairs(column)
    branches = [
        Branch(
            LostFirst(
                criterion=state.criterion,
                air=state.problem.air.name,
                wavenumber_per_m=state.problem.kappa,
                step_s=state.step_s,
            ),
            step_derivatives(state, column, pairs, tolerance),
        )
        for state in states
    ]
    for row in rows:
        moves = RowDerivative(row, column, verdict.splitting, verdict.tableau, tolerance.rate)
        lost = LostFirst(
            criterion="courant",
            air=column.airs[row.number].name,
            wavenumber_per_m=row.kappa,
            step_s=row.step_s,
            layer=row.layer,
        )
        slopes = [moves.between(pair.more, pair.less) / pair.width for pair in pairs]
        branches.append(Branch(lost, np.array(slopes)))
    return sorted(branches, key=lambda branch: branch.lost.step_s)[:most]


def moved_pairs(column: Column) -> list[Pair]:
    """Columns with one interface moved a little both ways, for the interfaces 1 to nlev."""
    heights, thickness = column.levels.interfaces_m, column.levels.thickness_m
    pairs = []
    for f in range(1, heights.size):
        width = MOVE_SHARE * float(thickness[f - 1 : f + 1].min())
        more, less = heights.copy(), heights.copy()
        more[f] += width
        less[f] -= width
        try:
            above = with_levels(column, more)
        except InputError:  # the air ends at the lid
            above, more = column, heights
        below = with_levels(column, less)
        pairs.append(Pair(above, below, float(more[f] - less[f])))
    return pairs


def _layers(
    column: Column, step: float | None, branches: Sequence[Branch]
) -> tuple[LayerCost, ...]:
    levels = column.levels
    heights, thickness = levels.interfaces_m, levels.thickness_m
    slopes = np.array([branch.by_thickness for branch in branches])
    costs = []
    for j in range(levels.nlev):
        known = step is not None and slopes.size > 0
        kept = None
        if known:
            others = np.delete(slopes[0] * thickness, j).sum() / np.delete(thickness, j).sum()
            kept = float(slopes[0, j] - others)
        costs.append(
            LayerCost(
                layer=j,
                bottom_m=float(heights[j]),
                top_m=float(heights[j + 1]),
                thickness_m=float(thickness[j]),
                ratio_to_next=(
                    float(thickness[j + 1] / thickness[j]) if j + 1 < levels.nlev else None
                ),
                step_per_m=float(slopes[0, j]) if known else None,
                log_sensitivity=float(slopes[0, j] * thickness[j] / step) if known else None,
                step_per_m_thicker=float(slopes[:, j].min()) if known else None,
                step_per_m_thinner=float(slopes[:, j].max()) if known else None,
                step_per_m_lid_kept=kept,
            )
        )
    return tuple(costs)


def _interfaces(column: Column, branches: Sequence[Branch]) -> tuple[InterfaceCost, ...]:
    heights, thickness = column.levels.interfaces_m, column.levels.thickness_m
    slopes = np.array([branch.by_height for branch in branches])
    return tuple(
        InterfaceCost(
            interface=f,
            height_m=float(heights[f]),
            ratio=float(thickness[f] / thickness[f - 1]),
            step_per_m=float(slopes[0, f - 1]) if slopes.size else None,
            step_per_m_raised=float(slopes[:, f - 1].min()) if slopes.size else None,
            step_per_m_lowered=float(slopes[:, f - 1].max()) if slopes.size else None,
        )
        for f in range(1, thickness.size)
    )
