"""Physical constants, each with its source.

U.S. Standard Atmosphere 1976 (NOAA-S/T 76-1562): standard gravity 9.80665 m/s2 (table 2), gas
constant 8314.32 J/(kmol K) (table 2), sea-level mean molar mass 28.9644 kg/kmol (section 1.2.4),
ratio of specific heats 1.40 (section 1.3.8). The ratio cp/R = 3.5 follows from gamma = 1.4.
"""

from typing import Final

GRAVITY: Final = 9.80665
"""Standard gravity [m/s2]."""

GAS_CONSTANT: Final = 8314.32 / 28.9644
"""Specific gas constant of dry air R [J/(kg K)]."""

HEAT_CAPACITY_RATIO: Final = 1.4
"""cp/cv of dry air [1]."""

HEAT_CAPACITY: Final = 3.5 * GAS_CONSTANT
"""Specific heat at constant pressure cp [J/(kg K)]."""

REFERENCE_PRESSURE: Final = 1.0e5
"""Pressure at which potential temperature equals temperature [Pa] (common practice, no source)."""
