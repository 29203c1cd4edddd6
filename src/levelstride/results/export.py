"""Records as JSON, CSV and plain text."""

import csv
import io
import json
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import fields, is_dataclass
from typing import Any, Final

from .cause import reason_and_cause
from .dataset import Advice, AdviceRow
from .headroom import UNITS
from .headroom_words import carried
from .wording import headroom, number, percent, step

_BITES: Final = (
    "wavenumber_per_m", "growth_per_s", "kind", "layer_lowest", "layer_highest", "bottom_m",
    "top_m", "wavelength_layers", "wavelength_m", "period_s", "shortest_horizontal",
    "steepest_horizontal", "shortest_vertical", "along_diagonal",
)  # fmt: skip
_COLUMNS: Final = (
    "tableau", "split", "advised_step_s", "advised_step_fraction", "stable_step_s", "unbounded",
    "scanned_to_s", "strict_step_s", "criterion", "binding", "steps_per_hour", "cost_per_hour",
    "explicit_evaluations_per_hour", "solves_per_hour", "exchanges_per_hour", "measured_s_per_hour",
    "frequency_error", "amplitude_change_per_period", "ambiguous_waves", "explicit_share", "gain",
    "efolding_s", "growth_per_step", "air", "lowest_slope_gradient", "path", "couples_columns",
    "cause", "safety",
)  # fmt: skip
_WORST: Final = ("wavenumber_per_m", "growth_below_per_s", "tolerated_per_s")
_NUMBERS: Final = re.compile(r"\[\n\s+(?:(?:[-+.\deE]+|null),\n\s+)*(?:[-+.\deE]+|null)\n\s+\]")
"""A list of numbers over several lines; text has no line feeds in JSON, so it is never meant."""


def to_plain(record: Any) -> Any:
    """Turn a record into dicts, lists and finite numbers.

    Parameters
    ----------
    record : Any
        A record, or mappings, sequences and scalars of such.

    Returns
    -------
    Any
        Plain data; a number that is not finite becomes None.
    """
    if is_dataclass(record) and not isinstance(record, type):
        return {f.name: to_plain(getattr(record, f.name)) for f in fields(record)}
    if isinstance(record, Mapping):
        return {str(key): to_plain(value) for key, value in record.items()}
    if isinstance(record, Sequence) and not isinstance(record, str | bytes):
        return [to_plain(value) for value in record]
    if isinstance(record, bool | int | str) or record is None:
        return record
    value = float(record)
    return value if math.isfinite(value) else None


def to_json(record: Any) -> str:
    """Write a record as JSON (RFC 8259), finite numbers only; a list of numbers is one line.

    Parameters
    ----------
    record : Any
        A record, or mappings, sequences and scalars of such.

    Returns
    -------
    str
        Indented text that ends with a line feed.

    Examples
    --------
    >>> print(to_json({"stable_step_s": float("nan"), "intervals_s": [600.0, 3600.0]}), end="")
    {
      "stable_step_s": null,
      "intervals_s": [ 600.0, 3600.0 ]
    }
    """
    text = json.dumps(to_plain(record), indent=2, ensure_ascii=False, allow_nan=False)
    return _NUMBERS.sub(lambda found: " ".join(found[0].split()), text) + "\n"


def to_csv(advice: Advice) -> str:
    """Write the rows of an advice as CSV, one line per tableau and splitting.

    Parameters
    ----------
    advice : Advice
        The advice.

    Returns
    -------
    str
        Comma-separated text with a heading line; nothing stands where there is no value.
    """
    lines = [_cells(row, advice.intervals_s) for row in advice.rows]
    headings = list(dict.fromkeys(name for line in lines for name in line))
    text = io.StringIO()
    writer = csv.DictWriter(text, headings, restval="", lineterminator="\n")
    writer.writeheader()
    writer.writerows(lines)
    return text.getvalue()


def _cells(row: AdviceRow, intervals_s: tuple[float, ...]) -> dict[str, str]:
    plain = to_plain(row)
    cells = {name: plain[name] for name in _COLUMNS}
    cells |= {f"bites_{name}": (plain["bites"] or {}).get(name) for name in _BITES}
    worst = None if row.certificate is None else row.certificate.worst_wave
    cells["certified_at_every_wave"] = worst is not None
    cells |= {f"certified_worst_{name}": getattr(worst, name, None) for name in _WORST}
    for at in row.stable_step_by_efolding:
        cells[f"stable_step_s_efolding_{at.efolding_s:.6g}_s"] = at.stable_step_s
    for interval, steps in zip(intervals_s, row.steps_per_interval, strict=False):
        cells[f"steps_per_{interval:.6g}_s"] = steps
    for quantity in UNITS if row.headroom is not None else ():
        room = row.headroom.of(quantity) if row.headroom is not None else None
        cells[f"headroom_{quantity}"] = None if room is None else room.carried
        cells[f"headroom_{quantity}_tried_to"] = None if room is None else room.tried_to
    return {name: cell(value) for name, value in cells.items()}


def cell(value: Any) -> str:
    """Write a value as a cell of CSV: nothing for None, every digit of a number."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    return repr(value) if isinstance(value, float) else str(value)


def to_text(advice: Advice) -> str:
    """Write the best row as ten plain lines to paste beside a configuration.

    Parameters
    ----------
    advice : Advice
        The advice.

    Returns
    -------
    str
        Ten lines.
    """
    provenance = advice.provenance
    lines = [
        ("advice", f"levelstride {provenance.version}, {provenance.created_utc}"),
        ("column", _one_line(advice.title)),
        *_best_lines(advice),
        ("hash", f"sha256 {provenance.column_sha256}"),
        ("caution", " Note: ".join(filter(None, (advice.caution, advice.wind_note)))),
    ]
    return "".join(f"{name + ':':<11}{text}\n" for name, text in lines)


def _best_lines(advice: Advice) -> list[tuple[str, str]]:
    if advice.best is None:
        names = ("step", "splitting", "tableau", "reason", "headroom", "accuracy")
        reason = advice.rows[0].binding if advice.rows else "nothing was tried"
        return [(n, reason if n == "reason" else "none can be advised") for n in names]
    row = advice.rows[advice.best]
    return [
        ("step", _step_line(row, advice.intervals_s)),
        ("splitting", f"{row.split} implicit" if row.path != "explicit" else row.split),
        ("tableau", row.tableau),
        ("reason", reason_and_cause(row)),
        ("headroom", _headroom_line(row)),
        (
            "accuracy",
            f"gravity waves: frequency error {percent(row.frequency_error)}, "
            f"amplitude change per period {percent(row.amplitude_change_per_period)}",
        ),
    ]


def _headroom_line(row: AdviceRow) -> str:
    if row.headroom is None:
        return headroom(row)
    return f"{headroom(row)}; it carries, each by itself: {carried(row.headroom)}"


def _step_line(row: AdviceRow, intervals_s: tuple[float, ...]) -> str:
    text = f"{step(row.advised_step_s, 6)} s"
    if row.advised_step_fraction and "/" in row.advised_step_fraction:
        text += f" (exactly {row.advised_step_fraction} s)"
    for interval, steps in zip(intervals_s, row.steps_per_interval, strict=False):
        text += f", {steps} per {number(interval, 6)} s"
    return text


def _one_line(text: str) -> str:
    return " ".join(text.split())
