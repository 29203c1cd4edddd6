"""The vertical structure of a mode."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from levelstride.column.levels import Levels
from levelstride.operator.state import FIELDS, Layout

FLAT = 1e-3
"""Phases between neighbouring points below this are no wave [rad]."""


def vertical_wavelength(
    levels: Levels, layout: Layout, vector: NDArray[Any]
) -> tuple[float, float] | None:
    """Vertical wavelength of a mode, as the root of the mean of its squared wavenumber.

    Parameters
    ----------
    levels : Levels
    layout : Layout
    vector : ndarray, shape (nstate,)
        In energy coordinates.

    Returns
    -------
    metres, layers : float
        [m], and over the mean thickness where the mode is [layers]; None where it does not vary.

    Notes
    -----
    Of the field that holds most energy, q the energy coordinate over the root of its thickness d:
    S = sum |q_{j+1} - q_j|^2/h / sum |q|^2 d, h being the distance. A pure wave m on uniform levels
    has S = (2/d)^2 sin(m d/2)^2, which is solved for m with the mean thickness, weighted by energy.
    """
    places = max((layout.places(field) for field in FIELDS),
                 key=lambda at: float((np.abs(vector[at]) ** 2).sum()))  # fmt: skip
    in_layers = places.size == levels.nlev
    thickness = levels.thickness_m if in_layers else levels.spacing_m
    profile = vector[places] / np.sqrt(thickness)
    if in_layers:
        steps, distance = np.diff(profile), levels.spacing_m
    else:
        steps, distance = np.diff(profile, prepend=0.0, append=0.0), levels.thickness_m
    energy = np.abs(vector[places]) ** 2
    if energy.sum() == 0:
        return None
    mean = float((energy * thickness).sum() / energy.sum())
    slope = float(np.sum(np.abs(steps) ** 2 / distance) / energy.sum())
    phase = 2 * np.arcsin(min(1.0, np.sqrt(slope) * mean / 2))
    if phase < FLAT:
        return None
    return float(2 * np.pi * mean / phase), float(2 * np.pi / phase)
