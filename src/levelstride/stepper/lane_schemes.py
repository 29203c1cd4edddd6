"""Long runs of many waves by programs: time-split and multistep schemes in the lanes of a row."""

from __future__ import annotations

from collections.abc import Sequence

from levelstride.operator.bands import Banded
from levelstride.schemes.program import PARTS, Row
from levelstride.schemes.scheme import ProgramScheme, TimeScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper.lane_entries import Factors
from levelstride.stepper.lane_program import Group, Read, Rows, constant
from levelstride.stepper.lanes import LaneOperators, LaneStep, LaneStepper, Matrix
from levelstride.stepper.program_stepper import roles

Vector = tuple[str, int]
"""``("vector", i)`` of a program, ``("right", i)`` its right-hand side, or a part's tendency."""


class ProgramOperators(LaneOperators):
    """The operators of all lanes, sorted into the parts that a program names."""

    def __init__(self, lanes: Sequence[Parts], scheme: ProgramScheme) -> None:
        found = [roles(parts, scheme) for parts in lanes]
        self._begin(lanes, "double")
        self.program_scheme = scheme
        self.factors = Factors()

        def rows(matrices: Sequence[Banded]) -> Matrix:
            return self._rows(self._stencil(matrices))

        self.fast = self._stencil([one.fast for one in found])
        self.after_implicit = self._stencil([parts.after_implicit for parts in lanes])
        self.rows_of = {part: rows([getattr(one, part) for one in found]) for part in PARTS}
        self.after_rows = rows([parts.after for parts in lanes])

    @property
    def scheme_levels(self) -> int:
        """Time levels of a state; they are the first slots."""
        return self.program_scheme.levels


class ProgramStep(LaneStep):
    """The rows that make up one step of a program.

    Slots are given again once nothing reads what they hold. A fast tendency of a vector that was
    solved for is (y - right-hand side)/(a dt), so that its right-hand side has a slot of its own.
    """

    def __init__(self, operators: ProgramOperators, dt: float) -> None:
        self._o, self._dt, self._stride = operators, dt, operators.order.stride
        self._rows_of = operators.rows_of
        self.factors = Factors(list(operators.factors.known))
        self.groups: list[Group] = []
        program = operators.program_scheme.program
        self._program, self._levels = program, program.levels
        self._taken: dict[Vector, int] = {("vector", k): k for k in range(self._levels)}
        self._free: list[int] = []
        self.nslot = self._levels
        name = f"{operators.program_scheme.name}: the system of implicit weight"
        self._by_weight = {
            a: self._factored(operators.fast, a * dt, f"{name} {a:g}")
            for a in program.diagonals
            if operators.fast
        }
        self._uses = self._last_uses()
        for i, row in enumerate(program.rows):
            self._row(i, row)
        self._shift()
        self._after_newest()

    def _last_uses(self) -> dict[Vector, int]:
        """Number of the last row that reads what may be read again; beyond all for results."""
        last: dict[Vector, int] = {}
        levels, rows = self._levels, self._program.rows
        for i, row in enumerate(rows):
            for v, _ in row.of:
                last["vector", v] = i
            for part, v, _ in row.tendencies:
                if part == "fast" and self._is_solved(v):
                    last["vector", v] = last["right", v] = i
                else:
                    last["vector", v] = last[part, v] = i
        for v in self._program.results:
            last["vector", v] = len(rows)
        for k in range(levels):
            last["vector", k] = len(rows) + 1
        return last

    def _is_solved(self, v: int) -> bool:
        inner = v - self._levels
        return inner >= 0 and self._program.rows[inner].solve != 0.0 and bool(self._o.fast)

    def _take(self, vector: Vector) -> int:
        if vector not in self._taken:
            if self._free:
                self._taken[vector] = self._free.pop()
            else:
                self._taken[vector] = self.nslot
                self.nslot += 1
        return self._taken[vector]

    def _release(self, i: int) -> None:
        for vector, last in self._uses.items():
            if last == i and vector in self._taken:
                self._free.append(self._taken.pop(vector))

    def _row(self, i: int, row: Row) -> None:
        number = self._levels + i
        weights: list[dict[int, float]] = [{} for _ in range(self._stride)]

        def add(slot: int, weight: float, kinds: Sequence[int]) -> None:
            for kind in kinds:
                weights[kind][slot] = weights[kind].get(slot, 0.0) + weight

        every = range(self._stride)
        for v, weight in row.of:
            add(self._taken["vector", v], weight, every)
        for part, v, weight in row.tendencies:
            acting = [kind for kind in every if self._rows_of[part][kind]]
            if part == "fast" and self._is_solved(v):
                scaled = weight / self._program.rows[v - self._levels].solve
                add(self._taken["vector", v], scaled, acting)
                add(self._taken["right", v], -scaled, acting)
            elif acting:
                if (part, v) not in self._taken:
                    slot = self._take((part, v))
                    self._tendency(slot, self._taken["vector", v], self._rows_of[part])
                add(self._taken[part, v], self._dt * weight, acting)
        sums = [self._summed(of) for of in weights]
        self._vector(number, row, sums)
        self._release(i)

    @staticmethod
    def _summed(weights: dict[int, float]) -> tuple[Read, ...]:
        reads = tuple(constant(slot, weight) for slot, weight in weights.items() if weight)
        return reads or (constant(0, 0.0),)

    def _vector(self, number: int, row: Row, sums: list[tuple[Read, ...]]) -> None:
        slot = self._take(("vector", number))
        if not (row.solve and self._by_weight):
            self._write(slot, sums)
            return
        if ("right", number) in self._uses:
            right = self._take(("right", number))
            self._write(right, sums)
            sums = [(constant(right, 1.0),)] * self._stride
        self._solve(slot, sums, self._by_weight[row.solve])

    def _tendency(self, slot: int, source: int, matrix: Matrix) -> None:
        for kind, entries in enumerate(matrix):
            if entries:
                reads = tuple(Read(source, entry) for entry in entries)
                self.groups.append(Group((Rows(slot, kind, reads),)))

    def _shift(self) -> None:
        """Put the results where the time levels are, the oldest first."""
        for k in reversed(range(self._levels)):
            source = self._taken["vector", self._program.results[k]]
            if source != k:
                self._write(k, [(constant(source, 1.0),)] * self._stride)

    def _after_newest(self) -> None:
        o, state = self._o, [(constant(0, 1.0),)] * self._stride
        if any(o.after_rows):
            source = self._take(("after", 0))
            self._write(source, state)
            for kind, entries in enumerate(o.after_rows):
                tendency = (Read(source, entry.scaled(self._dt)) for entry in entries)
                rows = Rows(0, kind, (constant(source, 1.0), *tendency))
                self.groups.append(Group((rows,)))
        if o.after_implicit:
            name = "after the step: the system of 'after-step-implicit'"
            self._solve(0, state, self._factored(o.after_implicit, self._dt, name))


class ProgramLanes(LaneStepper):
    """Takes many steps of one length with one program, of many operators at once.

    Parameters
    ----------
    lanes : sequence of Parts
        The operator of every lane, as for ``LaneStepper``.
    scheme : ProgramScheme
    dt : float
        Length of the step [s].
    """

    def __init__(self, lanes: Sequence[Parts], scheme: ProgramScheme, dt: float) -> None:
        self._prepare(ProgramOperators(lanes, scheme), dt)

    def _rows_of_step(self, operators: LaneOperators, dt: float) -> LaneStep:
        assert isinstance(operators, ProgramOperators)
        return ProgramStep(operators, dt)


def lanes_of(lanes: Sequence[Parts], scheme: TimeScheme, dt: float) -> LaneStepper:
    """Make the lane stepper of a scheme.

    Parameters
    ----------
    lanes : sequence of Parts
        The operator of every lane.
    scheme : TimeScheme
    dt : float
        Length of the step [s].

    Raises
    ------
    CalculationError
        If a system is singular at this step, or a pivot is lost.
    """
    if isinstance(scheme, ProgramScheme):
        return ProgramLanes(lanes, scheme, dt)
    return LaneStepper(lanes, scheme, dt)
