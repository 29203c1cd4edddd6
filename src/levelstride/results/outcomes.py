"""Many columns side by side: one line for each."""

import csv
import io
from collections.abc import Sequence
from dataclasses import fields, replace

from .dataset import Advice, ColumnOutcome
from .export import cell


def outcome(name: str, advice: Advice) -> ColumnOutcome:
    """Put an advice into one line among those of other columns.

    Parameters
    ----------
    name : str
        Name of the column among the others.
    advice : Advice
        Its advice.

    Returns
    -------
    ColumnOutcome
        The best row; without one, what binds in the first.
    """
    current = advice.current
    known = ColumnOutcome(
        name=name,
        source=advice.provenance.column_source,
        title=advice.title,
        layers=advice.column.layers,
        lowest_layer_m=advice.column.lowest_layer_m,
        top_m=advice.column.top_m,
        binding=advice.rows[0].binding if advice.rows else "nothing was tried",
        current_share_of_limit=None if current is None else current.share_of_limit,
        column_sha256=advice.provenance.column_sha256,
    )
    if advice.best is None:
        return known
    best = advice.rows[advice.best]
    return replace(
        known,
        tableau=best.tableau,
        split=best.split,
        advised_step_s=best.advised_step_s,
        advised_step_fraction=best.advised_step_fraction,
        stable_step_s=best.stable_step_s,
        cost_per_hour=best.cost_per_hour,
        binding=best.binding,
    )


def to_summary_csv(outcomes: Sequence[ColumnOutcome]) -> str:
    """Write many columns as CSV, one line each.

    Parameters
    ----------
    outcomes : sequence of ColumnOutcome
        The columns.

    Returns
    -------
    str
        Comma-separated text with a heading line; nothing stands where there is no value.
    """
    names = [field.name for field in fields(ColumnOutcome)]
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(names)
    writer.writerows([cell(getattr(one, name)) for name in names] for one in outcomes)
    return text.getvalue()
