"""Baselines as ``levelstride tableaux`` lists and shows them."""

from typing import TYPE_CHECKING, Any

from levelstride.cli.console import Heading, say, show_pairs, show_table

if TYPE_CHECKING:
    from levelstride.schemes.scheme import ProgramScheme, TimeScheme


def program_summary(scheme: "ProgramScheme") -> dict[str, Any]:
    """What JSON says of a scheme that is no tableau."""
    return {
        "name": scheme.name,
        "aliases": scheme.aliases,
        "kind": "program",
        "order": scheme.order,
        "time_levels": scheme.levels,
        "implicit_solves": scheme.implicit_solves,
        "explicit_evaluations": scheme.explicit_evaluations,
        "imaginary_axis_limit": scheme.imaginary_axis_limit,
        "computational_factors": scheme.computational_factors,
        "knobs": dict(scheme.knobs),
        "start": scheme.start_note,
        "source": scheme.source,
        "note": scheme.note,
    }


def show_baselines(listed: "list[TimeScheme]") -> None:
    """List what people run besides tableaux."""
    from levelstride.results.wording import number

    headings = [
        Heading("baseline", most=24),
        Heading("order", number=True),
        Heading("solves", number=True),
        Heading("explicit", "evaluations", number=True),
        Heading("imaginary", "axis limit", number=True),
        Heading("time", "levels", number=True),
        Heading("source", rest=True),
    ]
    rows = [
        (
            one.name,
            str(one.order),
            str(one.implicit_solves),
            str(one.explicit_evaluations),
            number(one.imaginary_axis_limit),
            str(one.levels),
            one.source.partition(")")[0] + ")",
        )
        for one in listed
    ]
    show_table(headings, rows)
    say("Strang(HALVES, METHOD) composes any two; [scheme] in a column file turns the knobs.")


def show_program(scheme: "ProgramScheme") -> None:
    """Show one scheme that is no tableau."""
    from levelstride.results.wording import number

    say(scheme.name, strong=True)
    left = [f"{number(one)} of it is left each step" for one in scheme.computational_factors]
    pairs = [
        ("source", scheme.source),
        ("note", scheme.note),
        ("also called", ", ".join(scheme.aliases)),
        ("time levels", str(scheme.levels)),
        ("first steps", scheme.start_note),
        ("implicit solves", str(scheme.implicit_solves)),
        ("explicit evaluations", str(scheme.explicit_evaluations)),
        ("order", str(scheme.order)),
        ("imaginary-axis limit", f"{number(scheme.imaginary_axis_limit, 6)} of slow terms alone"),
        ("computational mode, dt to 0", "; ".join(left)),
        ("knobs", ", ".join(f"{key} = {number(value)}" for key, value in scheme.knobs.items())),
    ]
    show_pairs([pair for pair in pairs if pair[1]])
