"""The files of the normal modes."""

import csv
import io
from pathlib import Path
from typing import Any, Final

from .atomic import write_folder
from .export import cell, to_json
from .modes_found import ColumnModes, ModeFound, WaveModes
from .store import hdf5_image, origin
from .variables import Variable

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


_STORED: Final = (
    ("air", "", "air state", "text"),
    ("wavenumber_per_m", "m-1", "wavenumber along one axis", "float"),
    ("wavelength_m", "m", "horizontal wavelength along one axis", "float"),
    ("gradient_per_m", "m-1", "horizontal gradient of the scheme", "float"),
    ("kind", "", "kind of wave", "text"),
    ("vertical_order", "1", "vertical order, 1 for the gravest", "int"),
    ("frequency_per_s", "s-1", "angular frequency", "float"),
    ("intrinsic_frequency_per_s", "s-1", "angular frequency without the wind", "float"),
    ("period_s", "s", "period", "float"),
    ("growth_per_s", "s-1", "growth rate in the column itself", "float"),
    ("entangled", "1", "whether the mode is part of a transient", "flag"),
    ("equivalent_depth_m", "m", "equivalent depth", "float"),
    ("vertical_wavelength_m", "m", "vertical wavelength", "float"),
    ("wavelength_layers", "1", "vertical wavelength in layers", "float"),
    ("layer_lowest", "1", "lowest layer that holds the mode", "int"),
    ("layer_highest", "1", "highest layer that holds the mode", "int"),
    ("isothermal_per_s", "s-1", "frequency by the closed form of isothermal air", "float"),
)
_ON_GRID: Final = (
    ("frequency_per_s", "s-1", "frequency at rest with {} staggering"),
    ("to_finer", "1", "that over the one on finer levels, {} staggering"),
    ("to_isothermal", "1", "that over the closed form of isothermal air, {} staggering"),
)


def modes_hdf5(found: ColumnModes) -> bytes:
    """Write all modes as an HDF5 file image with one dimension, ``mode``; see ``hdf5_image``."""
    pairs = [(wave, mode) for wave in found.waves for mode in wave.modes]

    def values(name: str) -> list[Any]:
        return [getattr(wave if name in _WAVE else mode, name) for wave, mode in pairs]

    stored = [
        Variable(name, ("mode",), units, text, values(name), kind)
        for name, units, text, kind in _STORED
    ]
    for staggering in sorted({grid.staggering for _, mode in pairs for grid in mode.grids}):
        grids = [
            next((grid for grid in mode.grids if grid.staggering == staggering), None)
            for _, mode in pairs
        ]
        for name, units, text in _ON_GRID:
            numbers = [None if grid is None else getattr(grid, name) for grid in grids]
            title = f"{staggering.replace('-', '_')}_{name}"
            stored.append(
                Variable(title, ("mode",), units, text.format(staggering), numbers, "float")
            )
    attributes = origin(found.title, found.column, found.provenance)
    return hdf5_image({**attributes, "staggering": found.staggering}, stored)


def write_modes(found: ColumnModes, folder: Path) -> tuple[Path, ...]:
    """Write ``modes.json``, ``modes.csv`` and ``modes.h5`` into a folder.

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
    return write_folder(
        folder,
        {
            "modes.json": to_json(found).encode(),
            "modes.csv": modes_csv(found).encode(),
            "modes.h5": modes_hdf5(found),
        },
    )
