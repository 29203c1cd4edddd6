"""One IMEX Runge-Kutta step of a column, for one state or many at once."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final, Literal

import numpy as np
from numpy.typing import NDArray

from levelstride.errors import CalculationError, InputError, InternalError
from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout
from levelstride.splitting.parts import Parts
from levelstride.stepper import kernels
from levelstride.stepper.banded_solve import BandedFactors, identity_minus
from levelstride.stepper.helmholtz import Couplings, Helmholtz
from levelstride.stepper.plan import NONE, Scheme
from levelstride.stepper.prepared import Prepared, prepare, rows_of

Array = NDArray[Any]
Path = Literal["auto", "tridiagonal", "banded"]

BLOCK_BYTES: Final = 2**21
"""Room for the stages of a block of lanes: they should stay in the caches."""

FEWEST_LANES: Final = 32
MOST_LANES: Final = 64
"""Shorter rows spend their time on starting loops, longer ones leave the innermost cache."""


@dataclass(frozen=True, slots=True)
class Counts:
    """What one step costs.

    Attributes
    ----------
    explicit_evaluations : int
        Slow tendencies.
    fast_evaluations : int
        Fast tendencies found by multiplying, at stages that are not solved.
    solves : int
        Stage systems solved.
    """

    explicit_evaluations: int
    fast_evaluations: int
    solves: int


class Stepper:
    """Takes steps of one length with one tableau.

    Parameters
    ----------
    parts : Parts
        Operator sorted by treatment, in stored unknowns.
    tableau : Scheme
        A ``tableaux.Tableau`` or anything with its tables.
    dt : float
        Length of the step [s].
    path : {"auto", "tridiagonal", "banded"}
        How stages are solved. ``auto`` takes the tridiagonal system where the implicit set allows
        it and the elimination is safe, LU factors of the band otherwise.

    Attributes
    ----------
    path : {"explicit", "tridiagonal", "banded"}
    counts : Counts
    dtype : numpy.dtype
        float64 where the operator is real in stored unknowns, complex128 otherwise.

    Raises
    ------
    CalculationError
        If a stage system is singular at this step.
    InputError
        If the tridiagonal path is asked for and the implicit set does not allow it.

    Notes
    -----
    Y_i = q + dt sum_{j<i} A_ex[i,j] S(Y_j) + dt sum_{j<=i} A_im[i,j] F(Y_j), and likewise the new
    state with b_ex and b_im. F(Y_i) is taken as (Y_i - right-hand side)/(a_ii dt) where a_ii is not
    zero: the product loses digits at large dt. Terms treated after the step follow,
    (I - dt D_im)^-1 (I + dt D_ex).
    """

    def __init__(self, parts: Parts, tableau: Scheme, dt: float, *, path: Path = "auto") -> None:
        self._prepare(prepare(parts, tableau), dt, path)

    def at_step(self, dt: float) -> Stepper:
        """Return the same stepper for another step [s], reusing what does not depend on it."""
        other = object.__new__(Stepper)
        other._prepare(self._operator, dt, self._wanted)
        return other

    def _prepare(self, operator: Prepared, dt: float, wanted: Path) -> None:
        if not (np.isfinite(dt) and dt > 0.0):
            raise InputError(f"step {dt!r} s: a step must be positive and finite")
        self._operator, self._wanted, self.dt = operator, wanted, float(dt)
        self.dtype, self.layout, plan = operator.dtype, operator.layout, operator.plan
        self._schedule = plan.schedule(self.dt)
        self._steps = plan.diagonals * self.dt
        self._helmholtz: Helmholtz | None = None
        self._lu: list[BandedFactors] = []
        self.path = self._choose_path()
        self.counts = Counts(plan.explicit_evaluations, plan.fast_evaluations, plan.solves)
        self._after = self._after_step()

    def _choose_path(self) -> str:
        operator, wanted = self._operator, self._wanted
        if operator.plan.solves == 0:
            return "explicit"
        if wanted == "tridiagonal" and operator.couplings is None:
            names = ", ".join(sorted(operator.obstacles))
            raise InputError(
                f"path 'tridiagonal': the implicit terms {names} do not allow it; "
                "use 'auto' or 'banded', or make them explicit"
            )
        if wanted != "banded" and operator.couplings is not None:
            helmholtz = Helmholtz(operator.couplings, self.layout, self._steps)
            if helmholtz.singular is None:
                self._helmholtz = helmholtz
                return "tridiagonal"
            if wanted == "tridiagonal":
                self._singular(helmholtz.singular.diagonal, helmholtz.singular.layer)
        self._lu = [self._factor(d, h) for d, h in enumerate(self._steps)]
        return "banded"

    def _factor(self, d: int, h: float) -> BandedFactors:
        factors = BandedFactors.of(identity_minus(self._operator.fast, h))
        if factors.weakest is not None:
            self._singular(d, int(self.layout.layer_of[factors.weakest]))
        return factors

    def _singular(self, d: int, layer: int) -> None:
        plan = self._operator.plan
        stage = int(np.flatnonzero(plan.solver == d)[0]) + 1
        raise CalculationError(
            f"{plan.name}, stage {stage} (implicit diagonal {plan.diagonals[d]:g}): the stage "
            f"system is singular at layer {layer + 1} from the ground with a step of "
            f"{self.dt:g} s; take another step, or a tableau without that diagonal entry"
        )

    def _after_step(self) -> tuple[kernels.Rows | None, BandedFactors | None]:
        operator, rows, factors = self._operator, None, None
        if not operator.after.is_zero:
            rows = rows_of(identity_minus(operator.after, -self.dt))
        if not operator.after_implicit.is_zero:
            factors = BandedFactors.of(identity_minus(operator.after_implicit, self.dt))
            if factors.weakest is not None:
                layer = int(self.layout.layer_of[factors.weakest]) + 1
                raise CalculationError(
                    f"{operator.plan.name}, after the step: the system of the terms treated "
                    f"'after-step-implicit' is singular at layer {layer} from the ground with a "
                    f"step of {self.dt:g} s; another step or 'after-step' avoids it"
                )
        return rows, factors

    def step(self, q: Array) -> Array:
        """Take one step.

        Parameters
        ----------
        q : ndarray, shape (nstate,) or (nstate, nlane)
            Real or complex.

        Returns
        -------
        ndarray of the same shape
            Real if the operator and the state are.
        """
        q = np.asarray(q)
        lanes = q[:, None] if q.ndim == 1 else q
        if lanes.shape[0] != self.layout.size or q.ndim > 2:
            raise ValueError(f"state of shape {q.shape}, expected {self.layout.size} rows")
        if np.iscomplexobj(lanes) and self.dtype.kind == "f":
            # A real operator steps real and imaginary parts alike: two real lanes for one complex.
            pairs = np.ascontiguousarray(lanes, dtype=np.complex128).view(np.float64)
            stepped = self._step_lanes(pairs).view(np.complex128)
        else:
            stepped = self._step_lanes(np.ascontiguousarray(lanes, dtype=self.dtype))
        return stepped.reshape(q.shape)

    def matrix(self) -> Array:
        """Return the matrix of one step, shape (nstate, nstate), in stored unknowns."""
        return self._step_lanes(np.eye(self.layout.size, dtype=self.dtype))

    def residual_ratio(self, rhs: Array) -> float:
        """Residual of the tridiagonal solves over (n eps norm), the largest of all diagonals.

        Parameters
        ----------
        rhs : ndarray, shape (nstate, nlane)
            Right-hand sides of a stage.

        Raises
        ------
        ValueError
            If this step does not take the tridiagonal path.
        """
        if self._helmholtz is None:
            raise ValueError(f"no tridiagonal system on the path '{self.path}'")
        return self._helmholtz.residual_ratio(np.asarray(rhs, dtype=self.dtype))

    def _step_lanes(self, q: Array) -> Array:
        with np.errstate(over="ignore", invalid="ignore"):
            stepped = self._stages_banded(q) if self.path == "banded" else self._stages_compiled(q)
            rows, factors = self._after
            if rows is not None:
                stepped = _multiply(rows, stepped)
            return stepped if factors is None else factors.solve(stepped)

    def _stages_compiled(self, q: Array) -> Array:
        operator, (nstate, nlane) = self._operator, q.shape
        nslot = operator.plan.nslot
        nblock = min(max(nlane, 1), lanes_at_once(nstate * q.itemsize * (nslot + 2)))
        out, kept = np.empty_like(q), np.zeros((nslot, nstate, nblock), q.dtype)
        work = np.empty((2, nstate, nblock), q.dtype)
        helmholtz = self._helmholtz or _nothing_to_solve(self.dtype)
        status = kernels.advance(
            q, out, kept, work, self._schedule, operator.slow_rows, operator.fast_rows,
            helmholtz.origin, helmholtz.traits, helmholtz.reduction,
        )  # fmt: skip
        if status != kernels.DONE:
            raise InternalError(f"step kernel refused its workspaces, status {status}")
        return out

    def _stages_banded(self, q: Array) -> Array:
        plan, operator = self._operator.plan, self._operator
        kept = np.empty((plan.nslot, *q.shape), q.dtype)
        y = q
        for i in np.flatnonzero(plan.used):
            y = rhs = self._combine(q, kept, int(i))
            keep = plan.fast_slot[i]
            if plan.solver[i] != NONE:
                y = self._lu[plan.solver[i]].solve(rhs)
                if keep != NONE:
                    np.subtract(y, rhs, out=kept[keep])
            elif keep != NONE:
                kept[keep] = _multiply(operator.fast_rows, y)
            if plan.slow_slot[i] != NONE:
                kept[plan.slow_slot[i]] = _multiply(operator.slow_rows, y)
        return self._combine(q, kept, plan.nstage) if plan.result_stage == NONE else y

    def _combine(self, q: Array, kept: Array, stage: int) -> Array:
        out = np.empty_like(q)
        flat_kept = kept.reshape(kept.shape[0], q.size)
        kernels.combine(q.ravel(), flat_kept, self._schedule, stage, out.ravel())
        return out


def _multiply(rows: kernels.Rows, x: Array) -> Array:
    y = np.empty_like(x)
    kernels.multiply(rows, x, y, x.shape[1])
    return y


def lanes_at_once(bytes_per_lane: int) -> int:
    """Lanes to take through a whole step together so that their stages stay in the cache."""
    lanes = BLOCK_BYTES // (8 * bytes_per_lane) * 8
    return int(np.clip(lanes, FEWEST_LANES, MOST_LANES))


@lru_cache(maxsize=2)
def _nothing_to_solve(dtype: Any) -> Helmholtz:
    at = Layout(2, "charney-phillips")
    return Helmholtz(Couplings.of(Banded.zeros(at.size), at, dtype), at, np.ones(1))


class _ForwardEuler:
    name, kind = "forward Euler", "explicit"
    a_explicit = a_implicit = np.zeros((1, 1))
    b_explicit = b_implicit = np.ones(1)


def warm_up(*, real: bool = True) -> None:
    """Compile the step, or load it from the cache, for real or complex arithmetic."""
    at = Layout(2, "charney-phillips")
    value = 1.0 if real else 1j
    tiny, none = Banded((0,), np.full((1, at.size), value)), Banded.zeros(at.size)
    Stepper(Parts(tiny, none, none, none, at, frozenset()), _ForwardEuler(), 1.0).matrix()
