"""Measured ascents: read, check, and turn into hydrostatic air.

Between rows temperature is linear in height. Below the first row and above the last one it keeps
the value of that row. An ascent by pressure alone gets its heights from hydrostatic balance with
the same linear temperature: rise = (R/g) L ln(p0/p1), L = (T1 - T0)/ln(T1/T0), upward and downward
from the ground, which lies where the pressure is the surface pressure.
"""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np

from ..constants import GAS_CONSTANT, GRAVITY
from .arrays import Array
from .csv_table import CsvTable, read_csv
from .problems import Problems, brief
from .profiles import PiecewiseLinearAir

FARTHEST_START: Final = 1000.0
"""An ascent that starts higher than this above the ground is not extended down [m]."""

SMALLEST_RISE: Final = 1e-3
"""Rows closer than this are duplicates [m]."""

_COLUMNS: Final = {
    "height_m": ("heights_m", 1.0, 0.0),
    "pressure_pa": ("pressures_pa", 1.0, 0.0),
    "pressure_hpa": ("pressures_pa", 100.0, 0.0),
    "temperature_k": ("temperatures_k", 1.0, 0.0),
    "temperature_c": ("temperatures_k", 1.0, 273.15),
    "wind_m_per_s": ("winds_m_per_s", 1.0, 0.0),
}
_RANGES: Final = {
    "heights_m": (-1000.0, 1e6, "metres above sea level"),
    "pressures_pa": (1e-3, 2e5, "Pa"),
    "temperatures_k": (100.0, 1500.0, "K"),
    "winds_m_per_s": (-500.0, 500.0, "m/s"),
}


@dataclass(frozen=True, slots=True, eq=False)
class Ascent:
    """The rows of an ascent, upward.

    Parameters
    ----------
    values : dict
        ``heights_m`` [m above sea level], ``pressures_pa`` [Pa], ``temperatures_k`` [K],
        ``winds_m_per_s`` [m/s], those that were given, each (nrow,).
    label : callable
        Name of a quantity and row (or -1 for the whole) as the user finds it in the file.
    file : str or None
        The CSV file, where there is one.
    """

    values: dict[str, Array]
    label: Callable[[str, int], str]
    file: str | None = None

    @property
    def wind(self) -> Array | None:
        """Wind of the rows (nrow,) [m/s], where given."""
        return self.values.get("winds_m_per_s")


def read_ascent(path: Path, where: str, problems: Problems) -> Ascent | None:
    """Read an ascent from a CSV file; columns in any order, unknown ones are ignored."""
    table = read_csv(path, problems, where)
    if table is None:
        return None
    values: dict[str, Array] = {}
    written: dict[str, str] = {}
    for name, (quantity, factor, offset) in _COLUMNS.items():
        if name not in table.columns:
            continue
        if quantity in written:
            problems.add(
                "line 1", f"both {written[quantity]} and {name}; keep one", file=table.file
            )
            return None
        values[quantity] = factor * table.columns[name] + offset
        written[quantity] = name
    ascent = Ascent(values, _csv_label(table, written), table.file)
    return ascent if _has_columns(ascent, table, problems) else None


def _csv_label(table: CsvTable, written: dict[str, str]) -> Callable[[str, int], str]:
    def label(quantity: str, row: int) -> str:
        name = written.get(quantity, quantity)
        return name if row < 0 else f"line {table.lines[row]}, {name}"

    return label


def _has_columns(ascent: Ascent, table: CsvTable, problems: Problems) -> bool:
    found = brief(", ".join(table.columns))
    vertical = {"heights_m", "pressures_pa"} & ascent.values.keys()
    if not vertical:
        problems.add(
            "line 1",
            f"no column height_m, pressure_pa or pressure_hpa; found: {found}; name the columns "
            "in the first line",
            file=table.file,
        )
    if "temperatures_k" not in ascent.values:
        problems.add(
            "line 1",
            f"no column temperature_k or temperature_c; found: {found}; name the columns in the "
            "first line",
            file=table.file,
        )
    return bool(vertical) and "temperatures_k" in ascent.values


def check_ascent(ascent: Ascent, problems: Problems) -> bool:
    """Check number of rows, missing values, units and order."""
    rows = ascent.values["temperatures_k"].size
    if len({column.size for column in ascent.values.values()}) > 1:
        counts = ", ".join(f"{name} {column.size}" for name, column in ascent.values.items())
        problems.add(
            ascent.label("temperatures_k", -1),
            f"lists of different length: {counts}; give one per row",
        )
        return False
    if rows < 2:
        problems.add(
            ascent.label("temperatures_k", -1),
            f"has {rows} rows; an ascent needs at least two",
            file=ascent.file,
        )
        return False
    checks = [_check_range(ascent, quantity, problems) for quantity in ascent.values]
    if not all(checks):
        return False
    vertical = [name for name in ("heights_m", "pressures_pa") if name in ascent.values]
    checks = [_check_order(ascent, name, problems) for name in vertical]
    by_pressure = "heights_m" not in ascent.values
    return all(checks) and (not by_pressure or _check_rises(ascent, problems))


def _check_range(ascent: Ascent, quantity: str, problems: Problems) -> bool:
    values = ascent.values[quantity]
    lowest, highest, unit = _RANGES[quantity]
    missing = np.flatnonzero(~np.isfinite(values))
    if missing.size:
        problems.add_many(
            [ascent.label(quantity, int(i)) for i in missing],
            "value missing or not a finite number; fill it or remove the row",
            file=ascent.file,
        )
        return False
    outside = np.flatnonzero((values < lowest) | (values > highest))
    largest = float(np.max(values))
    if quantity == "pressures_pa" and 20.0 < largest < 2000.0:
        problems.add_many(
            [ascent.label(quantity, i) for i in range(values.size)],
            "looks like hPa; multiply by 100 or name the CSV column pressure_hpa",
            float(values[0]),
            file=ascent.file,
        )
        return False
    if not outside.size:
        return True
    value = float(values[outside[0]])
    hint = "; correct the value"
    if quantity == "temperatures_k" and -130.0 < value < 70.0:
        hint = "; it looks like degrees Celsius: add 273.15 or name the CSV column temperature_c"
    problems.add_many(
        [ascent.label(quantity, int(i)) for i in outside],
        f"must lie between {lowest:g} and {highest:g} {unit}{hint}",
        value,
        file=ascent.file,
    )
    return False


def _check_order(ascent: Ascent, quantity: str, problems: Problems) -> bool:
    values = ascent.values[quantity]
    sign = 1.0 if quantity == "heights_m" else -1.0
    least = SMALLEST_RISE if quantity == "heights_m" else 0.0
    steps = sign * np.diff(values)
    same = np.flatnonzero(np.abs(steps) <= least)
    wrong = np.flatnonzero(steps < -least)
    if same.size:
        problems.add_many(
            [ascent.label(quantity, int(i) + 1) for i in same],
            "repeats the row before it; remove one of the two",
            float(values[same[0] + 1]),
            file=ascent.file,
        )
    if wrong.size:
        rule = "height must rise" if quantity == "heights_m" else "pressure must fall"
        turn = (
            "; the rows run downward: reverse them" if wrong.size == steps.size else "; sort them"
        )
        problems.add_many(
            [ascent.label(quantity, int(i) + 1) for i in wrong],
            f"rows are not sorted upward: {rule} from row to row{turn}",
            float(values[wrong[0] + 1]),
            file=ascent.file,
        )
    return not same.size and not wrong.size


def _check_rises(ascent: Ascent, problems: Problems) -> bool:
    rises = _rises(ascent.values["temperatures_k"], ascent.values["pressures_pa"])
    close = np.flatnonzero(rises < SMALLEST_RISE)
    if close.size:
        problems.add_many(
            [ascent.label("pressures_pa", int(i) + 1) for i in close],
            "repeats the row before it; remove one of the two",
            float(ascent.values["pressures_pa"][close[0] + 1]),
            file=ascent.file,
        )
    return not close.size


def _rises(temperatures: Array, pressures: Array) -> Array:
    """Rise from row to row with temperature linear in height, (nrow-1,) [m]."""
    x = np.diff(temperatures) / temperatures[:-1]
    mean = temperatures[:-1] * np.where(x == 0.0, 1.0, x / np.where(x == 0.0, 1.0, np.log1p(x)))
    return (GAS_CONSTANT / GRAVITY) * mean * -np.diff(np.log(pressures))


def ascent_air(
    ascent: Ascent,
    ground_m: float,
    surface_pressure_pa: float | None,
    where: str,
    problems: Problems,
) -> PiecewiseLinearAir | None:
    """Make hydrostatic air of a checked ascent.

    Parameters
    ----------
    ascent : Ascent
        The rows.
    ground_m : float
        Altitude of the ground [m].
    surface_pressure_pa : float or None
        Pressure at the ground [Pa]; None takes that of the ascent where it has heights and
        pressures, and 101325 otherwise.
    where : str
        Key path of the air state, for messages.
    problems : Problems
        Where mistakes are added.

    Returns
    -------
    PiecewiseLinearAir or None
        The nodes are the rows; None where ascent and ground do not meet.
    """
    temperatures = ascent.values["temperatures_k"]
    pressures = ascent.values.get("pressures_pa")
    heights = ascent.values.get("heights_m")
    surface = 101325.0 if surface_pressure_pa is None else surface_pressure_pa
    anchor = (ground_m, surface)
    if heights is None and pressures is not None:
        heights = np.concatenate([[0.0], np.cumsum(_rises(temperatures, pressures))])
        free = PiecewiseLinearAir(heights, temperatures, 0.0, float(pressures[0]))
        heights = heights + (ground_m - float(free.altitude_of(np.array([surface]))[0]))
    elif heights is not None and pressures is not None and surface_pressure_pa is None:
        anchor = (float(heights[0]), float(pressures[0]))
    by_pressure = surface if "heights_m" not in ascent.values else None
    if heights is None or not _meets_ground(heights, ground_m, where, by_pressure, problems):
        return None
    return PiecewiseLinearAir(heights, temperatures, *anchor)


def _meets_ground(
    heights: Array, ground_m: float, where: str, by_pressure: float | None, problems: Problems
) -> bool:
    """Check that the ground lies near or among the rows; ``by_pressure`` is the pressure there."""
    mend = (
        f"the ground lies at {ground_m:g} m: give terrain.surface_altitude_m"
        if by_pressure is None
        else f"the surface pressure is {by_pressure:g} Pa: give surface_pressure_pa"
    )
    if heights[0] > ground_m + FARTHEST_START:
        problems.add(
            where,
            f"the ascent starts {heights[0] - ground_m:.0f} m above the ground, more than "
            f"{FARTHEST_START:g} m; {mend} or add a row near the ground",
        )
        return False
    if heights[-1] <= ground_m:
        problems.add(
            where,
            f"the ascent ends {ground_m - heights[-1]:.0f} m below the ground; {mend} or take "
            "another ascent",
        )
        return False
    return True
