"""The stages of a step as sums over stages and slow tendencies, for every field by itself.

The tendency of a solved stage is (Y - rhs)/(a_ii dt), and its right-hand side is a sum of earlier
stages and tendencies. Put into one another, every right-hand side is a sum of the state before the
step, of earlier stages Y and of tendencies that were found by multiplying: no tendency of a solved
stage has to be kept, and where the new state is the last stage but for slow tendencies, all other
stages drop out of it.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.stepper.plan import NONE, Plan, Scheme

Array = NDArray[Any]
Operand = tuple[str, int]
"""``("q", 0)``, ``("stage", i)``, ``("slow", i)`` or ``("fast", i)``."""

Sum = Mapping[Operand, float]

STATE: Final[Operand] = ("q", 0)
VANISHED: Final = 1e-14
"""Weight, relative to those it is the sum of, below which it counts as zero."""


class Sums:
    """Right-hand sides of the stages and the new state, the last one, of one field.

    Parameters
    ----------
    plan : Plan
    scheme : Scheme
    dt : float
        Step [s].
    slow, fast : bool
        Whether the field has tendencies of that kind at all.
    """

    def __init__(self, plan: Plan, scheme: Scheme, dt: float, *, slow: bool, fast: bool) -> None:
        self._explicit = dt * np.vstack([scheme.a_explicit, scheme.b_explicit])
        self._implicit = np.vstack([scheme.a_implicit, scheme.b_implicit])
        self._plan, self._dt, self._slow, self._fast = plan, dt, slow, fast
        self.stages: list[Sum] = []
        self._ends_implicitly = ends_implicitly(plan, scheme)
        for i in range(plan.nstage + (plan.result_stage == NONE)):
            self.stages.append(self._stage(i))

    def _stage(self, i: int) -> Sum:
        plan = self._plan
        terms: dict[Operand, tuple[float, float]] = {}

        def add(operand: Operand, weight: float) -> None:
            if weight:
                total, size = terms.get(operand, (0.0, 0.0))
                terms[operand] = total + weight, max(size, abs(weight))

        if i == plan.nstage and self._ends_implicitly:
            add(("stage", i - 1), 1.0)
            for j in range(i):
                if self._slow and plan.slow_slot[j] != NONE:
                    add(("slow", j), self._explicit[i, j] - self._explicit[i - 1, j])
            return {key: total for key, (total, _) in terms.items()}
        add(STATE, 1.0)
        for j in range(min(i, plan.nstage)):
            if self._slow and plan.slow_slot[j] != NONE:
                add(("slow", j), self._explicit[i, j])
            if not self._fast or plan.fast_slot[j] == NONE:
                continue
            if plan.solver[j] == NONE:
                add(("fast", j), self._dt * self._implicit[i, j])
                continue
            weight = self._implicit[i, j] / self._implicit[j, j]
            add(("stage", j), weight)
            for operand, inner in self.stages[j].items():
                add(operand, -weight * inner)
        return {
            operand: total
            for operand, (total, size) in terms.items()
            if abs(total) > VANISHED * size
        }

    def is_state(self, i: int) -> bool:
        """Whether the right-hand side of a stage is the state before the step."""
        return dict(self.stages[i]) == {STATE: 1.0}


def ends_implicitly(plan: Plan, scheme: Scheme) -> bool:
    """Whether the new state is the last stage but for slow tendencies."""
    same = np.array_equal(scheme.a_implicit[-1], scheme.b_implicit)
    return plan.result_stage == NONE and bool(plan.used[-1]) and same
