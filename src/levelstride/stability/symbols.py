"""The operator frozen at a layer and met by a vertical phase angle: a few unknowns each.

With A cut into blocks of one layer and the interface above it, the symbol at layer j is
A[j,j] + A[j,j+1] exp(i phi) + A[j+1,j] exp(-i phi), and so on for second neighbours. Both blocks
across one and the same interface: partner terms stay exactly skew, and no growth comes from the
freezing. What an unknown does to its own kind (transport, mixing) comes from the row of layer j on
both sides instead.

Symbols are kept in one array of shape (npart, stride, stride, nlane), a lane being a layer and an
angle.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout

Matrix = NDArray[Any]
Array = NDArray[np.float64]
Index = NDArray[np.intp]

ALIKE = 1.2
"""Symbols whose entries all lie within this factor of each other count as one."""

FAINT = 1e-3
"""Share of a symbol's largest entry below which a difference does not tell symbols apart."""

EQUAL = 1e-9
"""Relative difference of equal numbers."""

SMALL = 1e-2
"""Share of a coupling's largest value below which layers are not told apart by it."""

ROUND_OFF = 1e-13
"""Share of a symbol's largest entry that counts as an imaginary part of zero."""


def chosen_layers(whole: Banded, layout: Layout, count: int) -> Index:
    """Layers that stand for all others, ascending, at most ``count``.

    The lowest two, which a slope needs, those where a coupling inside the layer or to the layer
    above is largest, and then always the one least like those chosen, by the largest factor between
    their couplings.

    Parameters
    ----------
    whole : Banded
        The operator.
    layout : Layout
    count : int
    """
    every = np.arange(max(layout.nlev - 2, 1))
    inside, above = (_sizes(whole, layout.stride, every, reach) for reach in (0, 1))
    sizes = np.concatenate([inside, above], axis=1)
    sizes = sizes[:, sizes.any(axis=0)]
    logs = np.log(np.maximum(sizes, SMALL * sizes.max(axis=0, initial=0.0)))
    found = _in_order([0, min(1, every.size - 1), *_holders(sizes)])[:count]
    apart = np.min([_distance(logs, layer) for layer in found], axis=0)
    while len(found) < count and apart.max() > np.log(ALIKE):
        found.append(int(apart.argmax()))
        apart = np.minimum(apart, _distance(logs, found[-1]))
    return np.array(sorted(found), dtype=np.intp)


def phase_angles(whole: Banded, layout: Layout, layers: Index, count: int) -> Array:
    """Phase angles from one layer to the next [rad], shape (nlayer, count).

    From the gravest mode of the column to pi, geometrically spaced. Half a wave of that mode fills
    the column, and each layer has its share of the time that sound takes through it.

    Parameters
    ----------
    whole : Banded
        The operator.
    layout : Layout
    layers : ndarray of int, shape (nlayer,)
    count : int
    """
    every = np.arange(max(layout.nlev - 1, 1))
    coupling = _sizes(whole, layout.stride, every, 1).max(axis=1)
    duration = 1 / np.maximum(coupling, SMALL**2 * coupling.max() or 1.0)
    gravest = np.pi * (duration / duration.sum())[layers]
    return np.geomspace(gravest, np.pi, count, axis=1)


def _holders(sizes: Array) -> list[int]:
    """First row that holds the largest value of each column, but for round-off."""
    largest = sizes.max(axis=0, initial=0.0)
    rows = (sizes >= (1 - EQUAL) * largest).argmax(axis=0)
    return [int(row) for row in rows]


def _in_order(numbers: Iterable[int]) -> list[int]:
    """Drop repeated numbers, keep the order of the others."""
    return list(dict.fromkeys(numbers))


def _distance(logs: Array, layer: int) -> Array:
    distance: Array = np.abs(logs - logs[layer]).max(axis=1, initial=0.0)
    return distance


def _sizes(matrix: Banded, stride: int, layers: Index, above: int) -> Array:
    """Moduli of the entries of A[j,j+above], shape (nlayer, stride * stride)."""
    sizes: Array = np.abs(_blocks(matrix, stride, layers, 0, above)).reshape(layers.size, -1)
    return sizes


def _blocks(matrix: Banded, stride: int, layers: Index, below: int, above: int) -> Matrix:
    """Blocks A[j+below,j+above], shape (nlayer, stride, stride); zero beyond the column."""
    inside = np.arange(stride)
    rows = (layers + below)[:, None, None] * stride + inside[:, None]
    columns = (layers + above)[:, None, None] * stride + inside
    there = (np.minimum(rows, columns) >= 0) & (np.maximum(rows, columns) < matrix.size)
    found: Matrix = matrix.entries(np.where(there, rows, 0), np.where(there, columns, 0))
    return np.where(there, found, 0.0)


def frozen_symbols(
    parts: Sequence[Banded], layout: Layout, layers: Index, angles: Array
) -> NDArray[np.complex128]:
    """Symbols of every part at every layer and angle.

    Parameters
    ----------
    parts : sequence of Banded
    layout : Layout
    layers : ndarray of int, shape (nlayer,)
    angles : ndarray, shape (nlayer, nangle)

    Returns
    -------
    ndarray, shape (npart, stride, stride, nlayer * (nangle + 1))
        [1/s]. The last lane of every layer is the layer without vertical motion: the Lamb wave,
        whose growth with height is no phase angle.
    """
    stride, nlayer = layout.stride, layers.size
    in_layers = layout.size - stride * (layout.nlev - 1)
    same = np.eye(stride, dtype=bool)
    found = np.zeros((len(parts), nlayer, angles.shape[1] + 1, stride, stride), dtype=complex)
    with_zero = np.append(angles, np.zeros((nlayer, 1)), axis=1)
    for lanes, part in zip(found, parts, strict=True):
        if part.is_zero:
            continue
        lanes += _inner_blocks(part, layout, layers, in_layers)[:, None]
        for reach in (1, 2):
            if max(-part.offsets[0], part.offsets[-1]) < (reach - 1) * stride:
                break
            turn = np.exp(1j * reach * with_zero)[:, :, None, None]
            up = _blocks(part, stride, layers, 0, reach)
            across = _blocks(part, stride, layers, reach, 0)
            down = np.where(same, _blocks(part, stride, layers, 0, -reach), across)
            lanes += up[:, None] * turn + down[:, None] / turn
    found[:, :, -1, in_layers:] = found[:, :, -1, :, in_layers:] = 0.0
    return np.moveaxis(found.reshape(len(parts), -1, stride, stride), 1, -1)


def _inner_blocks(matrix: Banded, layout: Layout, layers: Index, in_layers: int) -> Matrix:
    """Blocks A[j,j], shape (nlayer, stride, stride), the ground taken out of the lowest.

    The slope gradient of the lowest layer has one face instead of two, which would look like a
    gradient at angle zero; what couples its unknowns is therefore that of the layer above.
    """
    blocks = _blocks(matrix, layout.stride, layers, 0, 0)
    inner = _blocks(matrix, layout.stride, np.maximum(layers, min(1, layout.nlev - 1)), 0, 0)
    coupling = ~np.eye(layout.stride, dtype=bool)
    coupling[in_layers:] = coupling[:, in_layers:] = False
    return np.where(coupling, inner, blocks)


def turned_real(stack: Matrix) -> Matrix:
    """Turn the phases of the unknowns so that the symbols are real where they can be.

    Growth does not depend on the phases, and real numbers cost a third. Couplings without a closed
    loop, as those of waves at rest, can always be made real.

    Parameters
    ----------
    stack : ndarray, shape (npart, stride, stride, nlane)

    Returns
    -------
    ndarray of the same shape, real or complex
    """
    size = np.abs(stack)
    ties = size.max(axis=(0, 3))
    ties = np.maximum(ties, ties.T)
    phase = np.ones(stack.shape[2:], dtype=complex)
    turned, waiting = [0], list(range(1, stack.shape[1]))
    while waiting:
        i, j = max(((i, j) for i in turned for j in waiting), key=lambda pair: ties[pair])
        # the strongest coupling of the two, in either direction and any part; the first of equals
        both = np.concatenate([stack[:, i, j].conj(), stack[:, j, i]])
        length = np.abs(both).max(axis=0)
        first = (np.abs(both) >= (1 - EQUAL) * length).argmax(axis=0)
        strongest = np.take_along_axis(both, first[None], axis=0)[0]
        phase[j] = phase[i] * np.where(length > 0, strongest, 1) / np.where(length > 0, length, 1)
        turned.append(j)
        waiting.remove(j)
    stack = phase.conj()[:, None] * stack * phase
    faint = ROUND_OFF * size.max(axis=(0, 1, 2))
    return stack.real if np.all(np.abs(stack.imag) <= faint) else stack


def larger(stack: Matrix, mirrored: Matrix) -> Matrix:
    """Of every lane and its mirror image, with the angle reversed, take the one of larger norm.

    Where the sign of the angle matters, over a slope for instance, the one direction adds to the
    horizontal gradient what the other takes away.

    Parameters
    ----------
    stack, mirrored : ndarray, shape (npart, stride, stride, nlane)
    """
    norm, other = (np.square(np.abs(each)).sum(axis=(0, 1, 2)) for each in (stack, mirrored))
    found: Matrix = np.where(other > (1 + EQUAL) * norm, mirrored, stack)
    return found


def distinct(stack: Matrix) -> Matrix:
    """Leave out lanes like one that is kept: first come those with the largest entries.

    Parameters
    ----------
    stack : ndarray, shape (npart, stride, stride, nlane)
    """
    lanes = stack.reshape(-1, stack.shape[-1]).T
    lanes = lanes[:, np.any(lanes, axis=0)]
    size = np.abs(lanes)
    largest = size.max(axis=1, initial=0.0)
    allowed = (1 - 1 / ALIKE) * size + FAINT * largest[:, None]
    order = _in_order([*_holders(size), *np.argsort(-largest, kind="stable").tolist()])
    waiting, kept = np.array(order), []
    while waiting.size:
        first, waiting = waiting[0], waiting[1:]
        kept.append(first)
        apart = np.abs(lanes[waiting] - lanes[first]) > allowed[first]
        waiting = waiting[apart.any(axis=1)]
    return np.ascontiguousarray(stack[..., np.sort(kept)])
