"""Frozen rows of transport and mixing: which one binds, and how it is treated."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.column.read import build
from levelstride.splitting import resolve
from levelstride.stability.courant import courant_limit
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.verdict import ColumnVerdict
from levelstride.tableaux.lookup import find

RATE, LONGEST_S = 1 / 86400.0, 1e4


def column_of(**tables):
    return build(
        {
            "levels": {"kind": "uniform", "layers": 8, "top_m": 800.0},
            "air": {"kind": "isothermal", "temperature_k": 250.0},
            "horizontal": {"grid_spacing_m": 2000.0, "directions": 1},
        }
        | tables
    )


def limit_of(column, split="sound", tableau="ARS(2,3,3)"):
    return courant_limit(column, column.airs[0], resolve(split), find(tableau), RATE, LONGEST_S)


def test_air_at_rest_has_none():
    assert limit_of(column_of(), "all-explicit") is None


def test_a_term_that_is_left_out_has_no_rows():
    column = column_of(diffusion={"vertical_m2_per_s": 50.0}, updraft={"speed_m_per_s": 9.0})
    without = replace(column, left_out=frozenset({"vertical-diffusion"}))
    still = replace(without, left_out=without.left_out | {"vertical-advection"})
    assert limit_of(column).step_s < limit_of(without).step_s
    assert limit_of(without).kind == "transport"
    assert limit_of(still) is None


def test_the_worst_vertical_angle_is_named():
    mixing = limit_of(column_of(diffusion={"vertical_m2_per_s": 50.0}))
    assert mixing.phase == pytest.approx(np.pi)
    wind = {"kind": "uniform", "speed_m_per_s": 20.0}
    assert limit_of(column_of(wind=wind)).phase == 0.0


def test_the_layer_of_the_strongest_updraft_is_named():
    column = column_of(
        updraft={
            "heights_m": [0.0, 400.0, 500.0, 550.0, 600.0, 800.0],
            "speeds_m_per_s": [0.0, 0.5, 1.0, 4.0, 1.0, 0.0],
            "scheme": "upwind-1",
        }
    )
    found = limit_of(column, tableau="ARS(1,1,1)")
    assert found.step_s * 4.0 / 100.0 == pytest.approx(1.0, rel=2e-3)
    assert (found.layer, found.kind) == (5, "transport")
    assert found.field in ("u", "pi")
    assert found.rate_per_s > RATE


@pytest.mark.parametrize("scheme", ["centred", "upwind-3"])
def test_a_centred_scheme_is_carried_by_what_reaches_along_the_imaginary_axis(scheme):
    updraft = {
        "heights_m": [0.0, 50.0, 750.0, 800.0],
        "speeds_m_per_s": [0.0, 2.0, 2.0, 0.0],
        "scheme": scheme,
    }
    found = limit_of(column_of(updraft=updraft))
    courant_number = found.step_s * 2.0 / 100.0
    if scheme == "centred":
        assert courant_number == pytest.approx(np.sqrt(3), rel=2e-3)
    else:  # rows next to ground and lid are of first order and reach 2.5127/2 only
        assert courant_number == pytest.approx(2.5127 / 2, rel=2e-3)
    weak = limit_of(column_of(updraft=updraft | {"scheme": "centred"}), tableau="ARS(1,1,1)")
    # forward Euler grows by z^2/2 a step, tolerated only as long as it is slower than a day
    frequency = 2.0 / 100.0
    assert weak.step_s == pytest.approx(2 * RATE / frequency**2, rel=2e-2)


def test_terms_add_up_in_one_row_and_the_larger_part_names_it():
    updraft = {
        "heights_m": [0.0, 50.0, 750.0, 800.0],
        "speeds_m_per_s": [0.0, 1.0, 1.0, 0.0],
        "scheme": "upwind-1",
    }
    both = column_of(updraft=updraft, diffusion={"vertical_m2_per_s": 10.0})
    found = limit_of(both, tableau="ARS(1,1,1)")
    # 1 - 2 nu - 4 K dt/dz^2 = -1 at the checkerboard
    assert found.step_s * (1.0 / 100.0 + 2 * 10.0 / 100.0**2) == pytest.approx(1.0, rel=2e-3)
    assert found.kind == "transport"
    stronger = column_of(updraft=updraft, diffusion={"vertical_m2_per_s": 200.0})
    assert limit_of(stronger, tableau="ARS(1,1,1)").kind == "mixing"


def test_horizontal_diffusion_at_the_shortest_wave():
    column = column_of(diffusion={"horizontal_coefficient": 5e4, "horizontal_order": 1})
    found = limit_of(column, tableau="ARS(1,1,1)")
    assert found.step_s * 5e4 / 2000.0**2 == pytest.approx(0.5, rel=2e-3)
    assert found.kappa == pytest.approx(np.pi / 2000.0)
    assert found.kind == "mixing"


@pytest.mark.parametrize("treatment", ["implicit", "after-step-implicit"])
def test_what_is_implicit_has_no_courant_limit(treatment):
    column = column_of(diffusion={"vertical_m2_per_s": 100.0})
    assert limit_of(column, {"name": "sound", "vertical-diffusion": treatment}) is None


def test_after_the_step_is_forward_euler():
    column = column_of(diffusion={"vertical_m2_per_s": 100.0})
    inside = limit_of(column, "sound", "ARS(2,3,3)")
    after = limit_of(column, {"name": "sound", "vertical-diffusion": "after-step"}, "ARS(2,3,3)")
    assert inside.step_s / after.step_s == pytest.approx(2.5127 / 2, rel=2e-3)


def test_an_explicit_tableau_takes_every_term_explicitly():
    column = column_of(
        horizontal={"grid_spacing_m": 1e6},
        diffusion={"vertical_m2_per_s": 1e5},
    )
    steps = [
        ColumnVerdict(column, resolve(split), find("RK4")).stable_step(Tolerance(86400.0, 1000.0))
        for split in ("all-explicit", "sound+mixing", "all-implicit")
    ]
    assert steps[0].courant is not None
    assert [found.courant for found in steps[1:]] == [steps[0].courant] * 2
    assert [found.step_s for found in steps[1:]] == [steps[0].step_s] * 2
