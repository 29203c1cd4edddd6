"""``levelstride stretch``: how far can the levels be stretched under a step?"""

import sys
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Literal

from cyclopts import Parameter

from levelstride.cli.console import progress
from levelstride.cli.executors import executor_for, usable_workers
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.options import Cluster, ColumnFile, Efolding, Json, Out, Workers
from levelstride.cli.stretch_table import show_stretch

Keep = Literal["layers-and-lid", "ratio", "lowest-layers", "upper-levels"]


def stretch(
    column: ColumnFile,
    /,
    *,
    target_step: Annotated[
        float | None,
        Parameter(help="Step to be carried [s]; the step advised for the set as it is by default."),
    ] = None,
    keep: Annotated[
        Keep,
        Parameter(
            help="What stays: the number of layers and the lid; the ratio of neighbouring layers; "
            "the lowest layers, with a moving lid; or the upper levels, with layers added below."
        ),
    ] = "layers-and-lid",
    lowest: Annotated[
        int | None,
        Parameter(
            help="How many lowest layers lowest-layers keeps and upper-levels makes anew; a third."
        ),
    ] = None,
    tableaux: Annotated[
        list[str] | None,
        Parameter(help="Tableau to try, may be repeated; those of the column file, or three."),
    ] = None,
    splits: Annotated[
        list[str] | None,
        Parameter(help="Splitting to try, may be repeated; those of the column file, or two."),
    ] = None,
    points: Annotated[int, Parameter(help="Number of level sets on the curve.")] = 24,
    efolding: Efolding = None,
    lowest_slope_gradient: Annotated[
        Literal["half", "full"] | None,
        Parameter(help="Slope gradient of the lowest layer; that of the column file by default."),
    ] = None,
    layers: Annotated[
        bool, Parameter(help="Also find which layers of the set as it is cost the step.")
    ] = False,
    mend: Annotated[
        bool, Parameter(help="Also find the nearest level set that carries the target.")
    ] = False,
    keep_lowest: Annotated[
        bool, Parameter(help="With --mend: the lowest layer keeps its thickness.")
    ] = False,
    largest_ratio: Annotated[
        float | None,
        Parameter(help="With --mend: largest thickness ratio of neighbouring layers allowed."),
    ] = None,
    out: Out = Path("stretch"),
    workers: Workers = None,
    cluster: Cluster = None,
    json: Json = False,
) -> None:
    """Stretch the levels and find how far a step goes with them, and what limits it."""
    from levelstride.column.read import load
    from levelstride.results.atomic import check_folder
    from levelstride.results.export import to_json
    from levelstride.results.stretch_files import write_stretch
    from levelstride.studies.level_files import level_files
    from levelstride.studies.stretch import stretch as find_stretch

    _check_mending(keep_lowest, largest_ratio, mend=mend)
    usable_workers(workers, cluster)
    read = load(column)
    if lowest_slope_gradient is not None:
        read = replace(read, lowest_slope_gradient=lowest_slope_gradient)
    check_folder(out)
    prepare_kernels()
    with (
        progress(f"{read.title}: starting") as report,
        executor_for(workers, cluster, max(points, 1)) as executor,
    ):
        found = find_stretch(
            read,
            tableaux=tableaux,
            splits=splits,
            target_step_s=target_step,
            keep=keep,
            lowest=lowest,
            points=points,
            efolding_s=efolding,
            layers=layers,
            mend=mend,
            keep_lowest=keep_lowest,
            largest_ratio=largest_ratio,
            executor=executor,
            progress=report,
        )
    written = write_stretch(found, out, level_files(read, found))
    if json:
        sys.stdout.write(to_json(found))
    else:
        show_stretch(found, written)


def _check_mending(keep_lowest: bool, largest_ratio: float | None, *, mend: bool) -> None:
    """Refuse options that go with --mend where it is not given."""
    from levelstride.errors import InputError

    problems = []
    if keep_lowest and not mend:
        problems.append("--keep-lowest: goes with --mend only; add it or leave this out")
    if largest_ratio is not None and not mend:
        problems.append("--largest-ratio: goes with --mend only; add it or leave this out")
    if largest_ratio is not None and not 1.0 <= largest_ratio < 1e6:
        problems.append(f"--largest-ratio {largest_ratio:g}: must be at least 1")
    if problems:
        raise InputError(*problems)
