"""The waves of a column at rest without damping: an orthonormal basis in the energy, by kind."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded, total
from levelstride.operator.state import Index, Layout

Array = NDArray[np.float64]
Matrix = NDArray[Any]

KINDS = ("sound", "Lamb", "gravity", "computational", "vortical")
"""Kinds of waves; the computational one is the zero mode of the Lorenz staggering."""

FORCES = (
    "vertical-pressure-gradient",
    "buoyancy",
    "horizontal-pressure-gradient",
    "slope-pressure-gradient",
    "rotation",
)
"""The terms by which pi', theta' and v act on u and w; each has its partner, skew in the energy."""


@dataclass(frozen=True, slots=True, eq=False)
class WaveBasis:
    """Normal modes of the sum of all partner pairs.

    Attributes
    ----------
    operator : ndarray, shape (nstate, nstate)
        The sum of the pairs in energy coordinates, skew-Hermitian.
    frequency : ndarray, shape (nstate,)
        Modes go as exp(i frequency t) [1/s].
    vectors : ndarray, shape (nstate, nstate)
        Columns orthonormal in energy coordinates.
    kind : ndarray of str, shape (nstate,)
        sound, Lamb, gravity, computational or vortical.
    vertical_order : ndarray of int, shape (nstate,)
        Of sound and gravity waves, 1 for the gravest: the slowest sound and the fastest gravity
        wave. 0 for the rest.
    """

    operator: Matrix
    frequency: Array
    vectors: Matrix
    kind: NDArray[np.str_]
    vertical_order: Index


def wave_basis(terms: Mapping[str, Banded], layout: Layout, weights: Array) -> WaveBasis:
    """Find the waves of the partner pairs.

    The forces act on u and w (nmotion = 2 nlev - 1 unknowns) from the others, their partners act
    the other way round with the opposite sign. With G the forces in energy coordinates, singular
    triplets G v = s u give the modes (u, +-i v)/sqrt(2) of frequency +-s; the null space of G
    stands still.

    Parameters
    ----------
    terms : mapping of str to Banded
        The catalogue in energy coordinates.
    layout : Layout
    weights : ndarray, shape (nstate,)
        Energy weights.

    Notes
    -----
    Only the forces are looked at, so that where the air is unstable its partner stands in for the
    stratification: the basis is that of air whose N^2 is raised to the floor of the energy.
    """
    moving = np.sort(np.concatenate([layout.u, layout.w]))
    others = np.sort(np.concatenate([layout.v, layout.pi, layout.theta]))
    forces = total(layout.size, (terms[name] for name in FORCES))
    block = forces.to_dense()[np.ix_(moving, others)]
    operator = np.zeros((layout.size, layout.size), dtype=block.dtype)
    operator[np.ix_(moving, others)] = block
    operator -= operator.conj().T
    left, speed, right = np.linalg.svd(block, full_matrices=True)
    right = right.conj().T
    count = moving.size
    still = _balanced(right[:, count:], block, layout, others)

    vectors = np.zeros((layout.size, layout.size), dtype=np.complex128)
    half = np.sqrt(0.5)
    vectors[np.ix_(moving, np.arange(count))] = half * left
    vectors[np.ix_(moving, np.arange(count, 2 * count))] = half * left
    vectors[np.ix_(others, np.arange(count))] = 1j * half * right[:, :count]
    vectors[np.ix_(others, np.arange(count, 2 * count))] = -1j * half * right[:, :count]
    vectors[np.ix_(others, np.arange(2 * count, layout.size))] = still
    frequency = np.concatenate([speed, -speed, np.zeros(still.shape[1])])

    lamb = _lamb(right[:, :count], weights, layout, others)
    kind, order = _kinds(layout.nlev, lamb)
    rest = ["vortical"] * still.shape[1]
    if layout.theta_in_layers:
        rest[0] = "computational"
    return WaveBasis(
        operator,
        frequency,
        vectors,
        np.array([*kind, *kind, *rest]),
        np.array([*order, *order, *(0 for _ in rest)]),
    )


def _kinds(nlev: int, lamb: int) -> tuple[list[str], list[int]]:
    """Kinds and vertical orders of the waves one way, fastest first."""
    others = [("sound", nlev - 1 - k) for k in range(nlev - 1)]
    others += [("gravity", k + 1) for k in range(nlev - 1)]
    others.insert(lamb, ("Lamb", 0))
    return [kind for kind, _ in others], [order for _, order in others]


def _lamb(right: Matrix, weights: Array, layout: Layout, others: Index) -> int:
    """Column of the Lamb wave, fastest wave first.

    The one that has most of its energy in common with the Lamb wave of isothermal air: pi' alike
    at all heights. Short sound waves in a cold layer can be slower than it, so that frequency alone
    does not tell. Where no wave has half of it, as with very short or steep waves, there is no
    Lamb wave proper and the name goes by rank: below nlev-1 sound waves.
    """
    pressure = np.zeros(layout.size)
    pressure[layout.pi] = np.sqrt(weights[layout.pi])
    share = np.abs(pressure[others] @ right) ** 2 / np.sum(pressure**2)
    return int(np.argmax(share)) if share.max() > 0.5 else layout.nlev - 1


def _balanced(null: Matrix, block: Matrix, layout: Layout, others: Index) -> Matrix:
    """Turn the null space so that the zero mode of the Lorenz staggering comes first.

    That mode is theta' alone, alternating so that the average to the interfaces vanishes.
    """
    if not layout.theta_in_layers:
        return null
    theta = np.flatnonzero(np.isin(others, layout.theta))
    alone = np.zeros(others.size, dtype=null.dtype)
    alone[theta] = np.linalg.svd(block[:, theta])[2][-1].conj()
    first = null.conj().T @ alone
    turned, _ = np.linalg.qr(np.column_stack([first, np.eye(null.shape[1])]))
    return np.asarray(null @ turned)
