"""Telling sound from Lamb and gravity waves among the modes of a column."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from levelstride.operator.state import Layout

KINDS = ("sound", "Lamb", "gravity", "computational", "vortical")


def wave_kinds(frequency: NDArray[np.float64], layout: Layout) -> NDArray[np.str_]:
    """Name the kind of every mode of the windless, undamped operator.

    A column of nlev layers carries, each way, nlev-1 sound waves, one Lamb wave and nlev-1 gravity
    waves, and they never overlap in frequency: sound is above the Lamb wave, gravity waves below it
    (Davies, Staniforth, Wood and Thuburn 2003, Quarterly Journal of the Royal Meteorological
    Society 129, 2761-2775). What is left stands still: the zero mode of the Lorenz staggering, and
    with rotation one balanced vortical mode a layer.

    Parameters
    ----------
    frequency : ndarray, shape (nstate,)
        Of all modes [1/s], any order and sign.
    layout : Layout

    Returns
    -------
    ndarray of str, shape (nstate,)
        Members of ``KINDS``.
    """
    travelling = 2 * (layout.nlev - 1)
    names = ["sound"] * travelling + ["Lamb"] * 2 + ["gravity"] * travelling
    left = layout.size - len(names)
    vortical = layout.nlev if layout.rotation else 0
    names += ["computational"] * (left - vortical) + ["vortical"] * vortical
    kinds = np.empty(layout.size, dtype="<U13")
    kinds[np.argsort(-np.abs(frequency), kind="stable")] = names[: layout.size]
    return kinds
