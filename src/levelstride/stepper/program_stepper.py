"""Steps of a program: time-split and multistep schemes on the same kernels as the tableaux."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError, InputError
from levelstride.operator.bands import Banded, total
from levelstride.schemes.program import PARTS, Program, run
from levelstride.schemes.scheme import ProgramScheme
from levelstride.splitting.parts import Parts
from levelstride.stepper import kernels
from levelstride.stepper.banded_solve import BandedFactors, identity_minus
from levelstride.stepper.helmholtz import Couplings, Helmholtz, obstacles
from levelstride.stepper.imex import Counts, lanes_at_once
from levelstride.stepper.prepared import rows_of

Array = NDArray[Any]

GRADIENTS_OF_U: Final = frozenset({"horizontal-pressure-gradient", "slope-pressure-gradient"})
DIVERGENCES_OF_U: Final = frozenset({"horizontal-divergence", "slope-divergence"})
WIND: Final = GRADIENTS_OF_U | {"vertical-pressure-gradient"}
PRESSURE: Final = DIVERGENCES_OF_U | {"vertical-divergence"}
"""Explicit terms that a time-split scheme steps in its substeps."""


@dataclass(frozen=True, slots=True, eq=False)
class Roles:
    """An operator sorted into the parts that a program names.

    Attributes
    ----------
    slow, wind, pressure, fast : Banded
        ``wind`` and ``pressure`` are zero but for schemes with substeps.
    implicit_terms : frozenset of str
        Names of the terms of ``fast`` that are not zero.
    """

    slow: Banded
    wind: Banded
    pressure: Banded
    fast: Banded
    implicit_terms: frozenset[str]


def roles(parts: Parts, scheme: ProgramScheme) -> Roles:
    """Sort an operator into the parts that a program names.

    Parameters
    ----------
    parts : Parts
    scheme : ProgramScheme

    Notes
    -----
    With substeps, explicit pressure gradients and divergences have parts of their own. Divergences
    of u that are implicit are among them while no pressure gradient of u is implicit: the wind that
    they see is known when they are solved for, so that they are taken with the new wind as such.
    """
    none = Banded.zeros(parts.layout.size)
    if not (scheme.substeps and (parts.slow_terms or parts.fast_terms)):
        return Roles(parts.slow, none, none, parts.fast, parts.implicit_terms)
    moved = frozenset() if GRADIENTS_OF_U & parts.implicit_terms else DIVERGENCES_OF_U
    slow, fast = parts.slow_terms, parts.fast_terms
    stepped = {name: term for name, term in slow.items() if name in WIND | PRESSURE}
    stepped |= {name: term for name, term in fast.items() if name in moved}

    def gather(terms: Mapping[str, Banded], names: frozenset[str]) -> Banded:
        return total(none.size, (terms[name] for name in terms if name in names))

    return Roles(
        gather(slow, frozenset(slow.keys() - stepped.keys())),
        gather(stepped, WIND),
        gather(stepped, PRESSURE),
        gather(fast, frozenset(fast.keys() - moved)),
        parts.implicit_terms - moved,
    )


class PreparedProgram:
    """An operator sorted for a program: shared by all steps of a scan."""

    def __init__(self, parts: Parts, scheme: ProgramScheme) -> None:
        self.layout, self.scheme = parts.layout, scheme
        self.dtype = np.dtype(np.float64 if parts.is_real else np.complex128)
        found = roles(parts, scheme)
        self.parts = {role: self._typed(getattr(found, role)) for role in PARTS}
        self.rows = {role: rows_of(one) for role, one in self.parts.items() if not one.is_zero}
        self.after = self._typed(parts.after)
        self.after_implicit = self._typed(parts.after_implicit)
        self.obstacles = obstacles(found.implicit_terms)
        self.couplings: Couplings | None = None
        if "fast" in self.rows and not self.obstacles:
            self.couplings = Couplings.of(self.parts["fast"], self.layout, self.dtype)

    def _typed(self, matrix: Banded) -> Banded:
        if self.dtype.kind == "f":
            return matrix.real()
        return Banded(matrix.offsets, matrix.diagonals.astype(self.dtype))


@lru_cache(maxsize=64)
def prepare_program(parts: Parts, scheme: ProgramScheme) -> PreparedProgram:
    """Keep what is known of the latest operators."""
    return PreparedProgram(parts, scheme)


class ProgramStepper:
    """Takes steps of one length with a scheme that is a program.

    Parameters
    ----------
    parts : Parts
        Operator sorted by treatment.
    scheme : ProgramScheme
    dt : float
        Length of the step [s].

    Attributes
    ----------
    levels : int
        Time levels of a state: rows 0 to nstate - 1 are the newest, those below the one before.
    path : {"explicit", "tridiagonal", "banded"}
    counts : Counts
    dtype : numpy.dtype

    Raises
    ------
    CalculationError
        If a system is singular at this step.
    """

    def __init__(self, parts: Parts, scheme: ProgramScheme, dt: float) -> None:
        self._prepare(prepare_program(parts, scheme), dt)

    def at_step(self, dt: float) -> ProgramStepper:
        """Return the same stepper for another step [s]."""
        other = object.__new__(ProgramStepper)
        other._prepare(self._operator, dt)
        return other

    def _prepare(self, operator: PreparedProgram, dt: float) -> None:
        if not (np.isfinite(dt) and dt > 0.0):
            raise InputError(f"step {dt!r} s: a step must be positive and finite")
        self._operator, self.dt = operator, float(dt)
        self.dtype, self.layout, self.scheme = operator.dtype, operator.layout, operator.scheme
        self.levels = self.scheme.levels
        program = self.scheme.program
        has = operator.rows.keys()
        self.counts = Counts(
            program.evaluations("slow") if "slow" in has else 0,
            program.evaluations("fast") if "fast" in has else 0,
            program.solves if "fast" in has else 0,
        )
        starting = {a for one in self.scheme.start for a in one.diagonals}
        self._diagonals = sorted({*program.diagonals, *starting}) if "fast" in has else []
        self._helmholtz: Helmholtz | None = None
        self._lu: list[BandedFactors] = []
        self.path = self._choose_path()
        self._after = self._after_step()

    @property
    def size(self) -> int:
        """Rows of a state: nstate times the number of time levels."""
        return self.layout.size * self.levels

    def _choose_path(self) -> str:
        operator = self._operator
        if not self._diagonals:
            return "explicit"
        steps = np.array(self._diagonals) * self.dt
        if operator.couplings is not None:
            helmholtz = Helmholtz(operator.couplings, self.layout, steps)
            if helmholtz.singular is None:
                self._helmholtz = helmholtz
                return "tridiagonal"
        fast = operator.parts["fast"]
        for a, h in zip(self._diagonals, steps, strict=True):
            factors = BandedFactors.of(identity_minus(fast, h))
            if factors.weakest is not None:
                self._singular(f"the system of implicit weight {a:g}", factors.weakest)
            self._lu.append(factors)
        return "banded"

    def _singular(self, what: str, row: int) -> None:
        layer = int(self.layout.layer_of[row]) + 1
        raise CalculationError(
            f"{self.scheme.name}: {what} is singular at layer {layer} from the ground with a step "
            f"of {self.dt:g} s; take another step"
        )

    def _after_step(self) -> tuple[kernels.Rows | None, BandedFactors | None]:
        operator, rows, factors = self._operator, None, None
        if not operator.after.is_zero:
            rows = rows_of(identity_minus(operator.after, -self.dt))
        if not operator.after_implicit.is_zero:
            factors = BandedFactors.of(identity_minus(operator.after_implicit, self.dt))
            if factors.weakest is not None:
                self._singular(
                    "the system of the terms treated 'after-step-implicit'", factors.weakest
                )
        return rows, factors

    def step(self, q: Array) -> Array:
        """Take one step.

        Parameters
        ----------
        q : ndarray, shape (levels * nstate,) or (levels * nstate, nlane)
            Real or complex.
        """
        return self._on_lanes(q, self.scheme.program)

    def start(self, q: Array) -> Array:
        """Take the first steps from one state, ``levels`` - 1 of them.

        Parameters
        ----------
        q : ndarray, shape (nstate,) or (nstate, nlane)

        Returns
        -------
        ndarray, shape (levels * nstate,) or (levels * nstate, nlane)
        """
        for program in self.scheme.start:
            q = self._on_lanes(q, program)
        return q

    def matrix(self) -> Array:
        """Return the matrix of one step, shape (levels * nstate, levels * nstate)."""
        return self._step_lanes(np.eye(self.size, dtype=self.dtype), self.scheme.program)

    def _on_lanes(self, q: Array, program: Program) -> Array:
        q = np.asarray(q)
        lanes = q[:, None] if q.ndim == 1 else q
        rows = self.layout.size * program.levels
        if lanes.shape[0] != rows or q.ndim > 2:
            raise ValueError(f"state of shape {q.shape}, expected {rows} rows")
        if np.iscomplexobj(lanes) and self.dtype.kind == "f":
            pairs = np.ascontiguousarray(lanes, dtype=np.complex128).view(np.float64)
            stepped = self._step_lanes(pairs, program).view(np.complex128)
        else:
            stepped = self._step_lanes(np.ascontiguousarray(lanes, dtype=self.dtype), program)
        return stepped[:, 0] if q.ndim == 1 else stepped

    def _step_lanes(self, q: Array, program: Program) -> Array:
        nlane = q.shape[1]
        vectors = program.levels + len(program.rows)
        block = lanes_at_once(self.layout.size * q.itemsize * vectors)
        pieces = [
            self._step_block(q[:, first : first + block], program)
            for first in range(0, nlane, block)
        ]
        return np.concatenate(pieces, axis=1) if len(pieces) > 1 else pieces[0]

    def _step_block(self, q: Array, program: Program) -> Array:
        n = self.layout.size
        levels = [np.ascontiguousarray(q[k * n : (k + 1) * n]) for k in range(program.levels)]
        with np.errstate(over="ignore", invalid="ignore"):
            new = list(run(program, levels, self._tendency, self._solve))
            rows, factors = self._after
            if rows is not None:
                new[0] = _multiply(rows, new[0])
            if factors is not None:
                new[0] = factors.solve(new[0])
        return np.concatenate(new)

    def _tendency(self, part: str, y: Array) -> Array | None:
        rows = self._operator.rows.get(part)
        if rows is None:
            return None
        product = _multiply(rows, y)
        product *= self.dt
        return product

    def _solve(self, a: float, rhs: Array) -> Array:
        if not self._diagonals:
            return rhs.copy()
        d = self._diagonals.index(a)
        if self._helmholtz is not None:
            return self._helmholtz.solve(rhs, d)
        return self._lu[d].solve(rhs)


def _multiply(rows: kernels.Rows, x: Array) -> Array:
    y = np.empty_like(x)
    kernels.multiply(rows, x, y, x.shape[1])
    return y
