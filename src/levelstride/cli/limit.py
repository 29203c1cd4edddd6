"""``levelstride limit``: how long a step does one tableau and splitting carry?"""

import sys
from math import pi
from typing import TYPE_CHECKING, Annotated

from cyclopts import Parameter

from levelstride.cli.console import Heading, progress, say, show_pairs, show_table
from levelstride.cli.kernels import prepare_kernels
from levelstride.cli.options import Certify, ColumnFile, Json

if TYPE_CHECKING:
    from collections.abc import Mapping

    from levelstride.results.dataset import Limit


def limit(
    column: ColumnFile,
    /,
    *,
    tableau: Annotated[str, Parameter(help="IMEX tableau, as published or bare.")],
    split: Annotated[
        str | None,
        Parameter(help="Splitting, e.g. sound+buoyancy; that of the column file by default."),
    ] = None,
    efolding: Annotated[
        float | None,
        Parameter(help="Tolerated e-folding time [s]; that of the column file by default."),
    ] = None,
    certify: Certify = False,
    json: Json = False,
) -> None:
    """Find the longest stable step of one tableau and splitting, and what bites first."""
    from levelstride.column.read import load
    from levelstride.errors import InputError
    from levelstride.results.export import to_json
    from levelstride.studies.limit import limit as find_limit

    read = load(column)
    if split is None and read.split is None:
        raise InputError(
            f"--split: none given and {column} has no [split]; name one, e.g. --split sound"
        )
    if efolding is not None and not 0.0 < efolding < 1e12:
        raise InputError(f"--efolding {efolding:g}: must be a time above 0 [s]")
    prepare_kernels()
    what = f"{tableau} with {split or 'its [split]'}"
    with progress(f"{read.title}: {what}") as report:
        found = find_limit(
            read,
            tableau=tableau,
            split=split,
            efolding_s=efolding,
            certify=certify,
            progress=lambda done, total, on: report(done, total, f"{what}, {on}"),
        )
    if json:
        sys.stdout.write(to_json(found))
    else:
        _show(read.title, found)


def _show(title: str, found: "Limit") -> None:
    from levelstride.results.wording import limit_reason, number, own_growth, percent, step

    say(f"{title}: {found.tableau} with {found.split}", strong=True)
    stable = f"{step(found.stable_step_s)} s"
    if found.stable_step_s is None:
        stable = "no limit" if found.unbounded else "none"
    strict = "none" if found.strict_step_s is None else f"{step(found.strict_step_s)} s"
    tolerated = "" if found.efolding_s is None else f"e-fold in {number(found.efolding_s)} s"
    pairs = [
        ("stable step", stable),
        ("what binds", limit_reason(found)),
        ("growth tolerated", tolerated),
        ("growth per step", number(found.growth_per_step)),
        ("strict step", strict),
        ("explicit share", percent(found.explicit_share, 3)),
        ("gain", f"{number(found.gain, 3)} times the step of all-explicit"),
        ("air", found.air),
        ("solved by", found.path),
        ("certified", found.certified),
    ]
    if found.couples_columns:
        pairs.append(("beware", "the implicit solve couples neighbouring columns"))
    if found.lowest_slope_gradient:
        pairs.append(("lowest slope gradient", found.lowest_slope_gradient))
    missing = {"", "-", "- times the step of all-explicit"}
    show_pairs([pair for pair in pairs if pair[1] not in missing])
    _show_bites(found)
    _show_tolerances(found)
    _show_certificate(found)
    for own in found.own_growth:
        say(own_growth(own))
    for window in found.windows:
        say(f"Stable again, not recommended: {number(window.from_s)} to {number(window.to_s)} s.")
    if found.wind_note:
        say(f"Note: {found.wind_note}.")


def _show_bites(found: "Limit") -> None:
    from levelstride.results.wording import number, percent, wave

    if found.bites is None:
        return
    bites = found.bites

    vertical = ""
    if bites.wavelength_layers is not None:
        vertical = f"{number(bites.wavelength_layers, 3)} layers"

    def shares(of: "Mapping[str, float]") -> str:
        largest = sorted(of.items(), key=lambda item: -item[1])
        return ", ".join(f"{name} {percent(share)}" for name, share in largest if share > 0.005)

    pairs = [
        ("what bites", wave(bites)),
        ("wavenumber", f"{number(bites.wavenumber_per_m)} 1/m along one axis"),
        ("growth", f"{number(bites.growth_per_s)} 1/s just beyond the limit"),
        (
            "period seen by the step",
            "" if bites.period_s is None else f"{number(bites.period_s)} s",
        ),
        ("vertical wavelength", vertical),
        ("energy by field", shares(bites.energy_share)),
        ("energy by kind", shares(bites.kind_share)),
    ]
    show_pairs([pair for pair in pairs if pair[1]])


def _show_tolerances(found: "Limit") -> None:
    from levelstride.results.wording import number, step

    if found.stable_step_by_efolding:
        show_table(
            [
                Heading("tolerated e-folding", "[s]", number=True),
                Heading("stable step", "[s]", number=True),
            ],
            [
                (number(a.efolding_s, 6), step(a.stable_step_s))
                for a in found.stable_step_by_efolding
            ],
        )


def _show_certificate(found: "Limit") -> None:
    from levelstride.results.wording import metres, number, step

    of = found.certificate
    if of is None:
        return
    above = "" if of.above_s is None else f"at {step(of.above_s, 6)} s [1/s]"
    several = len({wave.air for wave in of.waves}) > 1
    headings = [
        *([Heading("air", whole=True)] if several else []),
        Heading("wavenumber", "[1/m]", number=True),
        Heading("wavelength", "", number=True),
        Heading("growth below", f"at {step(of.below_s, 6)} s [1/s]", number=True),
        Heading("growth above", above, number=True),
        Heading("tolerated", "[1/s]", number=True),
        Heading("method"),
    ]
    rows = [
        (
            *([wave.air] if several else []),
            number(wave.wavenumber_per_m),
            metres(2 * pi / wave.wavenumber_per_m),
            number(wave.growth_below_per_s, 3),
            number(wave.growth_above_per_s, 3),
            number(wave.tolerated_per_s, 3),
            wave.method,
        )
        for wave in of.waves
    ]
    show_table(headings, rows, marked=of.worst)
