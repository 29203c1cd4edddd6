"""How wrong a step is: normal modes of the column and what one step does to each."""

from levelstride.accuracy.modes import Modes, normal_modes, resolved_gravity
from levelstride.accuracy.wave_errors import (
    ModeErrors,
    ResolvedWaves,
    StepErrors,
    WaveErrors,
    mode_errors,
    resolved_gravity_errors,
    resolved_waves,
    worst_of,
)

__all__ = [
    "ModeErrors",
    "Modes",
    "ResolvedWaves",
    "StepErrors",
    "WaveErrors",
    "mode_errors",
    "normal_modes",
    "resolved_gravity",
    "resolved_gravity_errors",
    "resolved_waves",
    "worst_of",
]
