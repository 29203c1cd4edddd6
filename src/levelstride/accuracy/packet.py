"""A packet of gravity waves that stands for the weather a step has to carry."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.accuracy.modes import mode_weights, modes_of, resolved_gravity
from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.errors import CalculationError
from levelstride.operator.bands import Banded, total
from levelstride.operator.setting import layout_of
from levelstride.operator.state import Layout
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.splitting.parts import Parts, sort_terms
from levelstride.splitting.splitting import Splitting

Matrix = NDArray[Any]

WAVELENGTH_CELLS = 12
"""Horizontal wavelength along an axis [grid spacings]."""

CENTRE_M = 6000.0
"""Height of the packet above the ground [m]: the middle of a troposphere."""

FAINT = 0.03
"""Share of the envelope's amplitude that resolved waves must be able to hold at least [1]."""


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
        Period of the mean intrinsic frequency, weighted by energy [s].
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
    which ask most of a step. In the vertical, theta' within a Gaussian envelope around 6 km (or the
    middle of a lower column), a third of that height in half width and that height in vertical
    wavelength, its phase turning with height, so that energy goes up. This sketch is projected in
    the energy on the resolved gravity waves (vertical order up to a quarter of the layers) of
    positive intrinsic frequency, and scaled to unit energy.

    The waves are normal modes of the whole operator, wind and damping included. Such a packet stays
    what it is; one of waves at rest would shed sound in a wind, which an hour later is out of phase
    at steps far shorter than those the packet asks for.

    Parameters
    ----------
    column : Column
    air : Background

    Raises
    ------
    CalculationError
        If no gravity wave is resolved: too few layers, or air that is not stably stratified.
    """
    wavelength_m = WAVELENGTH_CELLS * column.horizontal.grid_spacing_m
    wave = Wave(2 * np.pi / wavelength_m, column.horizontal)
    layout, weights = layout_of(column), mode_weights(column, air)
    scale = np.sqrt(weights)

    def in_energy(state: Background) -> dict[str, Banded]:
        return {name: term.similar(scale) for name, term in assemble(column, state, wave).items()}

    terms = in_energy(air)
    modes = modes_of(terms, layout, weights)
    modes = modes.select(resolved_gravity(modes) & (modes.intrinsic_frequency > 0))
    centre = min(CENTRE_M, column.levels.top_m / 2)
    share, state = _projected(_sketch(column, layout, centre), modes.vectors)
    if np.linalg.norm(state) <= FAINT:
        raise CalculationError(
            f"air '{air.name}': no gravity wave is resolved at a wavelength of {WAVELENGTH_CELLS} "
            f"grid spacings, so there is no packet to judge steps by; it takes stably stratified "
            f"air and vertical orders up to a quarter of the {layout.nlev} layers"
        )
    return Packet(
        wave=wave,
        layout=layout,
        terms=terms,
        on_reference=in_energy(column.reference) if column.reference else terms,
        state=state / np.linalg.norm(state),
        wavelength_m=float(wavelength_m),
        centre_m=float(centre),
        half_width_m=float(centre / 3),
        vertical_wavelength_m=float(centre),
        period_s=float(2 * np.pi / np.average(modes.intrinsic_frequency, weights=share)),
        nmode=share.size,
    )


def _projected(
    sketch: Matrix, vectors: Matrix
) -> tuple[NDArray[np.float64], NDArray[np.complex128]]:
    """Share of every mode, shape (nmode,), and the nearest sum of modes, shape (nstate,)."""
    if not vectors.shape[1]:
        return np.zeros(0), np.zeros(sketch.size, dtype=np.complex128)
    amplitude = np.linalg.lstsq(vectors, sketch, rcond=None)[0]
    return np.abs(amplitude) ** 2, np.asarray(vectors @ amplitude, dtype=np.complex128)


def _sketch(column: Column, layout: Layout, centre_m: float) -> NDArray[np.complex128]:
    """theta' within the envelope, energy per metre the square of it, of unit norm, (nstate,)."""
    levels = column.levels
    if layout.theta_in_layers:
        above_m, depth_m = levels.centres_m - centre_m, levels.thickness_m
    else:
        above_m, depth_m = levels.interfaces_m[1:-1] - centre_m, levels.spacing_m
    sketch = np.zeros(layout.size, dtype=np.complex128)
    sketch[layout.theta] = np.sqrt(depth_m) * np.exp(
        -0.5 * (above_m / (centre_m / 3)) ** 2 + 2j * np.pi * above_m / centre_m
    )
    return np.asarray(sketch / np.linalg.norm(sketch))
