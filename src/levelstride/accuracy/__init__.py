"""How wrong a step is: normal modes of the column and what one step does to each."""

from levelstride.accuracy.by_kind import (
    KindErrors,
    StepWaveErrors,
    WaveErrorsAtStep,
    WorstWave,
    column_waves,
    step_wave_errors,
)
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
    "KindErrors",
    "ModeErrors",
    "Modes",
    "ResolvedWaves",
    "StepErrors",
    "StepWaveErrors",
    "WaveErrors",
    "WaveErrorsAtStep",
    "WorstWave",
    "column_waves",
    "mode_errors",
    "normal_modes",
    "resolved_gravity",
    "resolved_gravity_errors",
    "resolved_waves",
    "step_wave_errors",
    "worst_of",
]
