import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.level_report import level_report, runs, thickness_jumps
from levelstride.column.read import build


def test_numbers_of_a_plain_column(plain):
    plain["levels"] = {"kind": "table", "heights_m": [0.0, 100.0, 220.0, 341.0, 500.0, 580.0]}
    plain["terrain"] = {"slope": 0.2}
    report = level_report(build(plain))
    assert report.layers == 5
    assert report.lowest_layer_m == 100.0
    assert report.thickest_layer_m == 159.0
    assert report.thinnest_layer_m == 80.0
    assert report.top_m == 580.0
    assert report.steepness == pytest.approx(0.2 * 1000.0 / 100.0)
    assert report.largest_ratio == pytest.approx(159.0 / 80.0)
    assert [(jump.layer, jump.height_m) for jump in report.jumps] == [(2, 341.0), (3, 500.0)]
    assert [jump.ratio for jump in report.jumps] == pytest.approx([159.0 / 121.0, 159.0 / 80.0])


def test_a_ratio_of_exactly_the_limit_is_no_jump():
    assert thickness_jumps(np.array([0.0, 100.0, 220.0]))[1] == ()


@given(st.lists(st.floats(1.0, 1000.0), min_size=2, max_size=40))
def test_every_jump_is_found(thickness):
    heights = np.concatenate([[0.0], np.cumsum(thickness)])
    largest, jumps = thickness_jumps(heights)
    actual = np.diff(heights)
    expected = [max(a / b, b / a) for a, b in zip(actual[1:], actual[:-1], strict=True)]
    assert largest == pytest.approx(max(expected))
    assert len(jumps) == sum(ratio > 1.2 * (1.0 + 1e-12) for ratio in expected)


def test_air_ranges(plain):
    plain["wind"] = {"kind": "linear", "surface_m_per_s": 1.0, "shear_per_s": 0.002}
    (air,) = level_report(build(plain)).airs
    speed = np.sqrt(1.4 * 287.0530725 * 250.0)
    assert air.sound_speed_m_per_s == pytest.approx((speed, speed))
    frequency = 9.80665 / np.sqrt(3.5 * 287.0530725 * 250.0)
    assert air.buoyancy_frequency_per_s == pytest.approx((frequency, frequency), rel=5e-4)
    assert air.wind_m_per_s == pytest.approx((2.0, 20.0))
    assert air.least_richardson == pytest.approx((frequency / 0.002) ** 2, rel=1e-3)
    assert air.sheared_layers == ()


def test_unstable_and_sheared_layers_are_named(plain):
    plain["air"] = {
        "kind": "sounding",
        "name": "autumn",
        "heights_m": [0.0, 2000.0, 4000.0, 10000.0],
        "temperatures_k": [300.0, 275.0, 263.0, 230.0],
    }
    plain["wind"] = {
        "kind": "table",
        "heights_m": [5000.0, 6000.0],
        "speeds_m_per_s": [0.0, 40.0],
    }
    plain["column"] = {"staggering": "lorenz"}
    report = level_report(build(plain))
    (air,) = report.airs
    assert air.unstable_layers == (0, 1)
    assert air.unstable_interfaces == (1,)
    assert air.sheared_layers == (5,)
    text = "\n".join(report.findings)
    assert "autumn: N^2 < 0 in 2 layers (0-1)" in text
    assert "Richardson number below 1/4 in 1 layer (5)" in text
    assert "deserve attention" in report.verdict


def test_wind_that_is_carried_but_not_used(plain):
    plain["air"] = {
        "kind": "sounding",
        "heights_m": [0.0, 9000.0],
        "temperatures_k": [280.0, 240.0],
        "winds_m_per_s": [1.0, 2.0],
    }
    findings = level_report(build(plain)).findings
    assert any("no wind was given" in line for line in findings)
    assert any('write [wind] kind = "sounding"' in line for line in findings)
    plain["wind"] = {"kind": "sounding"}
    report = level_report(build(plain))
    assert report.findings == ()
    assert report.verdict == "The file is sound."


def test_runs():
    assert runs((0, 1, 2, 7)) == "0-2, 7"
    assert runs(()) == ""
    assert runs((3,)) == "3"
