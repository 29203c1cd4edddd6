"""The U.S. Standard Atmosphere 1976 up to 84.852 km geopotential altitude.

References
----------
U.S. Standard Atmosphere, 1976. NOAA-S/T 76-1562, table 4 (temperature gradients) and section 1.3.
"""

from typing import Final

import numpy as np

from .arrays import read_only
from .profiles import PiecewiseLinearAir

SEA_LEVEL_PRESSURE: Final = 101325.0
"""Pressure at sea level [Pa] (table 2)."""

SEA_LEVEL_TEMPERATURE: Final = 288.15
"""Temperature at sea level [K] (table 2)."""

CEILING_M: Final = 84852.0
"""Highest geopotential altitude of the constant-composition part [m]."""

BASES_M: Final = (0.0, 11000.0, 20000.0, 32000.0, 47000.0, 51000.0, 71000.0)
"""Geopotential altitudes of the layer bases [m] (table 4)."""

GRADIENTS: Final = (-6.5e-3, 0.0, 1.0e-3, 2.8e-3, 0.0, -2.8e-3, -2.0e-3)
"""Temperature gradients above the bases [K/m] (table 4)."""


def standard_air(pressure_pa: float | None = None, at_m: float = 0.0) -> PiecewiseLinearAir:
    """Make the standard atmosphere.

    Parameters
    ----------
    pressure_pa : float, optional
        Pressure at the altitude ``at_m`` [Pa] that replaces the standard one; the temperatures
        stay.
    at_m : float
        Altitude of that pressure [m].

    Returns
    -------
    PiecewiseLinearAir
        Below sea level the lowest gradient goes on; nothing exists above 84.852 km.
    """
    rises = np.diff(BASES_M) * np.array(GRADIENTS[:-1])
    temperatures = SEA_LEVEL_TEMPERATURE + np.concatenate([[0.0], np.cumsum(rises)])
    return PiecewiseLinearAir(
        nodes_m=read_only(BASES_M),
        temperatures_k=read_only(temperatures),
        anchor_m=0.0 if pressure_pa is None else at_m,
        anchor_pa=SEA_LEVEL_PRESSURE if pressure_pa is None else pressure_pa,
        gradient_below=GRADIENTS[0],
        gradient_above=GRADIENTS[-1],
        ceiling_m=CEILING_M,
    )
