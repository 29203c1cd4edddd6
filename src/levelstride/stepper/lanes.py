"""Many long runs side by side: one operator a lane, one step and one tableau for all."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Final, Literal

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError, InputError, InternalError
from levelstride.operator.bands import Banded
from levelstride.splitting.parts import Parts
from levelstride.stepper import lane_kernels
from levelstride.stepper.kernels import DONE
from levelstride.stepper.lane_entries import Entry, Factors, Order, Stencil
from levelstride.stepper.lane_plan import STATE, Operand, Sums, ends_implicitly
from levelstride.stepper.lane_program import (
    ALIGNED,
    Encoder,
    Group,
    Read,
    Rows,
    constant,
    moved,
    sweeps,
)
from levelstride.stepper.plan import NONE, Plan, Scheme

Array = NDArray[Any]
Precision = Literal["double", "single"]
Matrix = list[list[Entry]]
"""Entries of the rows of every field."""

ROW_BYTES: Final = {"double": 128, "single": 64}
"""Sixteen numbers a row: long enough to pay for the loop around it, short enough for the caches."""


class LaneOperators:
    """The operators of all lanes, sorted by what they share: independent of the step."""

    def __init__(self, lanes: Sequence[Parts], scheme: Scheme, precision: Precision) -> None:
        self._begin(lanes, precision)
        self.scheme = scheme
        explicit = scheme.kind == "explicit"
        slow = [parts.slow + parts.fast if explicit else parts.slow for parts in lanes]
        fast = [] if explicit else [parts.fast for parts in lanes]
        self.fast = self._stencil(fast) if fast else {}
        slow_stencil = self._stencil(slow)
        self.after_implicit = self._stencil([parts.after_implicit for parts in lanes])
        self.factors = Factors()
        self.plan = Plan(scheme, has_slow=bool(slow_stencil), has_fast=bool(self.fast))
        self.slow_rows = self._rows(slow_stencil)
        self.fast_rows = self._rows(self.fast)
        self.after_rows = self._rows(self._stencil([parts.after for parts in lanes]))

    def _begin(self, lanes: Sequence[Parts], precision: Precision) -> None:
        if not lanes:
            raise ValueError("no lanes")
        self.layout, self.precision = lanes[0].layout, precision
        if any(parts.layout != self.layout for parts in lanes):
            raise ValueError("lanes with different unknowns cannot be taken together")
        self.nlane, self.order = len(lanes), Order(self.layout)
        self.is_real = all(parts.is_real for parts in lanes)

    @property
    def scheme_levels(self) -> int:
        """Time levels of a state; they are the first slots."""
        return 1

    def _stencil(self, matrices: Sequence[Banded]) -> Stencil:
        if self.is_real:
            return self.order.stencil([matrix.real() for matrix in matrices])
        return self.order.stencil(matrices)

    def _rows(self, stencil: Stencil) -> Matrix:
        return self.factors.rows(stencil, self.order.stride)

    @property
    def dtype(self) -> np.dtype[Any]:
        """Type of the states."""
        single = self.precision == "single"
        if self.is_real:
            return np.dtype(np.float32 if single else np.float64)
        return np.dtype(np.complex64 if single else np.complex128)


class LaneStepper:
    """Takes many steps of one length with one tableau, of many operators at once.

    Parameters
    ----------
    lanes : sequence of Parts
        The operator of every lane, all with the same layout and splitting, in energy coordinates:
        stage systems are eliminated without interchanges.
    tableau : Scheme
    dt : float
        Length of the step [s].
    precision : {"double", "single"}
        Arithmetic of the step; ``single`` serves to look, not to prove.

    Attributes
    ----------
    nlane : int
    dtype : numpy.dtype
        Real where all operators are real in stored unknowns, complex otherwise.
    moved : int
        Bytes of states and tendencies that a step moves at the least for the lanes of one row,
        crossing every array once a sweep.
    working_set : int
        Bytes of all states and tendencies of the lanes of one row.

    Raises
    ------
    CalculationError
        If a stage system is singular at this step, or a pivot is lost.

    Notes
    -----
    The same step as that of `Stepper`, whose notes hold. ``lane_plan`` says how stages are summed,
    ``lane_entries`` how a stage system is eliminated, ``lane_program`` how a step is laid out.
    """

    def __init__(
        self,
        lanes: Sequence[Parts],
        tableau: Scheme,
        dt: float,
        *,
        precision: Precision = "double",
    ) -> None:
        self._prepare(LaneOperators(lanes, tableau, precision), dt)

    @staticmethod
    def serves(parts: Parts, tableau: Scheme) -> bool:
        """Whether steps of this operator can be taken.

        Every operator with finite entries can; at which steps elimination without interchanges
        fails is told by the CalculationError of that step.
        """
        every = (parts.slow, parts.fast, parts.after, parts.after_implicit)
        return all(bool(np.all(np.isfinite(part.diagonals))) for part in every)

    def at_step(self, dt: float) -> LaneStepper:
        """Return the same stepper for another step [s], reusing what does not depend on it."""
        other = object.__new__(type(self))
        other._prepare(self._operators, dt)
        return other

    def _rows_of_step(self, operators: LaneOperators, dt: float) -> LaneStep:
        return LaneStep(operators, dt)

    def _prepare(self, operators: LaneOperators, dt: float) -> None:
        if not (np.isfinite(dt) and dt > 0.0):
            raise InputError(f"step {dt!r} s: a step must be positive and finite")
        self._operators, self.dt, self.layout = operators, float(dt), operators.layout
        self.nlane, self.dtype = operators.nlane, operators.dtype
        step = self._rows_of_step(operators, self.dt)
        levels = operators.scheme_levels
        number = np.dtype(np.float32 if operators.precision == "single" else np.float64)
        self._span = (0,) * (ROW_BYTES[operators.precision] // number.itemsize)
        width, parts = len(self._span), 1 if operators.is_real else 2
        at, stride = self.layout, operators.order.stride
        encoder = Encoder(at.nlev, stride, width, parts, number)
        found = sweeps(step.groups, stride)
        self._program = encoder.encode(found, step.nslot, step.factors.known)
        self.moved = moved(found, stride) * at.nlev * len(self._span) * number.itemsize
        self.working_set = encoder.size * number.itemsize
        self._lanes = encoder.lanes(self.nlane)
        self._places = np.concatenate(
            [base + width * operators.order.places for base in encoder.base[:levels]]
        )
        self._size, self._row, self._number = encoder.size, encoder.row, number

    def march(self, q: Array, steps: int) -> None:
        """Take steps, in place.

        Parameters
        ----------
        q : ndarray, shape (nstate, nlane)
            States, contiguous and of the type `dtype`; of several time levels the newest first.
        steps : int
            How many.
        """
        if q.shape != (self._places.size, self.nlane) or q.dtype != self.dtype:
            expected = f"({self._places.size}, {self.nlane}) of {self.dtype}"
            raise ValueError(f"states {q.shape} of {q.dtype}, expected {expected}")
        if not q.flags.c_contiguous or not q.flags.writeable:
            raise ValueError("states must be contiguous and writeable")
        work = _aligned(self._size, self._number)
        status = lane_kernels.march(
            q.view(self._number).reshape(*q.shape, -1), steps, self._places, self._program,
            self._lanes, work, self.layout.nlev, self._row, self._span,
        )  # fmt: skip
        if status != DONE:
            raise InternalError(f"lane kernel refused its workspaces, status {status}")


def _aligned(size: int, number: np.dtype[Any]) -> Array:
    """Return room that begins with a cache line."""
    room = np.empty(size + ALIGNED // number.itemsize, number)
    first = -room.ctypes.data % ALIGNED // number.itemsize
    return room[first : first + size]


class LaneStep:
    """The rows that make up one step."""

    def __init__(self, operators: LaneOperators, dt: float) -> None:
        self._o, self._dt = operators, dt
        self._stride = operators.order.stride
        self.factors = Factors(list(operators.factors.known))
        self.groups: list[Group] = []
        self._slots: dict[Operand, int] = {STATE: 0}
        slow, fast = operators.slow_rows, operators.fast_rows
        self._sums = [
            Sums(operators.plan, operators.scheme, dt, slow=bool(slow[f]), fast=bool(fast[f]))
            for f in range(self._stride)
        ]
        self._solvers = [
            self._factored(operators.fast, a * dt, _stage_name(operators, d))
            for d, a in enumerate(operators.plan.diagonals)
        ]
        self._stages()
        self._after()
        self.nslot = len(set(self._slots.values()))

    def _slot(self, operand: Operand) -> int:
        return self._slots.setdefault(operand, len(set(self._slots.values())))

    def _sum(self, i: int, kind: int) -> tuple[Read, ...]:
        terms = self._sums[kind].stages[i]
        return tuple(constant(self._slot(operand), weight) for operand, weight in terms.items())

    def _stages(self) -> None:
        plan = self._o.plan
        for i in np.flatnonzero(plan.used).tolist():
            solver = plan.solver[i]
            at_start = all(sums.is_state(i) for sums in self._sums)
            last = i == plan.nstage - 1 and ends_implicitly(plan, self._o.scheme)
            if i == plan.result_stage or last or (solver == NONE and at_start):
                self._slots["stage", i] = 0
            slot = self._slot(("stage", i))
            sums = [self._sum(i, kind) for kind in range(self._stride)]
            if solver != NONE:
                self._solve(slot, sums, self._solvers[solver])
            elif slot != 0 or not at_start:
                self._write(slot, sums)
            if plan.slow_slot[i] != NONE:
                self._multiply(("slow", i), slot, self._o.slow_rows)
            if plan.fast_slot[i] != NONE and solver == NONE:
                self._multiply(("fast", i), slot, self._o.fast_rows)
        if plan.result_stage == NONE:
            target = self._slot(("after", 0)) if any(self._o.after_rows) else 0
            self._write(target, [self._sum(plan.nstage, kind) for kind in range(self._stride)])

    def _write(self, slot: int, sums: Sequence[tuple[Read, ...]]) -> None:
        for kind, reads in enumerate(sums):
            if not (len(reads) == 1 and reads[0].slot == slot and reads[0].is_copy):
                self.groups.append(Group((Rows(slot, kind, reads),)))

    def _multiply(self, operand: Operand, source: int, matrix: Matrix) -> None:
        for kind, entries in enumerate(matrix):
            if entries:
                reads = tuple(Read(source, entry) for entry in entries)
                self.groups.append(Group((Rows(self._slot(operand), kind, reads),)))

    def _solve(
        self, slot: int, sums: Sequence[tuple[Read, ...]], factored: tuple[Matrix, Matrix]
    ) -> None:
        """Write a right-hand side, eliminating upwards, and go back downwards."""
        left, right = factored
        up = tuple(
            Rows(slot, kind, (*sums[kind], *(Read(slot, entry) for entry in left[kind])))
            for kind in range(self._stride)
        )
        down = tuple(
            Rows(slot, kind, tuple(Read(slot, entry) for entry in right[kind]))
            for kind in reversed(range(self._stride))
            if right[kind]
        )
        self.groups += [Group(up, 1), Group(down, -1)] if down else [Group(up, 1)]

    def _after(self) -> None:
        o, state = self._o, (constant(0, 1.0),)
        if any(o.after_rows):
            source = self._slot(("after", 0))
            if o.plan.result_stage != NONE:
                self._write(source, [state] * self._stride)
            for kind, entries in enumerate(o.after_rows):
                tendency = (Read(source, entry.scaled(self._dt)) for entry in entries)
                rows = Rows(0, kind, (constant(source, 1.0), *tendency))
                self.groups.append(Group((rows,)))
        if o.after_implicit:
            name = f"{o.plan.name}, after the step: the system of 'after-step-implicit'"
            self._solve(0, [state] * self._stride, self._factored(o.after_implicit, self._dt, name))

    def _factored(self, stencil: Stencil, h: float, name: str) -> tuple[Matrix, Matrix]:
        """Factor I - h A: what elimination adds to a row, and how a row is found going back."""
        order, nlane = self._o.order, self._o.nlane
        band, lower = order.band({key: -h * values for key, values in stencil.items()})
        status = lane_kernels.factor_lanes(
            band, lower, np.empty(nlane), np.empty(nlane, band.dtype)
        )
        if status != DONE:
            layer = (status - 1) // self._stride + 1
            raise CalculationError(
                f"{name} is singular at layer {layer} from the ground with a step of "
                f"{self._dt:g} s, or cannot be eliminated without interchanges; take another step"
            )
        by_field = band.reshape(self._o.layout.nlev, self._stride, -1, nlane)
        left: Matrix = [[] for _ in range(self._stride)]
        right: Matrix = [[] for _ in range(self._stride)]
        for kind in range(self._stride):
            for k in range(by_field.shape[2]):
                values, offset = by_field[:, kind, k], k - lower
                if np.any(values):
                    side = left if offset < 0 else right
                    side[kind] += self.factors.entries(offset, values)
            if len(right[kind]) == 1 and np.all(by_field[:, kind, lower] == 1.0):
                right[kind] = []
        return left, right


def _stage_name(operators: LaneOperators, d: int) -> str:
    """Name the stage system of a diagonal coefficient in a message."""
    plan = operators.plan
    stage = int(np.flatnonzero(plan.solver == d)[0]) + 1
    return f"{plan.name}, stage {stage} (implicit diagonal {plan.diagonals[d]:g}): the stage system"
