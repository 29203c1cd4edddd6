"""Normal modes of the semi-discrete column for one horizontal wave."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eig

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.bands import Banded, total
from levelstride.operator.energy import FLOOR_N_SQUARED, energy_weights
from levelstride.operator.setting import layout_of
from levelstride.operator.state import Index, Layout
from levelstride.operator.terms import CATALOGUE, assemble
from levelstride.operator.wave import Wave
from levelstride.operator.wave_basis import WaveBasis, wave_basis

Array = NDArray[np.float64]
Matrix = NDArray[Any]

ROUND_OFF = 1.0e-13
"""Entries of the operator smaller than this, relative to its largest, count as zero."""

STILL = 1.0e-10
"""Frequencies smaller than this, relative to the largest, count as zero."""

LARGEST_CONDITION = 10.0
"""A mode whose dual is longer than this is no wave of its own but part of a transient."""


@dataclass(frozen=True, slots=True, eq=False)
class Modes:
    """Normal modes of the sum of all terms.

    Attributes
    ----------
    layout : Layout
    weights : ndarray, shape (nstate,)
        Energy weights; energy coordinates are sqrt(weights) times the stored unknowns.
    frequency, growth : ndarray, shape (nmode,)
        Modes go as exp((growth + i frequency) t) [1/s].
    vectors : ndarray, shape (nstate, nmode)
        Columns of unit energy, in energy coordinates.
    duals : ndarray, shape (nstate, nmode)
        Left eigenvectors with duals^H vectors = 1; the vectors themselves where the operator is
        normal.
    kind : ndarray of str, shape (nmode,)
        The kind of wave, at rest and without damping, that holds most of the mode's energy.
    kind_share : ndarray, shape (nmode,)
        Share of the energy in that kind [1].
    vertical_order : ndarray of int, shape (nmode,)
        1 for the gravest; 0 for Lamb waves and modes that stand still. Where wind or damping mix
        the waves at rest, the median order of those of its kind, weighted by their energy.
    intrinsic_frequency : ndarray, shape (nmode,)
        The frequency without the part that wind and other one-way terms bring: what an observer
        carried by the wind would see [1/s].
    is_normal : bool
    """

    layout: Layout
    weights: Array
    frequency: Array
    growth: Array
    vectors: Matrix
    duals: Matrix
    kind: NDArray[np.str_]
    kind_share: Array
    vertical_order: Index
    intrinsic_frequency: Array
    is_normal: bool

    @property
    def condition(self) -> Array:
        """Length of the duals, shape (nmode,): 1 for orthogonal modes, large for entangled ones."""
        return np.asarray(np.linalg.norm(self.duals, axis=0))

    def select(self, mask: NDArray[np.bool_]) -> Modes:
        """Return the modes where ``mask``, shape (nmode,), is true."""
        return replace(
            self,
            frequency=self.frequency[mask],
            growth=self.growth[mask],
            vectors=self.vectors[:, mask],
            duals=self.duals[:, mask],
            kind=self.kind[mask],
            kind_share=self.kind_share[mask],
            vertical_order=self.vertical_order[mask],
            intrinsic_frequency=self.intrinsic_frequency[mask],
        )


def normal_modes(column: Column, air: Background, wave: Wave) -> Modes:
    """Find the normal modes of a column for one horizontal wave.

    Where the operator is skew in the energy but for a multiple of the identity, the modes are
    orthogonal and come from a singular value decomposition; elsewhere from general eigenvectors.

    Parameters
    ----------
    column : Column
    air : Background
    wave : Wave

    Returns
    -------
    Modes
        All nstate modes.
    """
    weights = mode_weights(column, air)
    scale = np.sqrt(weights)
    terms = {name: term.similar(scale) for name, term in assemble(column, air, wave).items()}
    return modes_of(terms, layout_of(column), weights)


def mode_weights(column: Column, air: Background) -> Array:
    """Energy weights in which the partner pairs are skew wherever the air is stable.

    Returns
    -------
    ndarray, shape (nstate,)
        Those of ``energy_weights``, with the floor on N^2 lowered to the smallest N^2 of the
        column where that is positive.
    """
    layout = layout_of(column)
    n_squared = air.n_squared_c if layout.theta_in_layers else air.n_squared_f
    smallest = float(n_squared.min())
    floor = min(FLOOR_N_SQUARED, smallest) if smallest > 0 else FLOOR_N_SQUARED
    return energy_weights(column, air, layout, floor_n_squared=floor)


def modes_of(terms: Mapping[str, Banded], layout: Layout, weights: Array) -> Modes:
    """Find the modes of terms that are in energy coordinates; see ``normal_modes``."""
    basis = wave_basis(terms, layout, weights)
    operator = total(layout.size, terms.values()).to_dense()
    shift = _shift(operator, basis)
    if shift is not None:
        return Modes(
            layout,
            weights,
            frequency=basis.frequency + shift.imag,
            growth=np.full(layout.size, shift.real),
            vectors=basis.vectors,
            duals=basis.vectors,
            kind=basis.kind,
            kind_share=np.ones(layout.size),
            vertical_order=basis.vertical_order,
            intrinsic_frequency=basis.frequency,
            is_normal=True,
        )
    value, left, right = cast("tuple[Matrix, Matrix, Matrix]", eig(operator, left=True, right=True))
    product = np.sum(left.conj() * right, axis=0)
    product[np.abs(product) < ROUND_OFF] = ROUND_OFF  # a defective pair has no dual
    kind, share, order = _recognise(basis, right)
    one_way = total(layout.size, (terms[n] for n, t in CATALOGUE.items() if t.partner is None))
    carried = np.sum(right.conj() * one_way.apply(right), axis=0).imag
    return Modes(
        layout,
        weights,
        frequency=value.imag,
        growth=value.real,
        vectors=right,
        duals=left / product.conj(),
        kind=kind,
        kind_share=share,
        vertical_order=order,
        intrinsic_frequency=value.imag - carried,
        is_normal=False,
    )


def _shift(operator: Matrix, basis: WaveBasis) -> complex | None:
    """The number c where the operator is that of the basis plus c times the identity, or None."""
    rest = operator - basis.operator
    shift = complex(np.mean(np.diag(rest)))
    rest = rest - shift * np.eye(rest.shape[0])
    return shift if np.abs(rest).max() <= ROUND_OFF * np.abs(operator).max() else None


def _recognise(basis: WaveBasis, vectors: Matrix) -> tuple[NDArray[np.str_], Array, Index]:
    """Kind, share of the energy in it and vertical order of every vector, seen in the basis."""
    shares = np.abs(basis.vectors.conj().T @ vectors) ** 2
    names = np.unique(basis.kind)
    by_kind = np.array([shares[basis.kind == name].sum(axis=0) for name in names])
    best = by_kind.argmax(axis=0)
    kind = names[best]
    by_order = np.zeros((basis.vertical_order.max(initial=0) + 1, kind.size))
    np.add.at(by_order, basis.vertical_order, shares * (basis.kind[:, None] == kind))
    below = np.cumsum(by_order, axis=0)
    order = np.argmax(below >= 0.5 * below[-1], axis=0)
    return kind, by_kind.max(axis=0) / by_kind.sum(axis=0), order


def resolved_gravity(modes: Modes) -> NDArray[np.bool_]:
    """Gravity waves that a model may be asked to carry well: vertical order at most nlev/4.

    Left out are modes that only resemble such waves: critical layers and decaying structures that
    wind, updraft or damping entangle with others.

    Returns
    -------
    ndarray of bool, shape (nmode,)
    """
    fastest = np.abs(modes.intrinsic_frequency).max(initial=0.0)
    return np.asarray(
        (modes.kind == "gravity")
        & (modes.kind_share >= 0.5)
        & (modes.condition <= LARGEST_CONDITION)
        & (4 * modes.vertical_order <= modes.layout.nlev)
        & (np.abs(modes.intrinsic_frequency) > STILL * fastest)
    )
