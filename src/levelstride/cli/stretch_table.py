"""A stretch on the terminal."""

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.cells import METHOD, STABLE, in_lines, level_set, stable_step
from levelstride.cli.console import Heading, say, show_table

if TYPE_CHECKING:
    from levelstride.results.mending import LayerSensitivity, Mended
    from levelstride.results.stretching import Stretch, StretchPoint, StretchRow


def show_stretch(found: "Stretch", written: Sequence[Path]) -> None:
    """Print a stretch.

    Parameters
    ----------
    found : Stretch
        The answer.
    written : sequence of Path
        The files that it was written to.
    """
    from levelstride.results.stretch_files import kept

    say(found.title, strong=True)
    say(level_set(found.column))
    say(f"Stretched in {len(found.curve)} sets; what stays is {kept(found)}.")
    _show_rows(found)
    _show_curves(found)
    for i, row in enumerate(found.rows):
        _show_verdict(row, f"{i + 1}. " if len(found.rows) > 1 else "")
    for note in found.notes:
        say(f"Note: {note}.")
    names = _names(written, each=len(found.rows) == 1)
    say(f"Written to {written[0].parent}: {names}")
    say(f"Caution: {found.caution}")


def _names(written: Sequence[Path], *, each: bool) -> str:
    """The files; level sets each by its name, or only counted."""
    sets = sorted({path.stem for path in written if path.suffix == ".toml"})
    names = [path.name for path in written if path.stem not in sets]
    if each:
        names += [f"{name}.{ending}" for name in sets for ending in ("toml", "csv")]
    elif sets:
        names.append(f"{len(sets)} level sets as column files (.toml) and .csv")
    return ", ".join(names)


def _show_rows(found: "Stretch") -> None:
    """One line per tableau and splitting: how far it goes."""
    from levelstride.results.wording import number, step

    by_lid = found.keep == "lowest-layers"
    furthest = Heading("highest", "lid [m]") if by_lid else Heading("thinnest", "lowest [m]")
    show_table(
        [
            Heading("", number=True),
            *METHOD,
            Heading("target", "step [s]", number=True),
            Heading("own set", "step [s]", number=True),
            Heading(furthest.text, furthest.unit, number=True),
            Heading("largest", "ratio", number=True),
            Heading("what limits the step", "beyond"),
        ],
        [
            (
                str(i + 1),
                row.tableau,
                in_lines(row.split),
                step(row.target_step_s),
                stable_step(row.own_stable_step_s, unbounded=_own(row).unbounded),
                number(row.lid_m if by_lid else row.thinnest_lowest_layer_m),
                number(row.largest_ratio),
                _beyond(row),
            )
            for i, row in enumerate(found.rows)
        ],
    )


def _own(row: "StretchRow") -> "StretchPoint":
    return next(point for point in row.curve if point.own)


def _beyond(row: "StretchRow") -> str:
    """What limits the step just beyond the last set that carries the target."""
    if row.target_step_s is None:
        return "no target"
    if row.never_bites:
        return "never lost in this range"
    return "no set carries it" if row.lost is None else _binds(row.lost)


def _binds(point: "StretchPoint") -> str:
    from levelstride.results.stretch_wording import binding_words
    from levelstride.results.wording import in_short

    if point.binds is None:
        return "nothing" if point.unbounded else "no step is stable"
    return in_short(binding_words(point.binds))


def _show_curves(found: "Stretch") -> None:
    """Stable steps along the family, one line per set, one column per row."""
    from levelstride.results.wording import number

    only = found.rows[0] if len(found.rows) == 1 else None
    curve = found.curve
    sides = [
        ("lowest", "layer [m]", [number(point.lowest_layer_m) for point in curve]),
        ("largest", "ratio", [number(point.ratio) for point in curve]),
        ("", "layers", [str(point.layers) for point in curve]),
        ("lid", "[m]", [number(point.lid_m, 5) for point in curve]),
    ]
    sides = [side for i, side in enumerate(sides) if i < 2 or len(set(side[2])) > 1]
    headings = [Heading(text, unit, number=True) for text, unit, _ in sides]
    if only is not None:
        headings += [STABLE, Heading("", whole=True)]
        headings.append(Heading("what binds"))
    else:
        headings += [
            Heading("stable step" if i == 0 else "", f"of {i + 1} [s]", number=True)
            for i in range(len(found.rows))
        ]
        headings.append(Heading("", whole=True))
    lines = []
    for k, point in enumerate(found.curve):
        points = [row.curve[k] for row in found.rows]
        line = [cells[k] for _, _, cells in sides]
        line += [stable_step(one.stable_step_s, unbounded=one.unbounded) for one in points]
        line.append("own set" if point.own else "")
        lines.append(line if only is None else [*line, _binds(point)])
    marked = next(k for k, point in enumerate(found.curve) if point.own)
    show_table(headings, lines, marked=marked)


def _show_verdict(row: "StretchRow", number_: str) -> None:
    say(f"{number_}{row.tableau} with {row.split}: {row.verdict}.", strong=True)
    for crossing in row.crossings:
        say(f"   Crossing at a {crossing.sentence}.")
    if row.layer_costs is not None:
        _show_layers(row.layer_costs)
    if row.mended is not None:
        _show_mended(row.mended)


def _show_layers(found: "LayerSensitivity") -> None:
    """Which layers cost the step."""
    from levelstride.results.wording import number

    say(
        "Which layers cost the step: what it gains for every metre that one layer gets thicker, "
        "all above moving up."
    )
    show_table(
        [
            Heading("layer", number=True),
            Heading("thickness", "[m]", number=True),
            Heading("ratio to", "next", number=True),
            Heading("step gained", "[s/m]", number=True),
            Heading("thicker", "[s/m]", number=True),
            Heading("thinner", "[s/m]", number=True),
            Heading("% of step", "per %", number=True),
        ],
        [
            (
                str(cost.layer),
                number(cost.thickness_m),
                number(cost.ratio_to_next),
                number(cost.step_per_m, 3),
                number(cost.step_per_m_thicker, 3),
                number(cost.step_per_m_thinner, 3),
                number(cost.log_sensitivity, 3),
            )
            for cost in found.layers
        ],
    )


def _show_mended(found: "Mended") -> None:
    """The mended level set."""
    from levelstride.results.wording import number

    say(f"Mended: {found.verdict}")
    if found.obstacle is not None or found.unchanged:
        return
    show_table(
        [
            Heading("layer", number=True),
            Heading("before", "[m]", number=True),
            Heading("after", "[m]", number=True),
            Heading("factor", number=True),
        ],
        [
            (
                str(change.layer),
                number(change.before_m),
                number(change.after_m),
                number(change.factor),
            )
            for change in found.changes
        ],
    )
