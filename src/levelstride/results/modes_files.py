"""The files of the normal modes."""

import csv
import io
from pathlib import Path
from typing import Any, Final

from .atomic import write_folder
from .export import cell, to_json
from .modes_found import ColumnModes, ModeFound, WaveModes

_WAVE: Final = ("air", "wavenumber_per_m", "wavelength_m", "wavelength_cells", "gradient_per_m")
_MODE: Final = (
    "kind", "vertical_order", "frequency_per_s", "intrinsic_frequency_per_s", "period_s",
    "growth_per_s", "entangled", "equivalent_depth_m", "vertical_wavelength_m",
    "wavelength_layers", "layer_lowest", "layer_highest", "bottom_m", "top_m", "isothermal_per_s",
)  # fmt: skip
_GRID: Final = ("frequency_per_s", "to_finer", "to_isothermal")


def modes_csv(found: ColumnModes) -> str:
    """Write all modes as CSV, one line each; what both staggerings do stands side by side."""
    lines = [_cells(wave, mode) for wave in found.waves for mode in wave.modes]
    headings = list(dict.fromkeys((*_WAVE, *_MODE, *(name for line in lines for name in line))))
    text = io.StringIO()
    writer = csv.DictWriter(text, headings, restval="", lineterminator="\n")
    writer.writeheader()
    writer.writerows(lines)
    return text.getvalue()


def _cells(wave: WaveModes, mode: ModeFound) -> dict[str, str]:
    cells: dict[str, Any] = {name: getattr(wave, name) for name in _WAVE}
    cells |= {name: getattr(mode, name) for name in _MODE}
    for grid in mode.grids:
        prefix = grid.staggering.replace("-", "_")
        cells |= {f"{prefix}_{name}": getattr(grid, name) for name in _GRID}
    return {name: cell(value) for name, value in cells.items()}


def write_modes(found: ColumnModes, folder: Path) -> tuple[Path, ...]:
    """Write ``modes.json`` and ``modes.csv`` into a folder.

    Parameters
    ----------
    found : ColumnModes
        The modes.
    folder : Path
        The folder; made if it is missing and its parent exists.

    Returns
    -------
    tuple of Path
        The files written.

    Raises
    ------
    InputError
        If they cannot be written; then none is.
    """
    files = {"modes.json": to_json(found), "modes.csv": modes_csv(found)}
    return write_folder(folder, {name: text.encode() for name, text in files.items()})
