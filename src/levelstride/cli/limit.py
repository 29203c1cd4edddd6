"""``levelstride limit``: how long a step does one tableau and splitting carry?"""

import sys
from typing import Annotated

from cyclopts import Parameter

from levelstride.cli.console import progress
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.limit_table import show_limit
from levelstride.cli.options import (
    Certify,
    ColumnFile,
    Efolding,
    Json,
    check_efolding,
    check_splitting,
)


def limit(
    column: ColumnFile,
    /,
    *,
    tableau: Annotated[str, Parameter(help="IMEX tableau, as published or bare.")],
    split: Annotated[
        str | None,
        Parameter(help="Splitting, e.g. sound+buoyancy; that of the column file by default."),
    ] = None,
    efolding: Efolding = None,
    certify: Certify = False,
    no_what_if: Annotated[
        bool,
        Parameter(
            help="Leave out what takes most of the time: the step with every explicit term "
            "implicit or absent, and of every air state by itself."
        ),
    ] = False,
    json: Json = False,
) -> None:
    """Find the longest stable step of one tableau and splitting, and what bites first."""
    from levelstride.column.read import load
    from levelstride.results.export import to_json
    from levelstride.studies.limit import limit as find_limit

    read = load(column)
    check_splitting(split, read, column)
    check_efolding(efolding)
    prepare_kernels()
    what = f"{tableau} with {split or 'its [split]'}"
    with progress(f"{read.title}: {what}") as report:
        found = find_limit(
            read,
            tableau=tableau,
            split=split,
            efolding_s=efolding,
            certify=certify,
            what_if=not no_what_if,
            progress=lambda done, total, on: report(done, total, f"{what}, {on}"),
        )
    if json:
        sys.stdout.write(to_json(found))
    else:
        show_limit(read.title, found)
