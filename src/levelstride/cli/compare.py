"""``levelstride compare``: which tableau and splitting is worth its cost?"""

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

from cyclopts import Parameter

from levelstride.cli.compare_table import show_comparison
from levelstride.cli.executors import executor_for, usable_workers
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.map_table import show_map
from levelstride.cli.options import Cluster, ColumnFile, Json, Out, Workers
from levelstride.cli.resuming import Resumable

if TYPE_CHECKING:
    from levelstride.column.column import Column
    from levelstride.results.comparison import Weights


def compare(
    column: ColumnFile,
    /,
    *,
    tableaux: Annotated[
        list[str] | None,
        Parameter(
            help="Tableau to compare, may be repeated; those of the column file by default, or "
            "ARS(2,3,2), ARS(3,4,3) and IMEX-SSP2(2,3,2) if it lists none."
        ),
    ] = None,
    splits: Annotated[
        list[str] | None,
        Parameter(
            help="Splitting to compare, may be repeated; those of the column file by default, or "
            "sound+buoyancy and sound+buoyancy+divergence if it names none."
        ),
    ] = None,
    step: Annotated[
        float | None,
        Parameter(help="Step to compare all at [s]; the one advised for each by default."),
    ] = None,
    weights: Annotated[
        str | None,
        Parameter(
            help="Costs of an explicit evaluation, a solve and an exchange, as 1/1/0.5; those of "
            "the column file by default."
        ),
    ] = None,
    equal_cost: Annotated[
        float | None,
        Parameter(
            help="Weighted cost per simulated hour at which errors are compared [1/h]; that of "
            "the dearest row up to four times the cheapest by default."
        ),
    ] = None,
    work_precision: Annotated[
        bool,
        Parameter(
            negative="--no-work-precision",
            help="Carry packets of gravity waves, which errors at equal cost come from.",
        ),
    ] = True,
    vary: Annotated[
        list[str] | None,
        Parameter(
            help="Map steps and errors over a number of the column file instead of comparing: "
            "KEY=FROM:TO:COUNT, or KEY=FROM:TO:COUNT:log; once or twice."
        ),
    ] = None,
    lowest_slope_gradient: Annotated[
        Literal["half", "full"] | None,
        Parameter(help="Slope gradient of the lowest layer; that of the column file by default."),
    ] = None,
    out: Out = Path("compare"),
    workers: Workers = None,
    cluster: Cluster = None,
    json: Json = False,
) -> None:
    """Put tableaux and splittings side by side: stable step, accuracy, damping and cost."""
    from dataclasses import replace

    from levelstride.column.read import load

    usable_workers(workers, cluster)
    if vary:
        _check_map(weights, equal_cost, work_precision=work_precision)
    costs = None if weights is None else _weights(weights)
    read = load(column)
    if lowest_slope_gradient is not None:
        read = replace(read, lowest_slope_gradient=lowest_slope_gradient)
    work = _Work(read, tableaux, splits, step, out, workers, cluster, json)
    if vary:
        work.map(vary)
    else:
        work.compare(costs, equal_cost, work_precision=work_precision)


class _Work:
    """What is done with a column: carried out, written, shown."""

    def __init__(
        self,
        column: "Column",
        tableaux: list[str] | None,
        splits: list[str] | None,
        step_s: float | None,
        out: Path,
        workers: int | None,
        cluster: str | None,
        json: bool,
    ) -> None:
        self._column, self._tableaux, self._splits = column, tableaux, splits
        self._step_s, self._out, self._json = step_s, out, json
        self._workers, self._cluster = workers, cluster

    def compare(
        self, weights: "Weights | None", equal_cost: float | None, *, work_precision: bool
    ) -> None:
        """Put rows side by side."""
        from levelstride.results.comparison_files import write_comparison
        from levelstride.results.export import to_json
        from levelstride.studies.compare import carry_out_comparison, plan_comparison

        planned = plan_comparison(
            self._column,
            self._tableaux,
            self._splits,
            step_s=self._step_s,
            weights=weights,
            equal_cost=equal_cost,
            work_precision=work_precision,
        )
        with self._resumable() as resumable:
            left = resumable.tasks_left(planned.tasks)
            with executor_for(self._workers, self._cluster, left) as executor:
                found = carry_out_comparison(
                    planned, executor=executor, kept=resumable.kept, progress=resumable.progress
                )
        written = write_comparison(found, self._out)
        if self._json:
            sys.stdout.write(to_json(found))
        else:
            show_comparison(found, written)

    def map(self, vary: list[str]) -> None:
        """Map steps and errors over one or two numbers of the column file."""
        from levelstride.results.export import to_json
        from levelstride.results.map_files import write_map
        from levelstride.studies.knob_map import carry_out_map, plan_map
        from levelstride.studies.knob_range import read_ranges

        planned = plan_map(
            self._column, read_ranges(vary), self._tableaux, self._splits, step_s=self._step_s
        )
        with self._resumable() as resumable:
            left = resumable.tasks_left(planned.tasks)
            with executor_for(self._workers, self._cluster, left) as executor:
                found = carry_out_map(
                    planned, executor=executor, kept=resumable.kept, progress=resumable.progress
                )
        written = write_map(found, self._out)
        if self._json:
            sys.stdout.write(to_json(found))
        else:
            show_map(found, written)

    def _resumable(self) -> Resumable:
        from levelstride.results.atomic import check_folder

        check_folder(self._out)
        prepare_kernels()
        return Resumable(self._out)


def _check_map(weights: str | None, equal_cost: float | None, *, work_precision: bool) -> None:
    """Refuse what a map does not use."""
    from levelstride.errors import InputError

    given = {
        "--weights": weights is not None,
        "--equal-cost": equal_cost is not None,
        "--no-work-precision": not work_precision,
    }
    problems = [
        f"{name}: a map by --vary has no costs; leave one of both out"
        for name, is_given in given.items()
        if is_given
    ]
    if problems:
        raise InputError(*problems)


def _weights(text: str) -> "Weights":
    from levelstride.errors import InputError
    from levelstride.results.comparison import Weights

    try:
        explicit, solve, exchange = (float(part) for part in text.split("/"))
    except ValueError:
        raise InputError(
            f"--weights {text}: write the costs of an explicit evaluation, a solve and an "
            "exchange, as 1/1/0.5"
        ) from None
    return Weights(explicit=explicit, solve=solve, exchange=exchange)
