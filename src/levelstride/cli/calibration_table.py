"""A calibration on the terminal."""

from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.cells import STABLE
from levelstride.cli.console import Heading, say, show_pairs, show_table

if TYPE_CHECKING:
    from levelstride.results.calibration import Assumption, Calibration, ObservedColumn


def show_calibration(found: "Calibration", written: Path | None) -> None:
    """Print a calibration.

    Parameters
    ----------
    found : Calibration
        The calibration.
    written : Path or None
        The file that its safety factor was written to.
    """
    from levelstride.results.wording import number

    say(f"{found.columns[0].title}: {found.tableau} with {found.split}", strong=True)
    say(f"growth tolerated: e-fold in {number(found.efolding_s)} s")
    show_table(
        [
            Heading("column", most=30),
            Heading("held", "[s]"),
            Heading("failed", "[s]"),
            STABLE,
            Heading("held at", "least [%]", number=True),
            Heading("failed", "at [%]", number=True),
        ],
        [_observed(one) for one in found.columns],
    )
    if found.assumptions:
        show_table(
            [
                Heading("assumption", whole=True),
                Heading("in the file", most=24),
                Heading("varied over", most=34),
                Heading("agrees with every observation"),
            ],
            [_varied(one) for one in found.assumptions],
        )
    say(f"{found.verdict[:1].upper()}{found.verdict[1:]}.", strong=True)
    show_pairs(_factor(found))
    if found.wind_note:
        say(f"Note: {found.wind_note}.")
    if written is not None:
        say(f"Written to {written}; 'levelstride advise --calibration {written}' uses it.")
    say(f"Caution: {found.caution}")


def _observed(one: "ObservedColumn") -> tuple[str, ...]:
    from levelstride.results.wording import number, step

    stable = "no limit" if one.stable_step_s is None else step(one.stable_step_s)
    shares = [
        "-" if factor is None else number(100.0 * factor, 3)
        for factor in (one.factor_lower, one.factor_upper)
    ]
    held, failed = (
        ", ".join(number(s, 5) for s in steps) or "-" for steps in (one.held_s, one.failed_s)
    )
    return one.title, held, failed, stable if one.stable_step_s != 0.0 else "none", *shares


def _varied(one: "Assumption") -> tuple[str, ...]:
    from levelstride.studies.calibration_words import consistent_values

    if one.note is not None:
        return one.name, one.present, "-", f"not varied: {one.note}"
    return one.name, one.present, one.varied_over, consistent_values(one) or "nothing"


def _factor(found: "Calibration") -> list[tuple[str, str]]:
    from levelstride.results.wording import percent

    if found.safety_factor is None:
        return []
    lower, upper = found.safety_factor.lower, found.safety_factor.upper
    return [
        (
            "safety factor",
            f"from {percent(lower, 3) if lower is not None else 'unknown'} (longest held) to "
            f"{percent(upper, 3) if upper is not None else 'unknown'} (shortest failed) of the "
            "stable step",
        )
    ]
