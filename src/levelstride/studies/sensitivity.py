"""Which layers cost the step."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.column.column import Column
from levelstride.column.variants import with_levels
from levelstride.errors import InputError
from levelstride.results.mending import InterfaceCost, LayerCost, LayerSensitivity, LostFirst
from levelstride.splitting.splitting import resolve
from levelstride.stability.blas import on_one_thread
from levelstride.stability.joint_states import joint_derivatives
from levelstride.stability.lost_rows import RowDerivative, lost_rows
from levelstride.stability.lost_states import LostState, lost_states
from levelstride.stability.sensitivity import Pair, step_derivatives
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict, StableStep
from levelstride.studies.limit import DEFAULT_SPLIT
from levelstride.studies.methods import tableau_of

Array = NDArray[np.float64]
Matrix = NDArray[Any]

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
        return _above(self.by_height)


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
    branches, sides = _near(column, verdict, found, tolerance)
    return LayerSensitivity(
        tableau=method.name,
        split=splitting.name,
        stable_step_s=found.step_s,
        efolding_s=tolerance.efolding_s,
        layers=_layers(column, found.step_s, branches, sides),
        interfaces=_interfaces(column, branches, sides),
        lost_first=tuple(branch.lost for branch in branches),
        method=METHOD,
    )


def _near(
    column: Column, verdict: ColumnVerdict, found: StableStep, tolerance: Tolerance
) -> tuple[list[Branch], list[Matrix]]:
    """What is lost together, and the derivatives of the joint states, shape (nlev, k, k) each."""
    if found.step_s is None:
        return [], []
    pairs = moved_pairs(column)
    states = _states_at(column, verdict, found, tolerance, TOGETHER)
    of_states = _of_states(states, column, pairs, tolerance)
    of_rows = _of_rows(column, verdict, found, tolerance, TOGETHER, pairs)
    sides = [branch.by_height[:, None, None] for branch in of_rows]
    for problem in dict.fromkeys(state.problem for state in states):
        here = [i for i, state in enumerate(states) if state.problem is problem]
        if len(here) == 1:
            sides.append(of_states[here[0]].by_height[:, None, None])
        else:
            sides.append(joint_derivatives([states[i] for i in here], column, pairs, tolerance))
    return sorted([*of_states, *of_rows], key=lambda branch: branch.lost.step_s), sides


def _range(sides: Sequence[Matrix]) -> tuple[Array, Array]:
    """Smallest and largest derivative of what is lost together, shape (nquantity,) each."""
    every = np.concatenate([np.linalg.eigvals(one).real for one in sides], axis=1)
    return every.min(axis=1), every.max(axis=1)


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
    states = _states_at(column, verdict, found, tolerance, reach)[:most]
    pairs = moved_pairs(column)
    branches = _of_states(states, column, pairs, tolerance)
    branches += _of_rows(column, verdict, found, tolerance, reach, pairs)
    return sorted(branches, key=lambda branch: branch.lost.step_s)[:most]


def _states_at(
    column: Column,
    verdict: ColumnVerdict,
    found: StableStep,
    tolerance: Tolerance,
    reach: float,
) -> list[LostState]:
    assert found.step_s is not None
    problems, binding = verdict.search.problems(), None
    if found.bracket is not None and found.bracket.low <= reach * found.step_s:
        bracket = found.bracket
        named = bracket.problem.air.name
        number = next(i for i, air in enumerate(column.airs) if air.name == named)
        binding = replace(bracket, problem=verdict.problem(number, bracket.problem.kappa))
        problems = list(dict.fromkeys([*problems, binding.problem]))
    return lost_states(problems, tolerance, found.step_s, reach, binding)


def _of_states(
    states: Sequence[LostState], column: Column, pairs: Sequence[Pair], tolerance: Tolerance
) -> list[Branch]:
    derivatives = step_derivatives(states, column, pairs, tolerance)
    return [
        Branch(
            LostFirst(
                criterion=state.criterion,
                air=state.problem.air.name,
                wavenumber_per_m=state.problem.kappa,
                step_s=state.step_s,
            ),
            by_height,
        )
        for state, by_height in zip(states, derivatives, strict=True)
    ]


def _of_rows(
    column: Column,
    verdict: ColumnVerdict,
    found: StableStep,
    tolerance: Tolerance,
    reach: float,
    pairs: Sequence[Pair],
) -> list[Branch]:
    assert found.step_s is not None
    if found.courant is None or found.courant.step_s > reach * found.step_s:
        return []
    splitting, tableau, rate = verdict.splitting, verdict.tableau, tolerance.rate
    branches = []
    for row in lost_rows(column, splitting, tableau, rate, found.step_s, reach):
        moves = RowDerivative(row, column, splitting, tableau, rate)
        lost = LostFirst(
            criterion="courant",
            air=column.airs[row.number].name,
            wavenumber_per_m=row.kappa,
            step_s=row.step_s,
            layer=row.layer,
        )
        slopes = [moves.between(pair.more, pair.less) / pair.width for pair in pairs]
        branches.append(Branch(lost, np.array(slopes)))
    return branches


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
    column: Column, step: float | None, branches: Sequence[Branch], sides: Sequence[Matrix]
) -> tuple[LayerCost, ...]:
    levels = column.levels
    heights, thickness = levels.interfaces_m, levels.thickness_m
    slopes = lowest = highest = kept = np.full(levels.nlev, np.nan)
    if step is not None and branches:
        slopes = branches[0].by_thickness
        lowest, highest = _range([_above(one) for one in sides])
        by_log = slopes * thickness
        # the other layers give way in proportion to their thickness
        kept = slopes - (by_log.sum() - by_log) / (thickness.sum() - thickness)
    ratios = [*(thickness[1:] / thickness[:-1]).tolist(), None]
    return tuple(
        LayerCost(
            layer=j,
            bottom_m=float(heights[j]),
            top_m=float(heights[j + 1]),
            thickness_m=float(thickness[j]),
            ratio_to_next=ratios[j],
            step_per_m=_known(slopes[j]),
            log_sensitivity=_known(slopes[j] * thickness[j] / (step or 1.0)),
            step_per_m_thicker=_known(min(lowest[j], slopes[j])),
            step_per_m_thinner=_known(max(highest[j], slopes[j])),
            step_per_m_lid_kept=_known(kept[j]),
        )
        for j in range(levels.nlev)
    )


def _interfaces(
    column: Column, branches: Sequence[Branch], sides: Sequence[Matrix]
) -> tuple[InterfaceCost, ...]:
    heights, thickness = column.levels.interfaces_m, column.levels.thickness_m
    slopes = lowest = highest = np.full(thickness.size, np.nan)
    if branches:
        slopes = branches[0].by_height
        lowest, highest = _range(sides)
    return tuple(
        InterfaceCost(
            interface=f,
            height_m=float(heights[f]),
            ratio=float(thickness[f] / thickness[f - 1]),
            step_per_m=_known(slopes[f - 1]),
            step_per_m_raised=_known(min(lowest[f - 1], slopes[f - 1])),
            step_per_m_lowered=_known(max(highest[f - 1], slopes[f - 1])),
        )
        for f in range(1, thickness.size)
    )


def _above(by_height: Matrix) -> Matrix:
    """From interfaces moved alone to layers made thicker with all above moved, shape kept."""
    summed: Matrix = np.cumsum(by_height[::-1], axis=0)[::-1]
    return summed


def _known(value: float) -> float | None:
    return float(value) + 0.0 if np.isfinite(value) else None
