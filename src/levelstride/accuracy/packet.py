"""A packet of gravity waves that stands for the weather a step has to carry."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.accuracy.modes import STILL, mode_weights
from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.bands import Banded, total
from levelstride.operator.setting import layout_of
from levelstride.operator.state import Layout
from levelstride.operator.terms import CATALOGUE, assemble
from levelstride.operator.wave import Wave
from levelstride.operator.wave_basis import WaveBasis, wave_basis
from levelstride.splitting.parts import Parts, sort_terms
from levelstride.splitting.splitting import Splitting

Matrix = NDArray[Any]

WAVELENGTH_CELLS = 12
"""Horizontal wavelength along an axis [grid spacings]."""

CENTRE_M = 6000.0
"""Height of the packet above the ground [m]: the middle of a troposphere."""

ORDERS_PER_LAYER = 0.25
"""Vertical orders up to this share of the layers are resolved, as for the errors of waves."""

UNTRUE = 0.25
"""A wave whose frequency the air itself misses by more than this share is none [1]."""

FAINT = 1e-3
"""Share of the envelope's energy that resolved waves must be able to hold at least [1]."""


@dataclass(frozen=True, slots=True, eq=False)
class Packet:
    """A packet of gravity waves on one air state, with the operator that carries it.

    Attributes
    ----------
    wave : Wave
        Its horizontal wave.
    layout : Layout
    terms, on_reference : mapping of str to Banded
        The catalogue on the air and on the reference, in energy coordinates.
    state : ndarray of complex, shape (nstate,)
        The packet at the start, of unit energy norm, in energy coordinates.
    wavelength_m : float
        Horizontal wavelength along an axis [m].
    centre_m, half_width_m, vertical_wavelength_m : float
        Of the envelope that it was made from [m].
    period_s : float
        Period of the mean frequency, weighted by energy [s].
    nmode : int
        Number of gravity modes that it is made of.
    """

    wave: Wave
    layout: Layout
    terms: Mapping[str, Banded]
    on_reference: Mapping[str, Banded]
    state: NDArray[np.complex128]
    wavelength_m: float
    centre_m: float
    half_width_m: float
    vertical_wavelength_m: float
    period_s: float
    nmode: int

    @property
    def operator(self) -> Banded:
        """The sum of all terms: what the air itself obeys."""
        return total(self.layout.size, self.terms.values())

    def parts(self, splitting: Splitting) -> Parts:
        """Sort the terms by treatment, in energy coordinates."""
        return sort_terms(splitting, self.terms, self.on_reference, self.layout)


def gravity_packet(column: Column, air: Background) -> Packet:
    """Make the packet of one air state; the same column gives the same packet.

    Its horizontal wavelength is 12 grid spacings along an axis: half as long again as the shortest
    wave that counts as resolved (8), and among the fastest gravity waves that a model carries well,
    which ask most of a step. In the vertical, w within a Gaussian envelope around 6 km (or the
    middle of a lower column), a third of that height in half width and that height in vertical
    wavelength, its phase turning with height, so that energy goes one way. This sketch is projected
    in the energy on the gravity waves of positive frequency and of vertical order up to a quarter
    of the layers, which leaves pure gravity waves without any sound, and scaled to unit energy.

    The waves are those of the partner pairs: at rest and without damping. Wind and damping then act
    on the packet as on any other state.

    Parameters
    ----------
    column : Column
    air : Background

    Raises
    ------
    CalculationError
        If no gravity wave is resolved: too few layers, or air that is not stably stratified.
    """
    wave = Wave(
        2 * np.pi / (WAVELENGTH_CELLS * column.horizontal.grid_spacing_m), column.horizontal
    )
    layout, weights = layout_of(column), mode_weights(column, air)
    scale = np.sqrt(weights)

    def in_energy(state: Background) -> dict[str, Banded]:
        return {name: term.similar(scale) for name, term in assemble(column, state, wave).items()}

    terms = in_energy(air)
    centre = min(CENTRE_M, column.levels.top_m / 2)
    basis = wave_basis(terms, layout, weights)
    chosen = _resolved(basis, terms, layout)
    vectors = basis.vectors[:, chosen]
    sketch = _sketch(column, layout, centre)
    share = vectors.conj().T @ sketch
    energy = np.abs(share) ** 2
    if energy.sum() <= FAINT * np.vdot(sketch, sketch).real:
        raise CalculationError(
            f"air '{air.name}': no gravity wave is resolved at a wavelength of {WAVELENGTH_CELLS} "
            f"grid spacings, so there is no packet to judge steps by; it takes stably stratified "
            f"air and vertical orders up to a quarter of the {layout.nlev} layers"
        )
    state = vectors @ (share / np.sqrt(energy.sum()))
    return Packet(
        wave=wave,
        layout=layout,
        terms=terms,
        on_reference=in_energy(column.reference) if column.reference else terms,
        state=state.astype(np.complex128),
        wavelength_m=float(2 * np.pi / wave.kappa),
        centre_m=float(centre),
        half_width_m=float(centre / 3),
        vertical_wavelength_m=float(centre),
        period_s=float(2 * np.pi * energy.sum() / np.sum(energy * basis.frequency[chosen])),
        nmode=int(chosen.size),
    )


def _resolved(basis: WaveBasis, terms: Mapping[str, Banded], layout: Layout) -> NDArray[np.intp]:
    """Resolved gravity waves of positive frequency that the air itself has.

    In air that is not stable the basis is that of stable air in its stead: waves that live there
    are left out, told by what the partner pairs give them for a frequency in the mean.
    """
    fastest = np.abs(basis.frequency).max(initial=0.0)
    wanted = np.flatnonzero(
        (basis.kind == "gravity")
        & (basis.frequency > STILL * fastest)
        & (basis.vertical_order <= ORDERS_PER_LAYER * layout.nlev)
    )
    pairs = total(layout.size, (terms[n] for n, t in CATALOGUE.items() if t.partner is not None))
    vectors, frequency = basis.vectors[:, wanted], basis.frequency[wanted]
    missed = np.abs(np.sum(vectors.conj() * pairs.apply(vectors), axis=0) - 1j * frequency)
    return np.asarray(wanted[missed <= UNTRUE * frequency])


def _sketch(column: Column, layout: Layout, centre_m: float) -> NDArray[np.complex128]:
    """Vertical wind within the envelope, energy per metre the square of it, (nstate,)."""
    height = column.levels.interfaces_m[1:-1] - centre_m
    width = centre_m / 3
    sketch = np.zeros(layout.size, dtype=np.complex128)
    sketch[layout.w] = np.sqrt(column.levels.spacing_m) * np.exp(
        -0.5 * (height / width) ** 2 + 2j * np.pi * height / centre_m
    )
    return sketch
