import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.problems import Problems
from levelstride.column.read import build, load
from levelstride.column.sounding import Ascent, ascent_air
from levelstride.column.standard_atmosphere import standard_air

HEAD = """
[levels]
kind = "uniform"
layers = 8
top_m = 4000.0
[horizontal]
grid_spacing_m = 1000.0
[wind]
kind = "sounding"
[air]
kind = "sounding"
file = "ascent.csv"
"""
ROWS = ["0.0,280.0,1.0", "1000.0,275.0,5.0", "2500.0,262.0,9.0", "4000.0,255.0,12.0"]
PLAIN = "\n".join(["height_m,temperature_k,wind_m_per_s", *ROWS]) + "\n"


def both(write, text, extra=""):
    write(text, "ascent.csv")
    return load(write(HEAD + extra))


def same(one, two):
    np.testing.assert_array_equal(one.airs[0].pressure_c, two.airs[0].pressure_c)
    np.testing.assert_array_equal(one.airs[0].wind_f, two.airs[0].wind_f)


def test_linear_between_rows(write):
    air = both(write, PLAIN).airs[0]
    assert air.temperature_f[1] == pytest.approx(277.5)
    assert air.wind_f[1] == pytest.approx(3.0)
    assert air.pressure_f[0] == pytest.approx(101325.0)


@pytest.mark.parametrize(
    "text",
    [
        PLAIN.replace("\n", "\r\n").encode(),
        b"\xef\xbb\xbf" + PLAIN.encode(),
        "\n".join(
            ["wind_m_per_s,height_m,temperature_k"]
            + [",".join(row.split(",")[i] for i in (2, 0, 1)) for row in ROWS]
        ),
        PLAIN.replace(",", ";"),
        PLAIN.replace(",", "\t"),
        "# a remark\n\n" + PLAIN.replace("height_m", " Height_m "),
        PLAIN.rstrip("\n"),
        "\n".join([PLAIN.splitlines()[0] + ",dewpoint"] + [row + ",x" for row in ROWS]),
    ],
    ids=["crlf", "bom", "order", "semicolon", "tab", "remark", "no last newline", "more columns"],
)
def test_read_not_refused(write, text):
    same(both(write, text), both(write, PLAIN))


def test_units_named_in_the_header(write):
    text = "height_m,temperature_c,wind_m_per_s\n0,6.85,1\n4000,-18.15,12\n"
    assert both(write, text).airs[0].temperature_f[0] == pytest.approx(280.0)


def test_beyond_the_rows(write):
    write(PLAIN.replace("0.0,280.0,1.0\n", "", 1), "ascent.csv")
    column = load(write(HEAD.replace("top_m = 4000.0", "top_m = 8000.0")))
    air = column.airs[0]
    assert air.temperature_f[0] == 275.0
    np.testing.assert_array_equal(air.temperature_f[4:], 255.0)
    np.testing.assert_array_equal(air.wind_f[4:], 12.0)


def test_altitudes_above_sea_level(write):
    extra = "[terrain]\nsurface_altitude_m = 1000.0\ncompression = 'none'\n"
    assert both(write, PLAIN, extra).airs[0].temperature_f[0] == pytest.approx(275.0)


def test_heights_and_pressures_give_the_pressure_of_the_ground(write):
    text = "height_m,pressure_hpa,temperature_k,wind_m_per_s\n500,950,280,1\n5000,530,255,2\n"
    extra = "[terrain]\nsurface_altitude_m = 500.0\n"
    assert both(write, text, extra).airs[0].pressure_f[0] == pytest.approx(95000.0)


def test_by_pressure_alone_follows_the_standard_atmosphere(write):
    standard = standard_air()
    heights = np.arange(0.0, 11001.0, 1000.0)
    rows = zip(standard.pressure(heights), standard.temperature(heights), strict=True)
    text = "pressure_pa,temperature_k,wind_m_per_s\n"
    text += "".join(f"{p!r},{t!r},3.0\n" for p, t in (map(float, row) for row in rows))
    air = both(write, text).airs[0]
    at = np.arange(9) * 500.0
    np.testing.assert_allclose(air.pressure_f, standard.pressure(at), rtol=1e-12)
    np.testing.assert_allclose(air.temperature_f, standard.temperature(at), rtol=1e-12)


@given(
    st.lists(st.floats(180.0, 320.0), min_size=2, max_size=30),
    st.floats(-500.0, 3000.0),
    st.data(),
)
def test_by_pressure_recovers_its_rows(temperatures, ground, data):
    count = len(temperatures)
    falls = data.draw(st.lists(st.floats(0.01, 0.3), min_size=count - 1, max_size=count - 1))
    pressures = 1e5 * np.exp(-np.concatenate([[0.0], np.cumsum(falls)]))
    ascent = Ascent(
        {"temperatures_k": np.array(temperatures), "pressures_pa": pressures}, lambda q, i: q
    )
    problems = Problems("x")
    air = ascent_air(ascent, ground, 99000.0, "air", problems)
    if air is None:
        assert "below the ground" in problems.lines[0]
        return
    assert air.pressure(np.array([ground]))[0] == pytest.approx(99000.0, rel=1e-12)
    np.testing.assert_allclose(air.pressure(air.nodes_m), pressures, rtol=1e-11)


def test_listed_in_the_definition(plain):
    plain["air"] = {
        "kind": "sounding",
        "heights_m": [0.0, 5000.0],
        "temperatures_k": [280.0, 250.0],
    }
    assert build(plain).airs[0].temperature_f[5] == pytest.approx(250.0)
