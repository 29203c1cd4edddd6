"""``levelstride advise``: which step, with which tableau and splitting?"""

import sys
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

from cyclopts import Parameter

from levelstride.cli.advice_table import show_advice, show_outcomes
from levelstride.cli.executors import executor_for, usable_workers
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.options import Certify, Cluster, Json, Out, Workers
from levelstride.cli.resuming import Resumable

if TYPE_CHECKING:
    from levelstride.results.dataset import ColumnOutcome
    from levelstride.studies.plan import CurrentConfiguration, Plan


def advise(
    *columns: Annotated[
        str, Parameter(help="Column files (TOML), or folders of them; at least one.")
    ],
    tableaux: Annotated[
        list[str] | None,
        Parameter(help="Tableau to try, may be repeated; those of the column file by default."),
    ] = None,
    splits: Annotated[
        list[str] | None,
        Parameter(help="Splitting to try, may be repeated; those of the column file by default."),
    ] = None,
    current: Annotated[
        float | None,
        Parameter(help="Step you run today [s], to be judged; needs --tableau and --split."),
    ] = None,
    tableau: Annotated[str | None, Parameter(help="Tableau of the step you run today.")] = None,
    split: Annotated[
        str | None,
        Parameter(help="Splitting of the step you run today; that of the column file by default."),
    ] = None,
    calibration: Annotated[
        Path | None,
        Parameter(help="Calibration file: what your model carries of the stable step."),
    ] = None,
    out: Out = Path("advice"),
    workers: Workers = None,
    cluster: Cluster = None,
    certify: Certify = False,
    json: Json = False,
) -> int:
    """Try tableaux and splittings and advise a step for each, the cheapest first."""
    from levelstride.column.many import column_files
    from levelstride.errors import InputError
    from levelstride.results.calibration_file import read_safety_factor
    from levelstride.studies.plan import plan_advice

    if not columns:
        raise InputError("advise: no column file is given; name one, or a folder of them")
    files = column_files(columns)
    usable_workers(workers, cluster)
    _check_options(current, tableau, split)
    factor = None if calibration is None else read_safety_factor(calibration)

    def plan(source: str) -> "Plan":
        from levelstride.column.read import load

        read = load(source)
        judged = _current(read.split, source, current, tableau, split)
        return plan_advice(read, tableaux, splits, judged, factor, certify=certify)

    work = _Work(out, workers, cluster, json)
    if len(files) == 1 and not Path(columns[0]).is_dir():
        return work.one(plan(next(iter(files.values()))))
    plans, broken = {}, {}
    for name, source in files.items():
        try:
            plans[name] = plan(source)
        except InputError as error:
            broken[name] = error
    return work.many(files, plans, broken)


class _Work:
    """What is done with plans: carried out, written, shown."""

    def __init__(self, out: Path, workers: int | None, cluster: str | None, json: bool) -> None:
        self._out, self._workers, self._cluster, self._json = out, workers, cluster, json

    def one(self, plan: "Plan") -> int:
        """Advise one column into the folder itself."""
        from levelstride.results.export import to_json
        from levelstride.results.files import write_advice
        from levelstride.studies.advise import advise_plan

        with self._resumable() as resumable:
            left = resumable.left([plan])
            with executor_for(self._workers, self._cluster, left) as executor:
                found = advise_plan(
                    plan, executor=executor, kept=resumable.kept, progress=resumable.progress
                )
        written = write_advice(found, self._out)
        if self._json:
            sys.stdout.write(to_json(found))
        else:
            show_advice(found, written)
        return 0

    def many(
        self,
        files: Mapping[str, str],
        plans: "Mapping[str, Plan]",
        broken: Mapping[str, Exception],
    ) -> int:
        """Advise every column into a folder of its own; what is wrong with one stops no other."""
        from levelstride.errors import InputError
        from levelstride.results.atomic import make_folder, sweep
        from levelstride.results.export import to_json
        from levelstride.results.files import write_advice, write_summary
        from levelstride.results.outcomes import outcome
        from levelstride.studies.advise import advise_plans

        if not plans:
            lines = [line for error in broken.values() for line in str(error).splitlines()]
            raise InputError(*dict.fromkeys(lines))
        names = list(plans)
        failed, outcomes = dict(broken), {}
        with self._resumable() as resumable:
            left = resumable.left(list(plans.values()))
            with executor_for(self._workers, self._cluster, left) as executor:
                for place, found in advise_plans(
                    list(plans.values()),
                    executor=executor,
                    kept=resumable.kept,
                    progress=resumable.progress,
                ):
                    name = names[place]
                    if isinstance(found, Exception):
                        failed[name] = found
                        continue
                    make_folder(self._out)
                    sweep(self._out / name)
                    write_advice(found, self._out / name)
                    outcomes[name] = outcome(name, found)
        rows = [
            outcomes.get(name) or _failure(name, source, failed[name])
            for name, source in files.items()
        ]
        written = write_summary(rows, self._out)
        if self._json:
            sys.stdout.write(to_json({"columns": rows}))
        else:
            show_outcomes(rows, written)
        return _complain(failed, len(files))

    def _resumable(self) -> Resumable:
        from levelstride.results.atomic import check_folder

        check_folder(self._out)
        prepare_kernels()
        return Resumable(self._out)


def _failure(name: str, source: str, error: Exception) -> "ColumnOutcome":
    from levelstride.errors import in_words
    from levelstride.results.dataset import ColumnOutcome

    return ColumnOutcome(name=name, source=source, problem="; ".join(in_words(error)[0]))


def _complain(failed: Mapping[str, Exception], of: int) -> int:
    """Say at the end which columns failed; returns the exit code."""
    from levelstride.cli.console import say_errors
    from levelstride.errors import in_words

    codes = set()
    for name, error in failed.items():
        lines, code = in_words(error)
        codes.add(code)
        for line in lines:
            say_errors(f"levelstride: {name}: {line}")
    if failed:
        say_errors(f"levelstride: {len(failed)} of {of} columns failed, the others are done")
    return next((code for code in (1, 2, 3) if code in codes), 0)


def _check_options(step_s: float | None, tableau: str | None, split: str | None) -> None:
    """Refuse what is wrong whatever the column."""
    from levelstride.errors import InputError

    if step_s is None and (tableau is not None or split is not None):
        raise InputError(
            "--tableau and --split describe the step given by --current; to try only some, "
            "write --tableaux and --splits"
        )


def _current(
    of_column: "str | Mapping[str, str] | None",
    source: str,
    step_s: float | None,
    tableau: str | None,
    split: str | None,
) -> "CurrentConfiguration | None":
    from levelstride.errors import InputError
    from levelstride.studies.plan import CurrentConfiguration

    if step_s is None:
        return None
    named = of_column if split is None else split
    missing = []
    if tableau is None:
        missing.append("--tableau: name the tableau of the step given by --current")
    if named is None:
        missing.append(
            f"--split: name the splitting of the step given by --current; {source} has no [split]"
        )
    if tableau is None or named is None:
        raise InputError(*missing)
    return CurrentConfiguration(step_s, tableau, named)
