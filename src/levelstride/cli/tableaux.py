"""``levelstride tableaux``: the time schemes and their audit."""

import re
import sys
from math import isinf
from typing import TYPE_CHECKING, Annotated, Any

from cyclopts import Parameter

from levelstride.cli.console import Heading, say, show_pairs, show_table
from levelstride.cli.options import Json

LONGEST_COEFFICIENT = 12
"""Characters up to which a coefficient is shown as published; --json has all digits."""

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from levelstride.schemes.scheme import TimeScheme
    from levelstride.tableaux.audit import Audit
    from levelstride.tableaux.tableau import Tableau

_IMPLICIT = (
    "coupling order", "implicit order", "implicit solves", "value at infinity", "A-stable",
    "stiffly accurate",
)  # fmt: skip
"""What an explicit method has no answer to."""


def tableaux(
    name: Annotated[str | None, Parameter(help="Tableau to show, as published or bare.")] = None,
    /,
    *,
    file: Annotated[str | None, Parameter(help="TOML file of your own tableaux.")] = None,
    json: Json = False,
) -> None:
    """List the IMEX tableaux, or show one with its audit."""
    from levelstride.cli.baselines_table import show_baselines
    from levelstride.results.export import to_json
    from levelstride.schemes.lookup import find_scheme, scheme_names
    from levelstride.tableaux.lookup import find, names
    from levelstride.tableaux.user_file import read_file

    own = read_file(file) if file is not None else ()
    if name is not None:
        _show_scheme(find_scheme(name, among=own), json=json)
        return
    listed, baselines = [*own, *map(find, names())], [*map(find_scheme, scheme_names())]
    if json:
        sys.stdout.write(to_json([_summary(one) for one in (*listed, *baselines)]))
    else:
        _show_list(listed)
        show_baselines(baselines)


def _show_scheme(scheme: "TimeScheme", *, json: bool) -> None:
    from levelstride.cli.baselines_table import show_program
    from levelstride.results.export import to_json
    from levelstride.schemes.scheme import ProgramScheme

    if not isinstance(scheme, ProgramScheme):
        _show_one(scheme, json=json)
    elif json:
        sys.stdout.write(to_json(_summary(scheme)))
    else:
        show_program(scheme)


def _summary(tableau: "TimeScheme") -> dict[str, Any]:
    from levelstride.cli.baselines_table import program_summary
    from levelstride.schemes.scheme import ProgramScheme

    if isinstance(tableau, ProgramScheme):
        return program_summary(tableau)
    return {
        "name": tableau.name,
        "aliases": tableau.aliases,
        "kind": tableau.kind,
        "order": tableau.order,
        "stages": tableau.nstage,
        "implicit_solves": tableau.implicit_solves,
        "explicit_evaluations": tableau.explicit_evaluations,
        "imaginary_axis_limit": tableau.imaginary_axis_limit,
        "value_at_infinity": tableau.value_at_infinity,
        "value_at_infinity_is_infinite": isinf(tableau.value_at_infinity),
        "stiffly_accurate": tableau.stiffly_accurate,
        "source": tableau.source,
    }


def _show_list(listed: "list[Tableau]") -> None:
    from levelstride.results.wording import number

    headings = [
        Heading("tableau", most=24),
        Heading("order", number=True),
        Heading("solves", number=True),
        Heading("explicit", "evaluations", number=True),
        Heading("imaginary", "axis limit", number=True),
        Heading("value at", "infinity", number=True),
        Heading("source", rest=True),
    ]
    rows = [
        (
            t.name,
            str(t.order),
            str(t.implicit_solves),
            str(t.explicit_evaluations),
            number(t.imaginary_axis_limit),
            "-" if t.kind == "explicit" else number(t.value_at_infinity),
            re.split(r"(?<=\(\d{4}\))", t.source)[0],
        )
        for t in listed
    ]
    show_table(headings, rows)
    say(f"{len(listed)} tableaux; 'levelstride tableaux NAME' shows one with its audit.")


def _show_one(tableau: "Tableau", *, json: bool) -> None:
    from levelstride.results.export import to_json, to_plain
    from levelstride.tableaux.audit import audit

    report = audit(tableau)
    if json:
        found = to_plain(report) | {"passed": report.passed}
        text = to_plain(tableau.coefficient_text)
        extra = {"note": tableau.note, "coefficients": text, "audit": found}
        sys.stdout.write(to_json(_summary(tableau) | extra))
        return
    say(tableau.name, strong=True)
    show_pairs(_pairs(tableau, report))
    explicit = tableau.kind == "explicit"
    _show_coefficients("" if explicit else "explicit part", tableau, "explicit")
    if not explicit:
        _show_coefficients("implicit part", tableau, "implicit")
    for line in report.violations:
        say(f"- {line}")
    say("The audit is passed." if report.passed else "The audit is failed.", strong=True)


def _pairs(tableau: "Tableau", report: "Audit") -> list[tuple[str, str]]:
    from levelstride.results.wording import number

    def order(value: int) -> str:
        return f"{value} or more" if value >= len(report.worst) else str(value)

    pairs = [
        ("source", tableau.source),
        ("note", tableau.note),
        ("also called", ", ".join(tableau.aliases)),
        ("stages", str(tableau.nstage)),
        ("implicit solves", str(tableau.implicit_solves)),
        ("explicit evaluations", str(tableau.explicit_evaluations)),
        ("declared order", str(report.declared_order)),
        ("linear order", order(report.linear_order)),
        ("nonlinear order", order(report.nonlinear_order)),
        ("coupling order", order(report.coupling_order)),
        ("explicit order", order(report.explicit_order)),
        ("implicit order", order(report.implicit_order)),
        ("row sums differ by", number(report.row_sum_difference)),
        ("imaginary-axis limit", f"{number(report.imaginary_axis_limit, 6)} of the explicit part"),
        ("real-axis limit", f"{number(report.real_axis_limit, 6)} of the explicit part"),
        ("value at infinity", f"{number(report.value_at_infinity, 6)} of the implicit part"),
        ("A-stable", "yes" if report.a_stable else "no"),
        ("stiffly accurate", "yes" if tableau.stiffly_accurate else "no"),
    ]
    if tableau.kind == "explicit":
        pairs = [pair for pair in pairs if pair[0] not in _IMPLICIT]
    for entry in report.negative_diagonals:
        pole = f"pole at z = {number(entry.pole)}, which damping terms can meet"
        pairs.append(("negative diagonal", f"stage {entry.stage}: {number(entry.value)}, {pole}"))
    return [pair for pair in pairs if pair[1]]


def _show_coefficients(title: str, tableau: "Tableau", part: str) -> None:
    def row(first: str, texts: "Sequence[str]", values: "Iterable[float]") -> list[str]:
        shown = [
            text if len(text) <= LONGEST_COEFFICIENT else f"{value:.8g}"
            for text, value in zip(texts, values, strict=True)
        ]
        return [first, *shown]

    text = tableau.coefficient_text
    texts, values = getattr(text, f"a_{part}"), getattr(tableau, f"a_{part}")
    sums = getattr(tableau, f"c_{part}")
    rows = [row(f"{c:.8g}", *pair) for c, *pair in zip(sums, texts, values, strict=True)]
    rows.append(row("b", getattr(text, f"b_{part}"), getattr(tableau, f"b_{part}")))
    if title:
        say(title)
    headings = [Heading("c"), *(Heading(f"a{j + 1}") for j in range(tableau.nstage))]
    show_table(headings, rows)
