"""Which unknowns a column has, where they live and in which order they are stored."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Index = NDArray[np.intp]

FIELDS = ("u", "v", "w", "theta", "pi")


@dataclass(frozen=True)
class Layout:
    """Order and staggering of the unknowns of one column.

    The unknowns are interleaved from the ground up, so that every term is a narrow band: for each
    layer u, (v), pi', (theta' for ``lorenz``), then for the interface above it w,
    (theta' for ``charney-phillips``). Ground and lid carry no unknown, w being zero there.

    Horizontal wind is stored divided by the imaginary unit. The wave exp(i kappa x) puts u and v a
    quarter period from pi', w and theta', so this makes every term of a column at rest over flat
    ground real, and the arithmetic twice as fast.

    Parameters
    ----------
    nlev : int
        Number of layers.
    staggering : {"charney-phillips", "lorenz"}
    rotation : bool
        Whether v is carried.
    """

    nlev: int
    staggering: str
    rotation: bool = False

    @cached_property
    def _by_layer(self) -> list[str]:
        fields = ["u", "v", "pi"] if self.rotation else ["u", "pi"]
        return [*fields, "theta"] if self.staggering == "lorenz" else fields

    @cached_property
    def _by_interface(self) -> list[str]:
        return ["w"] if self.staggering == "lorenz" else ["w", "theta"]

    @property
    def stride(self) -> int:
        """Unknowns from one layer to the next."""
        return len(self._by_layer) + len(self._by_interface)

    @property
    def size(self) -> int:
        """Number of unknowns, nstate."""
        return self.stride * self.nlev - len(self._by_interface)

    @property
    def theta_in_layers(self) -> bool:
        """Whether theta' shares the layers with pi' (Lorenz)."""
        return self.staggering == "lorenz"

    def _place(self, name: str) -> Index:
        if name in self._by_layer:
            return np.arange(self.nlev) * self.stride + self._by_layer.index(name)
        if name in self._by_interface:
            first = len(self._by_layer) + self._by_interface.index(name)
            return np.arange(self.nlev - 1) * self.stride + first
        return np.zeros(0, dtype=np.intp)

    @cached_property
    def u(self) -> Index:
        """Places of u, one a layer, shape (nlev,)."""
        return self._place("u")

    @cached_property
    def v(self) -> Index:
        """Places of v, one a layer; empty without rotation."""
        return self._place("v")

    @cached_property
    def pi(self) -> Index:
        """Places of pi', one a layer, shape (nlev,)."""
        return self._place("pi")

    @cached_property
    def w(self) -> Index:
        """Places of w at interior interfaces, shape (nlev-1,)."""
        return self._place("w")

    @cached_property
    def theta(self) -> Index:
        """Places of theta', shape (nlev,) for Lorenz, (nlev-1,) for Charney-Phillips."""
        return self._place("theta")

    def places(self, field: str) -> Index:
        """Places of a field named as in ``FIELDS``."""
        index: Index = getattr(self, field)
        return index

    def spread(
        self, in_layers: NDArray[np.float64], at_interfaces: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Give every unknown the value at its own height.

        Parameters
        ----------
        in_layers : ndarray, shape (nlev,)
        at_interfaces : ndarray, shape (nlev-1,)
            At interior interfaces.

        Returns
        -------
        ndarray, shape (nstate,)
        """
        values = np.empty(self.size)
        for field in FIELDS:
            places = self.places(field)
            if places.size:
                values[places] = in_layers if places.size == self.nlev else at_interfaces
        return values

    @cached_property
    def phase(self) -> NDArray[np.complex128]:
        """Factor from the stored to the physical unknown: i for u and v, 1 elsewhere."""
        factor = np.ones(self.size, dtype=np.complex128)
        factor[self.u] = 1j
        factor[self.v] = 1j
        return factor

    @cached_property
    def layer_of(self) -> Index:
        """Layer each unknown belongs to; an interface counts to the layer below it."""
        return np.arange(self.size) // self.stride
