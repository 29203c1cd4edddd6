"""The normal modes on the terminal."""

from collections.abc import Sequence
from math import pi
from pathlib import Path
from typing import TYPE_CHECKING

from levelstride.cli.console import Heading, say, show_table

if TYPE_CHECKING:
    from levelstride.results.modes_found import ColumnModes, ModeFound, ModesAtStep, WaveModes
    from levelstride.results.transient import TransientFound
    from levelstride.results.wave_errors import KindErrors, StepWaveErrors

SHOWN_ORDERS = (0, 1, 2, 3, 5, 10, 20, 50, 100, 200, 500)
"""Vertical orders shown of each kind, and the last."""

SMALLEST_SHARE = 0.05
"""Share of the energy from which a kind of wave is named."""

_NAMES = {"charney-phillips": "Charney-Phillips", "lorenz": "Lorenz"}


def show_modes(found: "ColumnModes", written: Sequence[Path], *, every: bool) -> None:
    """Print the modes of a column.

    Parameters
    ----------
    found : ColumnModes
        The modes.
    written : sequence of Path
        Files written.
    every : bool
        Whether to show every vertical order.
    """
    from levelstride.results.wording import CAUTION, metres

    say(found.title, strong=True)
    say(
        f"{found.column.layers} layers, lid at {metres(found.column.top_m)}, staggering "
        f"{_NAMES[found.staggering]}. 90 % of the energy of a mode is in the layers named."
    )
    if found.split_into > 1:
        say(
            f"The last columns are frequencies on these levels over those on levels with every "
            f"layer split in {found.split_into}, of the same kind and vertical order: above 1 the "
            "levels make a wave too fast."
        )
    for wave in found.waves:
        _show_wave(found, wave, every=every)
    if found.at_step is not None:
        _show_step(found.at_step)
    for note in found.notes:
        say(f"Note: {note}.")
    if written:
        say(f"Written to {written[0].parent}: {', '.join(path.name for path in written)}")
    say(f"Caution: {CAUTION}")


def shown(modes: "Sequence[ModeFound]", *, every: bool) -> "list[ModeFound]":
    """Choose the modes to show: of every kind some orders and the last."""
    last: dict[str, int] = {}
    for mode in modes:
        last[mode.kind] = max(last.get(mode.kind, 0), mode.vertical_order)
    return [
        mode for mode in modes if every or mode.vertical_order in (*SHOWN_ORDERS, last[mode.kind])
    ]


def _show_wave(found: "ColumnModes", wave: "WaveModes", *, every: bool) -> None:
    from levelstride.results.wording import metres, number, percent

    say()
    say(
        f"Air {wave.air}, wavelength {metres(wave.wavelength_m)} "
        f"({number(wave.wavelength_cells)} grid spacings)",
        strong=True,
    )
    gradient = f"|kx| {number(wave.gradient_per_m)} 1/m"
    short = 1.0 - wave.gradient_to_exact
    exact = "the exact one" if abs(short) < 1e-9 else f"{percent(short)} below the exact one"
    say(f"Horizontal gradient {gradient}, {exact}.")
    if wave.isothermal_k is not None:
        say(
            f"Isothermal air of {number(wave.isothermal_k)} K: column 'exact' is the frequency "
            "over its closed form with the same |kx|."
        )
    rows = shown(wave.modes, every=every)
    closed = wave.isothermal_k is not None
    headings = [
        Heading("kind", whole=True),
        Heading("order", number=True),
        Heading("frequency", "[1/s]", number=True),
        Heading("period", "[s]", number=True),
        Heading("depth", "[m]", number=True),
        Heading("vertical", "wave [m]", number=True),
        Heading("layers", whole=True),
    ]
    if not wave.energy_conserved:
        headings.append(Heading("growth", "[1/s]", number=True))
    if closed:
        headings.append(Heading("exact", "[1]", number=True))
    if found.split_into > 1:
        headings += [Heading("C-P", "[1]", number=True), Heading("Lorenz", "[1]", number=True)]
    show_table(headings, [_cells(found, wave, mode) for mode in rows])


def _cells(found: "ColumnModes", wave: "WaveModes", mode: "ModeFound") -> list[str]:
    from levelstride.results.wording import number

    cells = [
        f"{mode.kind} *" if mode.entangled else mode.kind,
        str(mode.vertical_order) if mode.vertical_order else "-",
        number(mode.frequency_per_s),
        number(mode.period_s),
        number(mode.equivalent_depth_m),
        number(mode.vertical_wavelength_m),
        f"{mode.layer_lowest}-{mode.layer_highest}",
    ]
    if not wave.energy_conserved:
        cells.append(number(mode.growth_per_s, 2))
    if wave.isothermal_k is not None:
        exact = mode.isothermal_per_s
        cells.append(number(abs(mode.intrinsic_frequency_per_s) / exact if exact else None, 5))
    if found.split_into > 1:
        ratios = {grid.staggering: grid.to_finer for grid in mode.grids}
        cells += [number(ratios.get(name), 5) for name in _NAMES]
    return cells


def _show_step(step: "ModesAtStep") -> None:
    from levelstride.results.wording import number

    say()
    say(
        f"A step of {number(step.errors.step_s)} s by {step.tableau} with {step.split}",
        strong=True,
    )
    _show_errors(step.errors)
    _show_transient(step.transient)


def _show_errors(errors: "StepWaveErrors") -> None:
    from levelstride.results.wording import metres, number, percent

    say("Error of frequency and change of amplitude, negative for damping:")
    rows = [("resolved gravity", errors.resolved), *errors.kinds.items()]
    show_table(
        [
            Heading("waves from 8 dx on", whole=True),
            Heading("modes", number=True),
            Heading("frequency", "worst", number=True),
            Heading("a period", "worst", number=True),
            Heading("mean", number=True),
            Heading("an hour", "worst", number=True),
            Heading("mean", number=True),
        ],
        [_error_cells(name, kind) for name, kind in rows],
    )
    worst = errors.worst_resolved
    if worst is not None:
        say(
            f"Worst resolved gravity wave: {metres(2 * pi / worst.wavenumber_per_m)}, vertical "
            f"order {worst.vertical_order}, period {number(worst.period_s)} s: frequency "
            f"{percent(worst.frequency_error)}, amplitude {percent(worst.change_per_period)} a "
            f"period, {percent(worst.change_per_hour)} an hour."
        )
    say(
        f"{errors.matched} modes matched with eigenvalues of the step, {errors.ambiguous} "
        f"ambiguous ({errors.ambiguous_resolved} of them resolved gravity waves), "
        f"{errors.entangled} entangled and not looked for; of {errors.faint} one step leaves less "
        f"than a tenth. Growth beyond the column's own: {number(errors.spurious_growth_per_s, 2)} "
        "1/s at most."
    )


def _error_cells(name: str, kind: "KindErrors") -> list[str]:
    from levelstride.results.wording import percent

    return [
        name,
        str(kind.modes),
        percent(kind.frequency_error),
        percent(kind.worst_change_per_period),
        percent(kind.mean_change_per_period),
        percent(kind.worst_change_per_hour),
        percent(kind.mean_change_per_hour),
    ]


def _show_transient(found: "TransientFound") -> None:
    say("Transient growth: " + transient_words(found))


def transient_words(found: "TransientFound") -> str:
    """Say what the largest transient growth is, in one sentence."""
    from levelstride.results.wording import kind_name, metres, number, percent

    if found.steps == 0:
        return "no state gains energy in any number of steps."
    shares = ", ".join(
        f"{kind} {percent(share)}"
        for kind, share in sorted(found.kind_share.items(), key=lambda one: -one[1])
        if share >= SMALLEST_SHARE
    )
    end = ", and may go on rising" if found.rising else ""
    return (
        f"energy norm up to {number(found.largest_norm)} after {found.steps} steps "
        f"({number(found.time_s)} s){end}; the column alone reaches "
        f"{number(found.exponential_norm)}. It is a {kind_name(found.kind)} of "
        f"{metres(found.wavelength_m)}, layers {found.layer_lowest}-{found.layer_highest} "
        f"({found.bottom_m:.0f}-{found.top_m:.0f} m); energy in waves at rest: {shares}."
    )
