"""One limit on the terminal: the step, what bites, and what if."""

from math import pi
from typing import TYPE_CHECKING

from levelstride.cli.console import Heading, say, show_pairs, show_table

MOST_LAYERS = 12
"""Layers of what bites that are shown, those with most energy."""

LEAST_SHARE = 1e-3
"""Share of the energy below which a layer is not shown."""

if TYPE_CHECKING:
    from collections.abc import Mapping

    from levelstride.results.biting import Bites
    from levelstride.results.dataset import Limit


def show_limit(title: str, found: "Limit") -> None:
    """Print a limit.

    Parameters
    ----------
    title : str
        Title of the column.
    found : Limit
        The limit.
    """
    from levelstride.results.cause import airs
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
        ("cause", found.cause or ""),
        ("growth tolerated", tolerated),
        ("growth per step", number(found.growth_per_step)),
        ("strict step", strict),
        ("explicit share", percent(found.explicit_share, 3)),
        ("gain", f"{number(found.gain, 3)} times the step of all-explicit"),
        ("air", airs(found)),
        ("solved by", found.path),
        ("certified", found.certified),
    ]
    if found.couples_columns:
        pairs.append(("beware", "the implicit solve couples neighbouring columns"))
    if found.lowest_slope_gradient:
        pairs.append(("lowest slope gradient", found.lowest_slope_gradient))
    missing = {"", "-", "- times the step of all-explicit"}
    show_pairs([pair for pair in pairs if pair[1] not in missing])
    if found.bites is not None:
        _show_bites(found.bites)
    _show_what_if(found)
    _show_tolerances(found)
    _show_certificate(found)
    for own in found.own_growth:
        say(own_growth(own))
    for window in found.windows:
        say(f"Stable again, not recommended: {number(window.from_s)} to {number(window.to_s)} s.")
    if found.wind_note:
        say(f"Note: {found.wind_note}.")


def _show_bites(bites: "Bites") -> None:
    from levelstride.results.cause import wave_on_grid
    from levelstride.results.wording import number, percent, wave

    vertical = ""
    if bites.wavelength_layers is not None:
        vertical = f"{number(bites.wavelength_layers, 3)} layers"

    def shares(of: "Mapping[str, float]") -> str:
        largest = sorted(of.items(), key=lambda item: -item[1])
        return ", ".join(f"{name} {percent(share)}" for name, share in largest if share > 0.005)

    pairs = [
        ("what bites", wave(bites)),
        ("on the grid", wave_on_grid(bites)),
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
    if bites.profiles:
        _show_profiles(bites)


def _show_profiles(bites: "Bites") -> None:
    """Print the layers with most energy; fields at interfaces stand with the layer below."""
    from levelstride.results.wording import number, percent

    energy = bites.energy_by_layer
    felt = [layer for layer, share in enumerate(energy) if share >= LEAST_SHARE]
    fullest = sorted(felt, key=lambda layer: -energy[layer])[:MOST_LAYERS]
    units = {"theta": "[K]", "pi": "[1]"}
    centres = next(p.heights_m for p in bites.profiles if len(p.heights_m) == len(energy))
    rows = []
    for layer in sorted(fullest):
        amplitudes = [
            number(p.amplitude[layer], 2) if layer < len(p.amplitude) else "-"
            for p in bites.profiles
        ]
        share = percent(energy[layer], 2)
        rows.append((str(layer), number(centres[layer]), share, *amplitudes))
    show_table(
        [
            Heading("layer", number=True),
            Heading("height", "[m]", number=True),
            Heading("energy", number=True),
            *(
                Heading(profile.field, units.get(profile.field, "[m/s]"), number=True)
                for profile in bites.profiles
            ),
        ],
        rows,
    )


def _show_what_if(found: "Limit") -> None:
    from levelstride.results.cause import name_of_terms, step_in_table

    if not found.counterfactuals:
        return
    steps = {(one.terms, one.change): step_in_table(one) for one in found.counterfactuals}
    every = dict.fromkeys(one.terms for one in found.counterfactuals)
    show_table(
        [
            Heading("stable step if"),
            Heading("implicit", "[s]", number=True),
            Heading("absent", "[s]", number=True),
        ],
        [
            (
                name_of_terms(terms),
                steps.get((terms, "implicit"), "-"),
                steps.get((terms, "absent"), "-"),
            )
            for terms in every
        ],
    )


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
