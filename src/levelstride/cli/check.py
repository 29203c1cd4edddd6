"""``levelstride check``: what is in this column file?"""

import sys
from typing import TYPE_CHECKING

from levelstride.cli.console import Heading, say, show_pairs, show_table
from levelstride.cli.options import ColumnFile, Json

if TYPE_CHECKING:
    from levelstride.column.level_report import LevelReport


def check(column: ColumnFile, /, *, json: Json = False) -> None:
    """Read a column file and report on its levels and air."""
    from levelstride.column.level_report import level_report
    from levelstride.column.read import load
    from levelstride.results.export import to_json, to_plain

    report = level_report(load(column))
    if json:
        sys.stdout.write(to_json(to_plain(report) | {"sound": True, "verdict": report.verdict}))
    else:
        _show(report)


def _show(report: "LevelReport") -> None:
    from levelstride.results.wording import number

    say(report.title, strong=True)
    show_pairs(
        [
            ("layers", str(report.layers)),
            ("lowest layer", f"{number(report.lowest_layer_m)} m"),
            ("thickest layer", f"{number(report.thickest_layer_m)} m"),
            ("lid", f"{number(report.top_m, 6)} m above the ground"),
            ("ground", f"{number(report.surface_altitude_m, 6)} m above sea level"),
            ("largest ratio", f"{number(report.largest_ratio)} of neighbouring thicknesses"),
            ("steepness", f"s_0 dx/dz_0 = {number(report.steepness)}"),
            ("hash", f"sha256 {report.digest}"),
        ]
    )
    _show_airs(report)
    if report.jumps:
        headings = [
            Heading("above layer", number=True),
            Heading("height", "[m]", number=True),
            Heading("thickness ratio", "[1]", number=True),
        ]
        show_table(
            headings,
            [(str(j.layer), number(j.height_m, 6), number(j.ratio)) for j in report.jumps],
        )
    for finding in report.findings:
        say(f"- {finding}")
    say(report.verdict, strong=True)


def _show_airs(report: "LevelReport") -> None:
    from levelstride.results.wording import number

    def span(pair: tuple[float, float] | None) -> str:
        return "-" if pair is None else f"{number(pair[0])} to {number(pair[1])}"

    headings = [
        Heading("air"),
        Heading("sound c", "[m/s]", number=True),
        Heading("stability N", "[1/s]", number=True),
        Heading("wind U", "[m/s]", number=True),
        Heading("N^2 < 0", "layers", number=True),
        Heading("Ri < 1/4", "layers", number=True),
        Heading("least Ri", "[1]", number=True),
    ]
    named = [(air.name, air) for air in report.airs]
    if report.reference is not None:
        named.append((f"{report.reference.name} (reference)", report.reference))
    rows = [
        (
            name,
            span(air.sound_speed_m_per_s),
            span(air.buoyancy_frequency_per_s),
            span(air.wind_m_per_s),
            str(len(air.unstable_layers)),
            str(len(air.sheared_layers)),
            number(air.least_richardson),
        )
        for name, air in named
    ]
    show_table(headings, rows)
