"""How far the levels themselves distort the waves of a column at rest, under both staggerings."""

import pickle
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Final

import numpy as np

from levelstride.accuracy.modes import mode_weights
from levelstride.column.air import Background
from levelstride.column.arrays import Array
from levelstride.column.column import Column, Staggering
from levelstride.column.variants import with_levels
from levelstride.operator.setting import layout_of
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.operator.wave_basis import wave_basis
from levelstride.stability.blas import on_one_thread

STAGGERINGS: Final[tuple[Staggering, ...]] = ("charney-phillips", "lorenz")

SPLIT_INTO: Final = 4
"""Layers that every layer is split into."""

Named = Mapping[tuple[str, int], float]
"""Frequencies [1/s] by kind and vertical order."""


@dataclass(frozen=True, slots=True)
class GridItem:
    """One wave of one air state under one staggering, as plain data.

    Parameters
    ----------
    column : bytes
        The column, pickled.
    air : int
        Place of the air state.
    wavenumber_per_m : float
        Along one axis [1/m].
    staggering : str
        The staggering.
    split_into : int
        Layers that every layer is split into.
    """

    column: bytes
    air: int
    wavenumber_per_m: float
    staggering: Staggering
    split_into: int = SPLIT_INTO


@dataclass(frozen=True, slots=True)
class GridFound:
    """Frequencies of the waves at rest on the levels as they are and on finer ones.

    Parameters
    ----------
    own, finer : mapping of (str, int) to float
        By kind and vertical order [1/s].
    """

    own: Named
    finer: Named


@on_one_thread
def compare_grids(item: GridItem) -> GridFound:
    """Find what the levels make of the waves of one item."""
    own, finer = _columns(item.column, item.split_into)
    return GridFound(
        *(_at_rest(replace(column, staggering=item.staggering), item) for column in (own, finer))
    )


@lru_cache(maxsize=2)
def _columns(packed: bytes, split_into: int) -> tuple[Column, Column]:
    column: Column = pickle.loads(packed)
    return column, with_levels(column, split_layers(column.levels.interfaces_m, split_into))


def split_layers(interfaces_m: Array, split_into: int) -> Array:
    """Split every layer into equally thick ones.

    Examples
    --------
    >>> split_layers(np.array([0.0, 100.0, 300.0]), 2)
    array([  0.,  50., 100., 200., 300.])
    """
    places = np.arange(split_into * (interfaces_m.size - 1) + 1) / split_into
    return np.interp(places, np.arange(interfaces_m.size), interfaces_m)


def _at_rest(column: Column, item: GridItem) -> Named:
    """Frequencies of the partner pairs alone: no wind, no damping, unstable air made neutral."""
    air: Background = column.airs[item.air]
    weights = mode_weights(column, air)
    wave = Wave(item.wavenumber_per_m, column.horizontal)
    scale = np.sqrt(weights)
    terms = {name: term.similar(scale) for name, term in assemble(column, air, wave).items()}
    basis = wave_basis(terms, layout_of(column), weights)
    return {
        (str(kind), int(order)): float(frequency)
        for kind, order, frequency in zip(
            basis.kind, basis.vertical_order, basis.frequency, strict=True
        )
        if frequency > 0
    }
