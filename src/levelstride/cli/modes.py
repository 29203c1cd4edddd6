"""``levelstride modes``: which waves does the column carry, and what distorts them?"""

import sys
from math import pi
from pathlib import Path
from typing import Annotated

from cyclopts import Parameter

from levelstride.cli.console import progress
from levelstride.cli.executors import executor_for, usable_workers
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.modes_table import show_modes
from levelstride.cli.options import Cluster, ColumnFile, Json


def modes(
    column: ColumnFile,
    /,
    *,
    wavelength: Annotated[
        list[float] | None,
        Parameter(
            help="Horizontal wavelength along an axis [m], may be repeated; by default 128, 32 "
            "and 8 grid spacings and that of the largest gradient."
        ),
    ] = None,
    wavenumber: Annotated[
        list[float] | None,
        Parameter(help="Horizontal wavenumber along an axis [1/m], may be repeated."),
    ] = None,
    kind: Annotated[
        list[str] | None,
        Parameter(
            help="sound, Lamb, gravity, computational or vortical, may be repeated; all by default."
        ),
    ] = None,
    every: Annotated[
        bool, Parameter(help="Show every vertical order and not a few; files hold all.")
    ] = False,
    no_grids: Annotated[
        bool,
        Parameter(
            help="Leave out the comparison with layers split in four, under both staggerings."
        ),
    ] = False,
    step: Annotated[
        float | None,
        Parameter(help="A step [s]: also show what it does to the modes of all sampled waves."),
    ] = None,
    tableau: Annotated[str | None, Parameter(help="With --step: the IMEX tableau.")] = None,
    split: Annotated[
        str | None,
        Parameter(help="With --step: the splitting; that of the column file by default."),
    ] = None,
    out: Annotated[
        Path | None, Parameter(help="Folder for modes.json, .csv and .h5; made if missing.")
    ] = None,
    workers: Annotated[
        int | None, Parameter(help="Processes to share the work; one by default.")
    ] = None,
    cluster: Cluster = None,
    json: Json = False,
) -> None:
    """Show the normal modes of a column, and how far levels and a step distort them."""
    from levelstride.column.read import load
    from levelstride.results.atomic import check_folder
    from levelstride.results.export import to_json
    from levelstride.results.modes_files import write_modes
    from levelstride.studies.modes import modes as find_modes

    wavenumbers = _wavenumbers(wavelength, wavenumber)
    usable_workers(workers, cluster)
    read = load(column)
    if out is not None:
        check_folder(out)
    if step is not None:
        prepare_kernels()
    shared = 0 if workers is None and cluster is None else 2
    with (
        progress(f"{read.title}: starting") as report,
        executor_for(workers, cluster, shared * len(read.airs)) as executor,
    ):
        found = find_modes(
            read,
            wavenumbers_per_m=wavenumbers,
            kinds=kind,
            grids=not no_grids,
            step_s=step,
            tableau=tableau,
            split=split,
            executor=executor,
            progress=report,
        )
    written = () if out is None else write_modes(found, out)
    if json:
        sys.stdout.write(to_json(found))
    else:
        show_modes(found, written, every=every)


def _wavenumbers(
    wavelengths: list[float] | None, wavenumbers: list[float] | None
) -> list[float] | None:
    """Both ways to name waves as wavenumbers; None where neither is used."""
    from levelstride.errors import InputError

    bad = [length for length in wavelengths or () if not 0.0 < length < 1e12]
    if bad:
        raise InputError(
            *(f"--wavelength {length:g}: must be a length above 0 [m]" for length in bad)
        )
    found = [2 * pi / length for length in wavelengths or ()] + list(wavenumbers or ())
    return found or None
