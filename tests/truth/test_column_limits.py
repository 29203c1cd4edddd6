"""Limits of a column in which only one thing can bite, against textbooks and papers.

Everything else is left out of the equations, or made so slow that it cannot bite first, and the
whole search is asked: all waves, all three criteria.
"""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.column.column import Horizontal
from levelstride.column.read import build
from levelstride.operator.terms import CATALOGUE
from levelstride.studies.limit import limit
from oracles.columns import STAGGERINGS, isothermal_column

TEMPERATURE_K = 250.0
SOUND_M_PER_S = np.sqrt(1.4 * 8314.32 / 28.9644 * TEMPERATURE_K)
WIDE = Horizontal(1e7, "staggered", 1)
"""So wide a grid that nothing moves across it in one step."""


def only(term, **tables):
    """A column whose equations have this one term."""
    column = build(
        {
            "levels": {"kind": "uniform", "layers": 6, "top_m": 600.0},
            "air": {
                "kind": "constant-n",
                "surface_temperature_k": 300.0,
                "buoyancy_frequency_per_s": 0.0,
            },
            "horizontal": {"grid_spacing_m": 1000.0, "directions": 1},
        }
        | tables
    )
    return replace(column, left_out=frozenset(CATALOGUE) - {term})


def fastest_sound_per_s(thickness_m):
    """Largest frequency of w_t = -p_z, p_t = -c^2 w_z on the staggered grid, w = 0 at both ends."""
    spacing_m = (thickness_m[1:] + thickness_m[:-1]) / 2
    difference = np.diff(np.eye(thickness_m.size), axis=0)
    symmetric = difference / np.sqrt(spacing_m)[:, None] / np.sqrt(thickness_m)
    return SOUND_M_PER_S * np.linalg.norm(symmetric, 2)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize(("tableau", "reach"), [("SSPRK(3,3)", 3**0.5), ("RK4", 8**0.5)])
def test_vertical_acoustic_limit(staggering, tableau, reach):
    """The vertical acoustic limit of `all-explicit` scales with the thinnest layer.

    As the one-dimensional CFL condition says: imaginary-axis limit over the largest discrete
    frequency, on uniform layers 2 c/dz cos(pi/(2 n)) (textbook).
    """
    steps = []
    for thinnest_m in (10.0, 20.0, 40.0):
        column = isothermal_column(
            6, 6 * thinnest_m, TEMPERATURE_K, horizontal=WIDE, staggering=staggering
        )
        found = limit(column, tableau=tableau, split="all-explicit", what_if=False)
        textbook = 2 * SOUND_M_PER_S / thinnest_m * np.cos(np.pi / 12)
        assert fastest_sound_per_s(column.levels.thickness_m) == pytest.approx(textbook)
        assert found.stable_step_s * textbook == pytest.approx(reach, rel=2e-3)
        assert "spectrum" in found.criterion
        assert found.bites.kind == "sound"
        assert found.bites.shortest_vertical
        steps.append(found.stable_step_s / thinnest_m)
    assert steps[1:] == pytest.approx(steps[:1] * 2, rel=2e-3)


@pytest.mark.parametrize("ratio", [1.1, 1.3])
def test_vertical_acoustic_limit_of_stretched_layers(ratio):
    """The vertical acoustic limit of `all-explicit` scales with the thinnest layer.

    The same where layers grow upward: the whole set scaled, the step scales with it, and it is the
    imaginary-axis limit over the largest discrete frequency (textbook).
    """
    for top_m in (100.0, 200.0):
        column = isothermal_column(8, top_m, TEMPERATURE_K, ratio=ratio, horizontal=WIDE)
        found = limit(column, tableau="RK4", split="all-explicit", what_if=False)
        fastest = fastest_sound_per_s(column.levels.thickness_m)
        assert found.stable_step_s * fastest == pytest.approx(8**0.5, rel=2e-3)
        assert found.bites.layer_lowest == 0
        thinnest_m = column.levels.thickness_m[0]
        courant_number = found.stable_step_s * SOUND_M_PER_S / thinnest_m
        assert 8**0.5 / 2 < courant_number < 8**0.5


@pytest.mark.parametrize(
    ("tableau", "scheme", "courant_number"),
    [
        ("forward Euler", "upwind-1", 1.0),
        ("SSPRK(3,3)", "upwind-1", 2.5127453 / 2),
        ("SSPRK(3,3)", "upwind-3", 1.626),
    ],
)
@pytest.mark.parametrize("updraft_m_per_s", [1.0, -2.0])
def test_vertical_advection(tableau, scheme, courant_number, updraft_m_per_s):
    """Explicit upwind vertical advection bites at W dt/dz = the scheme's textbook Courant number.

    By the `courant` criterion: 1 of upwind differences with forward Euler, half of the real-axis
    limit 2.5127 with three stages of third order (textbook), 1.626 of third order in space and
    time, from the exact polynomial.
    """
    found = limit(
        only(
            "vertical-advection",
            updraft={
                # not where third order falls to first
                "heights_m": [200.0, 250.0, 350.0, 400.0],
                "speeds_m_per_s": [0.0, updraft_m_per_s, updraft_m_per_s, 0.0],
                "scheme": scheme,
            },
        ),
        tableau=tableau,
        split="all-explicit",
        what_if=False,
    )
    assert found.stable_step_s * abs(updraft_m_per_s) / 100.0 == pytest.approx(
        courant_number, rel=1e-3
    )
    assert "courant" in found.criterion.split("+")
    assert found.criterion != "courant" or found.bites.kind == "transport"


@pytest.mark.parametrize(
    ("tableau", "reach"), [("forward Euler", 2.0), ("SSPRK(3,3)", 2.5127453), ("RK4", 2.7852936)]
)
def test_vertical_diffusion(tableau, reach):
    """Explicit diffusion bites at K dt/dz^2 = the real-axis limit over 4.

    2.5127/4 for three-stage third order, 2.7853/4 for four stages of order 4 (Hairer and Wanner
    1996, Solving Ordinary Differential Equations II, section IV.2).
    """
    found = limit(
        only("vertical-diffusion", diffusion={"vertical_m2_per_s": 50.0}),
        tableau=tableau,
        split="all-explicit",
        what_if=False,
    )
    assert found.stable_step_s * 50.0 / 100.0**2 == pytest.approx(reach / 4, rel=1e-3)
    assert found.criterion == "courant"
    assert found.bites.kind == "mixing"
    assert found.bites.shortest_vertical


@pytest.mark.parametrize(
    ("scheme", "printed", "exact"),
    [
        ("upwind-3", 1.61, 1.626),
        ("centred-4", 1.26, 1.262),
        ("upwind-5", 1.42, 1.435),
        ("centred-6", 1.08, 1.092),
    ],
)
@pytest.mark.parametrize("tableau", ["Wicker-Skamarock RK3", "SSPRK(3,3)"])
def test_horizontal_advection(tableau, scheme, printed, exact):
    """Horizontal advection alone, RK3 with upwind-3, centred-4, upwind-5, centred-6.

    Courant limits 1.61, 1.26, 1.42, 1.08 (Wicker and Skamarock 2002, Monthly Weather Review 130,
    2088-2097; 1.42 read in a second source, the others from memory; the exact polynomial gives
    1.626, 1.262, 1.435, 1.092).
    """
    found = limit(
        only(
            "horizontal-advection",
            wind={"kind": "uniform", "speed_m_per_s": 20.0, "advection": scheme},
        ),
        tableau=tableau,
        split="all-explicit",
        what_if=False,
    )
    courant_number = found.stable_step_s * 20.0 / 1000.0
    assert courant_number == pytest.approx(exact, abs=2e-3)
    assert 0.0 <= courant_number - printed < 0.02
    assert "courant" in found.criterion.split("+")
    assert found.criterion != "courant" or found.bites.kind == "transport"
