"""What the lanes' operators have in common, so that as little as possible is kept lane by lane.

Between waves of one air state vertical terms are the same numbers, and horizontal ones the same
numbers times a factor of the wave. Nothing here knows that: it is found in the numbers.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.bands import Banded
from levelstride.operator.state import Layout

Array = NDArray[Any]
Stencil = Mapping[tuple[int, int], Array]
"""Entries by field of the row and offset of the column in `Order`, each (nlev, nlane)."""

SAME: Final = 1e-15
"""Relative difference up to which two entries count as one number."""

PROPORTIONAL: Final = 1e-14
"""Relative difference up to which entries count as a number of the layer times one of the lane."""

NO_FACTOR: Final = -1


@dataclass(frozen=True)
class Order:
    """The order in which lanes keep their unknowns.

    Layer by layer from the ground up: what the layer carries, then theta' (Charney-Phillips) and w
    of the interface below it, last. Elimination in this order takes pi' and theta' before the w
    that they meet in, and leaves one tridiagonal system for w where there is one. The ground has a
    place for its w too, where nothing ever happens.
    """

    layout: Layout

    @property
    def stride(self) -> int:
        """Unknowns from one layer to the next."""
        return self.layout.stride

    @cached_property
    def places(self) -> NDArray[np.int64]:
        """Place of every unknown, shape (nstate,)."""
        at = self.layout
        names = [name for name in ("u", "v", "pi", "theta", "w") if at.places(name).size]
        places = np.zeros(at.size, dtype=np.int64)
        for position, name in enumerate(names):
            unknowns = at.places(name)
            layer = np.arange(unknowns.size) + (at.nlev - unknowns.size)
            places[unknowns] = layer * self.stride + position
        return places

    def stencil(self, matrices: Sequence[Banded]) -> Stencil:
        """Sort the entries of one matrix per lane by their places."""
        at, places = self.layout, self.places
        dtype = np.result_type(*(matrix.diagonals for matrix in matrices), np.float64)
        found: dict[tuple[int, int], Array] = {}
        for offset in sorted({o for matrix in matrices for o in matrix.offsets}):
            rows = np.arange(max(0, -offset), min(at.size, at.size - offset))
            values = np.array([m.diagonal(offset) for m in matrices], dtype=dtype)[:, rows].T
            apart = places[rows + offset] - places[rows]
            kind = places[rows] % self.stride
            for key in sorted(set(zip(kind.tolist(), apart.tolist(), strict=True))):
                here = (kind == key[0]) & (apart == key[1])
                if np.any(values[here]):
                    target = found.setdefault(key, np.zeros((at.nlev, len(matrices)), dtype))
                    target[places[rows[here]] // self.stride] = values[here]
        return found

    def band(self, stencil: Stencil) -> tuple[Array, int]:
        """Return I + A as (nrow, nband, nlane), and the number of entries left of the diagonal."""
        lower = max(0, *(-offset for _, offset in stencil), 0)
        upper = max(0, *(offset for _, offset in stencil), 0)
        nlane = next(iter(stencil.values())).shape[1]
        dtype = np.result_type(*stencil.values())
        band = np.zeros((self.layout.nlev, self.stride, lower + 1 + upper, nlane), dtype)
        for (kind, offset), values in stencil.items():
            band[:, kind, lower + offset] = values
        band[:, :, lower] += 1.0
        return band.reshape(-1, lower + 1 + upper, nlane), lower


@dataclass(frozen=True, slots=True, eq=False)
class Entry:
    """A column of a row: its offset in `Order`, and the coefficient.

    ``shared`` (nlev,) holds for all lanes, times the factor with the number ``factor`` if there is
    one; otherwise ``lanes`` (nlev, nlane) holds, times the imaginary unit if ``imaginary``.
    """

    offset: int
    shared: Array | None
    lanes: Array | None = None
    factor: int = NO_FACTOR
    imaginary: bool = False

    def scaled(self, number: float) -> Entry:
        """Return the entry times a number."""
        return replace(
            self,
            shared=None if self.shared is None else number * self.shared,
            lanes=None if self.lanes is None else number * self.lanes,
        )


@dataclass(slots=True, eq=False)
class Factors:
    """The factors that tell lanes apart, each (nlane,), the largest modulus of each one being 1."""

    known: list[Array] = field(default_factory=list)

    def number(self, factor: Array) -> int:
        """Return the number of a factor, a new one if it is not known."""
        for i, other in enumerate(self.known):
            if np.all(np.abs(factor - other) <= SAME * np.abs(other)):
                return i
        self.known.append(factor)
        return len(self.known) - 1

    def entries(self, offset: int, values: Array) -> list[Entry]:
        """Write the entries of one diagonal, (nlev, nlane), by what the lanes have in common."""
        found = self._in_common(offset, values)
        if found is not None:
            return [found]
        parts = [values.real, values.imag] if np.iscomplexobj(values) else [values]
        if len(parts) == 1 or not all(np.any(part) for part in parts):
            return [
                Entry(offset, None, np.ascontiguousarray(part), NO_FACTOR, imaginary)
                for part, imaginary in zip(parts, (False, True), strict=False)
                if np.any(part)
            ]
        return self.entries(offset, values.real) + self.entries(offset, 1j * values.imag)

    def _in_common(self, offset: int, values: Array) -> Entry | None:
        """Write entries as one real number for each layer times one factor for each lane."""
        layer, lane = np.unravel_index(np.argmax(np.abs(values)), values.shape)
        largest = values[layer, lane]
        shared = values[:, lane] / (largest / np.abs(largest))
        if np.any(np.abs(shared.imag) > SAME * np.abs(shared)):
            return None
        shared = np.ascontiguousarray(shared.real)
        factor = values[layer] / np.abs(largest)
        close = np.abs(values - shared[:, None] * factor) <= PROPORTIONAL * np.abs(values)
        if not np.all(close):
            return None
        if factor[lane].real < 0.0 or (factor[lane].real == 0.0 and factor[lane].imag < 0.0):
            shared, factor = -shared, -factor
        if np.all(np.abs(factor - 1.0) <= SAME):
            return Entry(offset, shared)
        return Entry(offset, shared, None, self.number(factor))

    def rows(self, stencil: Stencil, stride: int) -> list[list[Entry]]:
        """Write a matrix field by field."""
        rows: list[list[Entry]] = [[] for _ in range(stride)]
        for kind, offset in sorted(stencil):
            rows[kind] += self.entries(offset, stencil[kind, offset])
        return rows
