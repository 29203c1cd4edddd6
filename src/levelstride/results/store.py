"""Stored answers: HDF5 files that netCDF-4 software reads, real numbers and text only."""

import io
import json
from collections.abc import Mapping, Sequence
from typing import Any, Final

import h5py
import numpy as np
from numpy.typing import NDArray

from .dataset import Advice, ColumnSummary, CurrentStep, Provenance
from .variables import Variable, variables

_TEXT: Final = h5py.string_dtype(encoding="utf-8")


def to_hdf5(advice: Advice) -> bytes:
    """Write an advice as an HDF5 file image.

    Every variable has units and a long name, every dimension a scale; numbers that do not exist are
    NaN, text that does not exist is empty. Where the advice comes from stands in the attributes of
    the file.

    Parameters
    ----------
    advice : Advice
        The advice.

    Returns
    -------
    bytes
        The file.
    """
    return hdf5_image(_attributes(advice), variables(advice))


def hdf5_image(attributes: Mapping[str, Any], found: Sequence[Variable]) -> bytes:
    """Write variables as an HDF5 file image.

    Parameters
    ----------
    attributes : mapping
        Attributes of the file: text and numbers.
    found : sequence of Variable
        The variables; every dimension gets a scale, a plain count where none of them is its
        coordinate.

    Returns
    -------
    bytes
        The file.
    """
    image = io.BytesIO()
    with h5py.File(image, "w") as file:
        for name, value in attributes.items():
            file.attrs[name] = value
        _write_scales(file, found)
        for variable in found:
            if variable.name not in file:
                dataset = _write(file, variable)
                for axis, dimension in enumerate(variable.dimensions):
                    dataset.dims[axis].attach_scale(file[dimension])
    return image.getvalue()


def _write_scales(file: h5py.File, found: Sequence[Variable]) -> None:
    """Make the scale of every dimension: its coordinate, or a plain count where it has none."""
    by_name = {variable.name: variable for variable in found}
    lengths = {d: n for v in found for d, n in zip(v.dimensions, _shape(v), strict=True)}
    for dimension, length in lengths.items():
        counted = Variable(
            dimension, (dimension,), "1", f"{dimension} counted", range(length), "int"
        )
        _write(file, by_name.get(dimension, counted)).make_scale(dimension)


def _write(file: h5py.File, variable: Variable) -> h5py.Dataset:
    array = _array(variable)
    dataset = file.create_dataset(variable.name, data=array, dtype=array.dtype)
    dataset.attrs["long_name"] = variable.long_name
    dataset.attrs["units"] = variable.units or "1"
    if variable.kind == "flag":
        dataset.attrs["flag_values"] = np.array([0, 1], dtype=np.int8)
        dataset.attrs["flag_meanings"] = "false true"
    return dataset


def _shape(variable: Variable) -> tuple[int, ...]:
    return _array(variable).shape


def _array(variable: Variable) -> NDArray[Any]:
    values = list(variable.values)
    match variable.kind:
        case "text":
            return np.array([value or "" for value in values], dtype=_TEXT)
        case "int":
            return np.array(values, dtype=np.int64)
        case "flag":
            return np.array(values, dtype=np.int8)
        case _:
            return np.array(values, dtype=np.float64)


def _attributes(advice: Advice) -> dict[str, Any]:
    attributes = {
        **origin(advice.title, advice.column, advice.provenance),
        "caution": advice.caution,
        "wind_note": advice.wind_note or "",
        "best": -1 if advice.best is None else advice.best,
    }
    return attributes | _current(advice.current)


def origin(title: str, column: ColumnSummary, provenance: Provenance) -> dict[str, Any]:
    """Say as attributes of a file which column an answer is about, and where it comes from."""
    attributes: dict[str, Any] = {
        "title": title,
        "source": f"levelstride {provenance.version}",
        "format_version": provenance.format_version,
        "created_utc": provenance.created_utc,
        "column_source": provenance.column_source,
        "column_sha256": provenance.column_sha256,
        "certified": provenance.certified,
        "layers": column.layers,
        "lowest_layer_m": column.lowest_layer_m,
        "thickest_layer_m": column.thickest_layer_m,
        "largest_ratio": column.largest_ratio,
        "top_m": column.top_m,
    }
    attributes |= _prefixed("constant", provenance.constants)
    return attributes | _prefixed("tolerance", provenance.tolerances)


def _prefixed(prefix: str, numbers: Mapping[str, float]) -> dict[str, float]:
    return {f"{prefix}_{name}": float(value) for name, value in numbers.items()}


def _current(current: CurrentStep | None) -> dict[str, Any]:
    if current is None:
        return {}
    share = current.share_of_limit
    return {
        "current_step_s": current.step_s,
        "current_tableau": current.limit.tableau,
        "current_split": current.limit.split,
        "current_share_of_limit": float("nan") if share is None else share,
        "current_stable": json.dumps(current.stable),
        "current_verdict": current.verdict,
    }
