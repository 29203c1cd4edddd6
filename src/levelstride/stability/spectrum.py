"""Which horizontal waves a step limit examines: those of ``operator/sampled_waves.py``."""

from levelstride.operator.sampled_waves import (
    LONGEST_IN_CELLS,
    SAMPLES,
    sampled_wavenumbers,
    steepest_gradient,
    steepest_wavenumber,
)

__all__ = [
    "LONGEST_IN_CELLS",
    "SAMPLES",
    "sampled_wavenumbers",
    "steepest_gradient",
    "steepest_wavenumber",
]
