"""Pointwise elimination of u, pi' and theta' from the stage equation, down to w.

The stage equation is Y - h F Y = rhs with h = a_ii dt. For the implicit terms named in `POINTWISE`
u, pi' and theta' depend on w of their own layer's interfaces only, so that they can be eliminated
layer by layer. What remains is one tridiagonal system for w per distinct h, the vertical Helmholtz
equation (Ullrich and Jablonowski 2012, Monthly Weather Review 140, 1257-1284,
doi:10.1175/MWR-D-10-05073.1).
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout
from levelstride.stepper.kernels import Origin, Reduction, Traits, factor, solve

Array = NDArray[Any]

POINTWISE: Final = frozenset(
    {
        "vertical-pressure-gradient",
        "vertical-divergence",
        "buoyancy",
        "stratification",
        "upper-damping",
        "horizontal-pressure-gradient",
        "horizontal-divergence",
    }
)

_CANCELLED: Final = 1e-10
"""A sum this small beside its terms counts as zero."""


def obstacles(implicit_terms: frozenset[str]) -> frozenset[str]:
    """Return the implicit terms that keep the stage equation from the tridiagonal form.

    Slope divergence is allowed while no pressure gradient of u is implicit: u is then known.
    """
    extra = implicit_terms - POINTWISE
    if "horizontal-pressure-gradient" in implicit_terms:
        return extra
    gradient = {"slope-pressure-gradient"} & implicit_terms
    return extra if gradient else extra - {"slope-divergence"}


@dataclass(frozen=True, slots=True, eq=False)
class Couplings:
    """Entries of the fast part, by the unknown they act on and the one they come from.

    Layer couplings have shape (nlev,), interface couplings (nlev-1,). ``below`` and ``above`` tell
    the side of the neighbour; at ground and lid, where there is none, the entry is zero. With
    ``charney-phillips`` theta' of the interface above a layer is stored with that layer, so that
    only ``theta_w_above`` and ``w_theta_below`` are used.
    """

    pi_u: Array
    pi_u_below: Array
    pi_u_above: Array
    pi_w_below: Array
    pi_w_above: Array
    u_pi: Array
    theta_w_below: Array
    theta_w_above: Array
    w_pi_below: Array
    w_pi_above: Array
    w_theta_below: Array
    w_theta_above: Array
    w_w: Array

    @classmethod
    def of(cls, fast: Banded, at: Layout, dtype: Any) -> Couplings:
        """Read the couplings out of the fast part."""
        upper, lower = slice(1, None), slice(None, -1)

        def layers(rows: Array, columns: Array, keep: slice) -> Array:
            found = np.zeros(at.nlev, dtype=dtype)
            found[keep] = fast.entries(rows, columns)
            return found

        def interfaces(columns: Array) -> Array:
            return fast.entries(at.w, columns).astype(dtype)

        none, every = np.zeros(at.nlev - 1, dtype=dtype), slice(None)
        lorenz = at.theta_in_layers
        theta_above = at.theta[lower] if lorenz else at.theta
        return cls(
            pi_u=layers(at.pi, at.u, every),
            pi_u_below=layers(at.pi[1:], at.u[:-1], upper),
            pi_u_above=layers(at.pi[:-1], at.u[1:], lower),
            pi_w_below=layers(at.pi[1:], at.w, upper),
            pi_w_above=layers(at.pi[:-1], at.w, lower),
            u_pi=layers(at.u, at.pi, every),
            theta_w_below=layers(at.theta[1:], at.w, upper)
            if lorenz
            else np.zeros(at.nlev, dtype=dtype),
            theta_w_above=layers(theta_above, at.w, lower),
            w_pi_below=interfaces(at.pi[:-1]),
            w_pi_above=interfaces(at.pi[1:]),
            w_theta_below=interfaces(theta_above),
            w_theta_above=interfaces(at.theta[1:]) if lorenz else none,
            w_w=interfaces(at.w),
        )

    def traits(self, *, lorenz: bool) -> Traits:
        """Tell the kernel which couplings are there."""
        return Traits(
            wind_in_pressure=int(np.any(self.pi_u)),
            neighbours_in_pressure=int(np.any(self.pi_u_below) or np.any(self.pi_u_above)),
            pressure_in_wind=int(np.any(self.u_pi)),
            buoyancy=int(np.any(self.w_theta_below) or np.any(self.w_theta_above)),
            stratification=int(np.any(self.theta_w_below) or np.any(self.theta_w_above)),
            lorenz=int(lorenz),
        )


@dataclass(frozen=True, slots=True, eq=False)
class Tridiagonal:
    """Row-aligned diagonals of the system for w, each of shape (nlev-1,)."""

    sub: Array
    diagonal: Array
    sup: Array

    def apply(self, w: Array) -> Array:
        """Multiply with w, shape (nlev-1, nlane)."""
        product: Array = self.diagonal[:, None] * w
        product[1:] += self.sub[1:, None] * w[:-1]
        product[:-1] += self.sup[:-1, None] * w[1:]
        return product

    @property
    def norm(self) -> float:
        """Largest row sum of moduli."""
        rows = np.abs(self.diagonal)
        rows[1:] += np.abs(self.sub[1:])
        rows[:-1] += np.abs(self.sup[:-1])
        return float(rows.max())


def origin(at: Layout) -> Origin:
    """Describe the layout to the kernel."""
    return Origin(at.nlev, at.stride, int(at.u[0]), int(at.pi[0]), int(at.w[0]), int(at.theta[0]))


@dataclass(frozen=True, slots=True, eq=False)
class Singular:
    """Where an elimination broke down: index into the steps, and layer counted from the ground."""

    diagonal: int
    layer: int


class Helmholtz:
    """The stage systems of a step, eliminated and factored once.

    Parameters
    ----------
    couplings : Couplings
    at : Layout
    steps : ndarray, shape (ndiagonal,)
        h = a_ii dt for every distinct diagonal coefficient [s].

    Attributes
    ----------
    reduction : Reduction
        What the kernel reads.
    singular : Singular or None
        First breakdown of the elimination; the reduction must not be used if there is one.
    """

    def __init__(self, couplings: Couplings, at: Layout, steps: NDArray[np.float64]) -> None:
        self.at, self.couplings, self.steps = at, couplings, steps
        self.origin = origin(at)
        self.traits = couplings.traits(lorenz=at.theta_in_layers)
        self.singular: Singular | None = None
        self.systems: list[Tridiagonal] = []
        parts = [self._reduce(d, h) for d, h in enumerate(steps)]
        self.reduction = Reduction(
            *(np.array([part[name] for part in parts]) for name in Reduction._fields)
        )

    def _note(self, diagonal: int, layer: int) -> None:
        if self.singular is None:
            self.singular = Singular(diagonal, layer)

    def _reduce(self, d: int, h: float) -> dict[str, Array]:
        hc = {f.name: h * getattr(self.couplings, f.name) for f in fields(self.couplings)}
        product = hc["pi_u"] * hc["u_pi"]
        denominator = 1.0 - product
        lost = np.flatnonzero(np.abs(denominator) <= _CANCELLED * (1.0 + np.abs(product)))
        if lost.size:
            self._note(d, int(lost[0]))
            denominator[lost] = 1.0
        hc["shrink"] = 1.0 / denominator
        hc["pi_w_below"] = hc["shrink"] * hc["pi_w_below"]
        hc["pi_w_above"] = hc["shrink"] * hc["pi_w_above"]
        system, scale = self._system(hc)
        lost = np.flatnonzero(np.abs(system.diagonal) <= _CANCELLED * scale)
        factors = [np.empty_like(system.diagonal) for _ in range(3)]
        status = factor(system.sub, system.diagonal, system.sup, *factors)
        if lost.size or status:
            self._note(d, int(lost[0]) if lost.size else int(status) - 1)
        self.systems.append(system)
        return {**hc, **dict(zip(("lower", "inverse", "upper"), factors, strict=True))}

    @staticmethod
    def _system(hc: dict[str, Array]) -> tuple[Tridiagonal, Array]:
        """Assemble the system for w; the scale is the sum of moduli of what makes its diagonal."""
        lorenz_below, lorenz_above = hc["theta_w_below"], hc["theta_w_above"]
        terms = (
            hc["w_pi_below"] * hc["pi_w_above"][:-1],
            hc["w_pi_above"] * hc["pi_w_below"][1:],
            hc["w_theta_below"] * lorenz_above[:-1],
            hc["w_theta_above"] * lorenz_below[1:],
            hc["w_w"],
        )
        scale = 1.0 + np.sum(np.abs(terms), axis=0)
        sub = -hc["w_pi_below"] * hc["pi_w_below"][:-1] - hc["w_theta_below"] * lorenz_below[:-1]
        sup = -hc["w_pi_above"] * hc["pi_w_above"][1:] - hc["w_theta_above"] * lorenz_above[1:]
        return Tridiagonal(sub, 1.0 - np.sum(terms, axis=0), sup), scale

    def condense(self, rhs: Array, d: int) -> Array:
        """Return the right-hand side of w, shape (nlev-1, nlane), by plain array arithmetic."""
        c, at = self.couplings, self.at
        h = self.steps[d]
        pi = rhs[at.pi] + h * c.pi_u[:, None] * rhs[at.u]
        pi[1:] += h * c.pi_u_below[1:, None] * rhs[at.u[:-1]]
        pi[:-1] += h * c.pi_u_above[:-1, None] * rhs[at.u[1:]]
        pi *= self.reduction.shrink[d][:, None]
        low = at.theta[:-1] if at.theta_in_layers else at.theta
        w: Array = rhs[at.w] + h * (
            c.w_pi_below[:, None] * pi[:-1] + c.w_pi_above[:, None] * pi[1:]
        )
        w += h * c.w_theta_below[:, None] * rhs[low]
        if at.theta_in_layers:
            w += h * c.w_theta_above[:, None] * rhs[at.theta[1:]]
        return w

    def solve(self, rhs: Array, d: int) -> Array:
        """Return the stage Y of a right-hand side, shape (nstate, nlane)."""
        y = np.array(rhs, dtype=self.reduction.inverse.dtype, order="C")
        solve(y, self.origin, self.traits, self.reduction, d, y.shape[1])
        return y

    def residual_ratio(self, rhs: Array) -> float:
        """Residual of the systems for w over (n eps norm of matrix times norm of w), the largest.

        Parameters
        ----------
        rhs : ndarray, shape (nstate, nlane)
        """
        worst = 0.0
        for d, system in enumerate(self.systems):
            w = self.solve(rhs, d)[self.at.w]
            residual = np.abs(self.condense(rhs, d) - system.apply(w)).max(axis=0)
            unit = w.shape[0] * np.finfo(float).eps * system.norm * np.abs(w).max(axis=0)
            worst = max(worst, float(np.max(residual / unit)))
        return worst
