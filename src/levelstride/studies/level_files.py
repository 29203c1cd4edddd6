"""Level sets of a stretch as files: column files and CSV."""

import re

import numpy as np

from levelstride.column.column import Column
from levelstride.column.column_file import levels_csv, to_toml
from levelstride.column.variants import with_levels
from levelstride.results.stretching import Stretch, StretchRow
from levelstride.results.wording import CAUTION, number, step


def level_files(column: Column, found: Stretch) -> dict[str, str]:
    """Write down the level sets that an answer names.

    Parameters
    ----------
    column : Column
        The column that was stretched.
    found : Stretch
        The answer.

    Returns
    -------
    dict of str to str
        Contents by file name: for every row the most stretched set that carries the target
        (``stretched``) and, if it was asked for and found, the mended one (``mended``), as a column
        file and as CSV. With several rows their numbers, from 1, and methods are in the names.
    """
    files: dict[str, str] = {}
    for place, row in enumerate(found.rows):
        ending = _ending(place, row) if len(found.rows) > 1 else ""
        if row.interfaces_m:
            what = f"stretched to a lowest layer of {number(row.thinnest_lowest_layer_m)} m"
            files |= _files(column, row, row.interfaces_m, f"stretched{ending}", what)
        if row.mended is not None and row.mended.carried:
            what = "mended" if not row.mended.unchanged else "as it was"
            files |= _files(column, row, row.mended.interfaces_m, f"mended{ending}", what)
    return files


def _ending(place: int, row: StretchRow) -> str:
    tableau = re.sub(r"[^a-z0-9]+", "", row.tableau.lower())
    split = re.sub(r"[^a-z0-9]+", "-", row.split.lower())
    return f"_{place + 1}_{tableau}_{split}"


def _files(
    column: Column, row: StretchRow, interfaces_m: tuple[float, ...], name: str, what: str
) -> dict[str, str]:
    remark = (
        f"{column.title}: {what}\n"
        f"It carries {step(row.target_step_s)} s with {row.tableau} and {row.split}.\n"
        "Heights are those above the ground of this column; nothing compresses them further.\n"
        f"{CAUTION}"
    )
    before = column.levels.interfaces_m
    beside = before.tolist() if before.size == len(interfaces_m) else None
    return {
        f"{name}.toml": to_toml(with_levels(column, np.array(interfaces_m)), remark),
        f"{name}.csv": levels_csv(interfaces_m, beside),
    }
