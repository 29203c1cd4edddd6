"""``levelstride calibrate``: which assumptions explain the steps that a real model carries?"""

import sys
from collections.abc import Sequence
from math import isfinite
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

from cyclopts import Parameter

from levelstride.cli.calibration_table import show_calibration
from levelstride.cli.console import progress, say_errors
from levelstride.cli.executors import executor_for, usable_workers
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.options import (
    Cluster,
    ColumnFile,
    Efolding,
    Json,
    Workers,
    check_efolding,
    check_splitting,
)

if TYPE_CHECKING:
    from levelstride.column.column import Column
    from levelstride.studies.calibrate import Observed

ABOUT = 60
"""Searches that varying every assumption takes, or more: never fewer than workers."""


def calibrate(
    column: ColumnFile,
    /,
    *,
    held: Annotated[
        list[str] | None,
        Parameter(
            help="Step that the model survived [s], may be repeated; STEP=FILE for another column."
        ),
    ] = None,
    failed: Annotated[
        list[str] | None,
        Parameter(
            help="Step that the model lost [s], may be repeated; STEP=FILE for another column."
        ),
    ] = None,
    observations: Annotated[
        Path | None, Parameter(help="TOML file of more such steps, for many columns.")
    ] = None,
    tableau: Annotated[str, Parameter(help="The model's IMEX tableau, as published or bare.")],
    split: Annotated[
        str | None,
        Parameter(help="Its splitting, e.g. sound+buoyancy; that of the column file by default."),
    ] = None,
    efolding: Efolding = None,
    vary: Annotated[
        list[str] | None,
        Parameter(
            help="Assumption to vary, may be repeated: reference, wind, slope, once-per-step, "
            "growth-tolerance; all by default."
        ),
    ] = None,
    out: Annotated[
        Path | None, Parameter(help="Calibration file to write, for advise --calibration.")
    ] = None,
    workers: Workers = None,
    cluster: Cluster = None,
    json: Json = False,
) -> int:
    """Compare steps that a model survived or lost with the linear limit."""
    from levelstride.column.read import load
    from levelstride.results.calibration_file import check_calibration_file, write_calibration
    from levelstride.results.export import to_json
    from levelstride.studies.calibrate import calibrate as find_calibration

    usable_workers(workers, cluster)
    read = load(column)
    observed = _observed(read, held, failed, observations)
    check_splitting(split, read, column)
    check_efolding(efolding)
    if out is not None:
        check_calibration_file(out)
    prepare_kernels()
    with (
        progress(f"{read.title}: starting") as report,
        executor_for(workers, cluster, ABOUT) as executor,
    ):
        found = find_calibration(
            observed,
            tableau=tableau,
            split=split,
            efolding_s=efolding,
            vary=vary,
            executor=executor,
            progress=report,
        )
    written = out if found.safety_factor is not None else None
    if written is not None:
        write_calibration(found, written)
    if json:
        sys.stdout.write(to_json(found))
    else:
        show_calibration(found, written)
    if out is not None and written is None:
        say_errors(f"levelstride: --out {out}: not written, as there is no one safety factor")
        return 3
    return 0


def _observed(
    read: "Column",
    held: Sequence[str] | None,
    failed: Sequence[str] | None,
    observations: Path | None,
) -> "list[Observed]":
    """Put together what was observed; every column file is read once."""
    from levelstride.column.observations import read_observations
    from levelstride.column.read import load
    from levelstride.errors import InputError
    from levelstride.studies.calibrate import Observed

    problems: list[str] = []
    columns: dict[str, Column | None] = {}

    def column_of(path: str | None) -> "Column | None":
        if path is None:
            return read
        if path not in columns:
            try:
                columns[path] = load(path)
            except InputError as error:
                problems.extend(error.problems)
                columns[path] = None
        return columns[path]

    found = []
    for option, given in (("--held", held or []), ("--failed", failed or [])):
        for word in given:
            step, named, path = word.partition("=")
            step_s = _step(step)
            if step_s is None or (named and not path):
                problems.append(
                    f"{option} {word}: must be a step in s above 0, or STEP=FILE for another column"
                )
                continue
            seen = column_of(path or None)
            if seen is not None:
                steps = {"held_s" if option == "--held" else "failed_s": (step_s,)}
                found.append(Observed(seen, **steps))
    try:
        for one in read_observations(observations) if observations is not None else ():
            seen = column_of(one.column)
            if seen is not None:
                found.append(Observed(seen, one.held_s, one.failed_s))
    except InputError as error:
        problems += error.problems
    if not found and not problems:
        problems.append(
            "calibrate: no step was observed; give --held and --failed, or --observations"
        )
    if problems:
        raise InputError(*dict.fromkeys(problems))
    return found


def _step(text: str) -> float | None:
    try:
        step_s = float(text)
    except ValueError:
        return None
    return step_s if isfinite(step_s) and 0.0 < step_s < 1e6 else None
