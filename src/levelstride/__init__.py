"""Levelstride: how long a step can this level set carry, and what bites first.

Examples
--------
>>> import levelstride
>>> column = levelstride.build({
...     "title": "ten layers",
...     "levels": {"kind": "uniform", "layers": 10, "top_m": 10000.0},
...     "air": {"kind": "isothermal", "temperature_k": 250.0},
...     "horizontal": {"grid_spacing_m": 2000.0},
... })
>>> found = levelstride.limit(column, tableau="ARS(2,3,2)", split="sound+buoyancy", what_if=False)
>>> found.bites.kind, found.strict_step_s <= found.stable_step_s
('sound', True)
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from levelstride.column.column import Column
    from levelstride.column.level_report import level_report
    from levelstride.column.read import build, load
    from levelstride.errors import CalculationError, InputError
    from levelstride.results.calibration import Calibration
    from levelstride.results.comparison import Comparison, Weights
    from levelstride.results.dataset import Advice, AdviceRow, Limit
    from levelstride.results.files import write_advice
    from levelstride.results.headroom import Headroom
    from levelstride.results.knob_map import KnobMap
    from levelstride.results.modes_found import ColumnModes
    from levelstride.results.stretching import Stretch
    from levelstride.results.work_precision import WorkPrecision
    from levelstride.studies.advise import advise
    from levelstride.studies.calibrate import Observed, calibrate
    from levelstride.studies.compare import compare
    from levelstride.studies.headroom import headroom
    from levelstride.studies.knob_map import knob_map
    from levelstride.studies.limit import limit
    from levelstride.studies.modes import modes
    from levelstride.studies.plan import CurrentConfiguration
    from levelstride.studies.stretch import stretch
    from levelstride.studies.work_precision import work_precision

__version__ = "0.3.0"

__all__ = [
    "Advice",
    "AdviceRow",
    "CalculationError",
    "Calibration",
    "Column",
    "ColumnModes",
    "Comparison",
    "CurrentConfiguration",
    "Headroom",
    "InputError",
    "KnobMap",
    "Limit",
    "Observed",
    "Stretch",
    "Weights",
    "WorkPrecision",
    "advise",
    "build",
    "calibrate",
    "compare",
    "headroom",
    "knob_map",
    "level_report",
    "limit",
    "load",
    "modes",
    "stretch",
    "work_precision",
    "write_advice",
]

_HOMES = {
    "Advice": "results.dataset",
    "AdviceRow": "results.dataset",
    "CalculationError": "errors",
    "Calibration": "results.calibration",
    "Column": "column.column",
    "ColumnModes": "results.modes_found",
    "Comparison": "results.comparison",
    "CurrentConfiguration": "studies.plan",
    "Headroom": "results.headroom",
    "InputError": "errors",
    "KnobMap": "results.knob_map",
    "Limit": "results.dataset",
    "Observed": "studies.calibrate",
    "Stretch": "results.stretching",
    "Weights": "results.comparison",
    "WorkPrecision": "results.work_precision",
    "advise": "studies.advise",
    "build": "column.read",
    "calibrate": "studies.calibrate",
    "compare": "studies.compare",
    "headroom": "studies.headroom",
    "knob_map": "studies.knob_map",
    "level_report": "column.level_report",
    "limit": "studies.limit",
    "load": "column.read",
    "modes": "studies.modes",
    "stretch": "studies.stretch",
    "work_precision": "studies.work_precision",
    "write_advice": "results.files",
}


def __getattr__(name: str) -> Any:
    """Import a public name when it is first asked for, so that importing the package is quick."""
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
