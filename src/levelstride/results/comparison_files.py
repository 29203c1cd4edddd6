"""The files of a comparison."""

import csv
import io
from collections.abc import Sequence
from pathlib import Path
from typing import Any, Final

from .atomic import write_folder
from .comparison import ComparedRow, Comparison
from .comparison_wording import compared_at, numbered, pair, what_dominates
from .export import cell, to_json
from .store import hdf5_image, origin
from .variables import Variable
from .wording import number, percent, step

_ROW: Final = (
    ("tableau", "tableau", "", "name of the IMEX tableau", "text"),
    ("split", "split", "", "terms treated implicitly", "text"),
    ("stable_step_s", "stable_step_s", "s", "stable step", "float"),
    ("unbounded", "unbounded", "1", "whether nothing bites", "flag"),
    ("scanned_to_s", "scanned_to_s", "s", "longest step scanned", "float"),
    ("criterion", "criterion", "", "criteria that bind the stable step", "text"),
    ("stable_reason", "stable_reason", "", "what binds the stable step", "text"),
    ("air", "air", "", "air state that binds", "text"),
    ("couples_columns", "couples_columns", "1", "whether the solve couples columns", "flag"),
    ("path", "path", "", "how the implicit part is solved", "text"),
    ("certified", "certified", "", "how the stable step was checked", "text"),
    ("accurate_step_s", "accurate_step_s", "s", "longest accurate and stable step", "float"),
    ("accurate_reason", "accurate_reason", "", "what binds the accurate step", "text"),
    ("advised_step_s", "advised_step_s", "s", "advised step", "float"),
    ("advised_step_fraction", "advised_step_fraction", "", "the same as a fraction", "text"),
    ("advised_reason", "advised_reason", "", "what binds the advised step", "text"),
    ("step_s", "step_s", "s", "step at which the row is compared", "float"),
    ("step_is_stable", "errors.stable", "1", "whether that step is stable", "flag"),
    (
        "frequency_error", "errors.frequency_error", "1",
        "largest frequency error of a resolved gravity wave at that step", "float",
    ),
    (
        "amplitude_change_per_period", "errors.amplitude_change_per_period", "1",
        "largest change of amplitude of such a wave per period", "float",
    ),
    (
        "amplitude_change_per_hour", "errors.amplitude_change_per_hour", "1",
        "largest change of amplitude of such a wave per hour", "float",
    ),
    (
        "worst_wavelength_m", "errors.worst_wave.wavelength_m", "m",
        "horizontal wavelength of the worst of these waves", "float",
    ),
    (
        "worst_vertical_order", "errors.worst_wave.vertical_order", "1",
        "vertical order of the worst of these waves", "float",
    ),
    (
        "worst_period_s", "errors.worst_wave.period_s", "s",
        "period of the worst of these waves", "float",
    ),
    ("ambiguous_waves", "errors.ambiguous", "1", "such waves that are not judged", "float"),
    (
        "spurious_growth_per_s", "errors.spurious_growth_per_s", "s-1",
        "largest growth of the step beyond that of the column", "float",
    ),
    (
        "sound_change_per_period", "errors.sound.mean_change_per_period", "1",
        "mean change of amplitude of sound per period", "float",
    ),
    (
        "sound_change_per_hour", "errors.sound.mean_change_per_hour", "1",
        "mean change of amplitude of sound per hour", "float",
    ),
    (
        "packet_error", "errors.packet_error", "1",
        "relative error of a packet of gravity waves after an hour", "float",
    ),
    ("problem", "errors.problem", "", "why there are no errors", "text"),
    ("steps_per_hour", "steps_per_hour", "h-1", "steps per simulated hour", "float"),
    (
        "explicit_evaluations_per_hour", "explicit_evaluations_per_hour", "h-1",
        "explicit evaluations per simulated hour", "float",
    ),
    ("solves_per_hour", "solves_per_hour", "h-1", "implicit solves per simulated hour", "float"),
    (
        "exchanges_per_hour", "exchanges_per_hour", "h-1",
        "exchanges with neighbours per simulated hour", "float",
    ),
    ("cost_per_hour", "cost_per_hour", "h-1", "weighted cost per simulated hour", "float"),
    (
        "measured_s_per_hour", "measured_s_per_hour", "s h-1",
        "measured time per simulated hour, one wave", "float",
    ),
    (
        "error_at_equal_cost", "error_at_equal_cost", "1",
        "packet error at the cost at which all rows are compared", "float",
    ),
    (
        "step_at_equal_cost_s", "step_at_equal_cost_s", "s",
        "step that this cost pays for", "float",
    ),
)  # fmt: skip
"""Columns of the CSV and variables of the HDF5 file: name, where it is, units, long name, kind."""


def write_comparison(found: Comparison, folder: Path) -> tuple[Path, ...]:
    """Write ``compare.json``, ``compare.csv``, ``compare.txt`` and ``compare.h5`` into a folder.

    Parameters
    ----------
    found : Comparison
        The answer.
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
            "compare.json": to_json(found).encode(),
            "compare.csv": comparison_csv(found).encode(),
            "compare.txt": comparison_text(found).encode(),
            "compare.h5": comparison_hdf5(found),
        },
    )


def comparison_csv(found: Comparison) -> str:
    """Write the rows as CSV, one line per tableau and splitting."""
    text = io.StringIO()
    names = [name for name, *_ in _ROW]
    writer = csv.DictWriter(text, [*names, "dominated_by"], lineterminator="\n")
    writer.writeheader()
    for row in found.rows:
        cells = {name: cell(_value(row, path)) for name, path, *_ in _ROW}
        writer.writerow(cells | {"dominated_by": what_dominates(found, row)})
    return text.getvalue()


def _value(row: ComparedRow, path: str) -> Any:
    """Follow names with dots between them; None where one leads nowhere."""
    at: Any = row
    for name in path.split("."):
        at = getattr(at, name, None)
    return at


def comparison_text(found: Comparison) -> str:
    """Write the answer as plain lines to paste beside a configuration."""
    provenance, weights = found.provenance, found.weights
    lines = [
        ("compare", f"levelstride {provenance.version}, {provenance.created_utc}"),
        ("column", " ".join(found.title.split())),
        ("step", compared_at(found)),
        (
            "weights",
            f"{number(weights.explicit)} an explicit evaluation, {number(weights.solve)} a solve, "
            f"{number(weights.exchange)} an exchange",
        ),
    ]
    for i, row in enumerate(found.rows):
        lines.append((numbered([i]), _row_line(found, row)))
    lines.append(("verdict", found.verdict))
    lines += [("note", note) for note in found.notes]
    lines += [("hash", f"sha256 {provenance.column_sha256}"), ("caution", found.caution)]
    return "".join(f"{name + ':':<11}{text}\n" for name, text in lines)


def _row_line(found: Comparison, row: ComparedRow) -> str:
    stable = "no limit" if row.unbounded else f"{step(row.stable_step_s)} s"
    parts = [f"{pair(row)}: stable step {stable} ({row.stable_reason})"]
    if row.accurate_step_s is None or row.accurate_reason != row.stable_reason:
        parts.append(f"accurate to {step(row.accurate_step_s)} s ({row.accurate_reason})")
    errors = row.errors
    if errors is None:
        return "; ".join([*parts, "not compared"])
    if errors.problem is not None or not errors.stable:
        why = errors.problem or "unstable"
        return "; ".join([*parts, f"at {number(errors.step_s)} s: {why}"])
    parts.append(
        f"at {step(errors.step_s)} s: frequency error {percent(errors.frequency_error)}, amplitude "
        f"change per period {percent(errors.amplitude_change_per_period)}, cost "
        f"{number(row.cost_per_hour)} per hour"
    )
    if row.error_at_equal_cost is not None:
        parts.append(
            f"error {percent(row.error_at_equal_cost)} at {number(found.equal_cost_per_hour)} "
            "per hour"
        )
    if row.dominated_by:
        parts.append(f"beaten by {what_dominates(found, row)}")
    return "; ".join(parts)


def comparison_hdf5(found: Comparison) -> bytes:
    """Write a comparison as an HDF5 file image, as ``to_hdf5`` does with an advice."""
    rows = found.rows
    variables = [
        Variable("row", ("row",), "1", "row, the cheapest first", range(len(rows)), "int"),
        *(
            Variable(name, ("row",), units, text, [_or_false(_value(r, p), k) for r in rows], k)
            for name, p, units, text, k in _ROW
        ),
        *_ragged("curve", rows, _CURVE),
        *_ragged("dominated_by", rows, _DOMINATED),
    ]
    return hdf5_image(_attributes(found), [one for one in variables if len(one.values)])


def _or_false(value: Any, kind: str) -> Any:
    return bool(value) if kind == "flag" else value


_CURVE: Final = (
    ("step_s", "s", "step", "float"),
    ("error", "1", "relative error of the packet after an hour", "float"),
    ("cost_per_hour", "h-1", "weighted cost per simulated hour", "float"),
)
_DOMINATED: Final = (
    ("row", "1", "row that is cheaper and more accurate", "int"),
    ("step_s", "s", "its step at which it is", "float"),
    ("cost_per_hour", "h-1", "its cost there", "float"),
    ("error", "1", "its packet error there", "float"),
)


def _ragged(
    name: str, rows: Sequence[ComparedRow], columns: Sequence[tuple[str, str, str, str]]
) -> list[Variable]:
    """Lists of different lengths per row, one after the other with the row each belongs to."""
    items = [(i, item) for i, row in enumerate(rows) for item in getattr(row, name)]
    owner = Variable(
        f"{name}_of", (name,), "1", f"row that this {name} belongs to", [i for i, _ in items], "int"
    )
    return [
        owner,
        *(
            Variable(f"{name}_{n}", (name,), units, text, [getattr(x, n) for _, x in items], kind)
            for n, units, text, kind in columns
        ),
    ]


def _attributes(found: Comparison) -> dict[str, Any]:
    cost, weights = found.equal_cost_per_hour, found.weights
    return {
        **origin(found.title, found.column, found.provenance),
        "compared_at": compared_at(found),
        "weight_explicit": weights.explicit,
        "weight_solve": weights.solve,
        "weight_exchange": weights.exchange,
        "equal_cost_per_hour": float("nan") if cost is None else cost,
        "equal_cost_reason": found.equal_cost_reason,
        "cheapest": -1 if found.cheapest is None else found.cheapest,
        "most_accurate": -1 if found.most_accurate is None else found.most_accurate,
        "verdict": found.verdict,
        "notes": "; ".join(found.notes),
        "caution": found.caution,
    }
