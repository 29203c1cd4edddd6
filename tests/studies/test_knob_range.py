import pytest

from levelstride.column.read import build
from levelstride.errors import InputError
from levelstride.studies.knob_range import knobs, present_value, read_ranges

COLUMN = build({
    "levels": {"kind": "geometric", "layers": 5, "top_m": 9000.0, "lowest_layer_m": 600.0},
    "air": [
        {"kind": "isothermal", "temperature_k": 260.0, "name": "one"},
        {"kind": "isothermal", "temperature_k": 280.0, "name": "two"},
    ],
    "horizontal": {"grid_spacing_m": 3000.0},
})  # fmt: skip


def test_equal_steps_and_equal_ratios():
    slope, spacing = knobs(
        COLUMN, {"terrain.slope": "0:0.3:4", "horizontal.grid_spacing_m": "500:4000:4:log"}
    )
    assert slope.values == (0.0, 0.1, 0.2, 0.3)
    assert spacing.values == (500.0, 1000.0, 2000.0, 4000.0)
    assert (slope.logarithmic, spacing.logarithmic) == (False, True)
    assert (slope.present, spacing.present) == (0.0, 3000.0)


def test_values_themselves():
    (knob,) = knobs(COLUMN, {"air[1].temperature_k": [300.0, 250.0]})
    assert (knob.values, knob.present) == ((300.0, 250.0), 280.0)


def test_whole_numbers():
    (knob,) = knobs(COLUMN, {"levels.layers": "5:9:3"})
    assert knob.values == (5.0, 7.0, 9.0)
    with pytest.raises(InputError, match=r"levels.layers: takes whole numbers only, and 6.33333"):
        knobs(COLUMN, {"levels.layers": "5:9:4"})


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("air.temperature_k", 260.0),
        ("air[1].temperature_k", 280.0),
        ("air[7].temperature_k", None),
        ("levels.layers", 5),
        ("levels.kind", None),
        ("wind.speed_m_per_s", None),
        ("levels.layers.more", None),
    ],
)
def test_the_present_value(key, value):
    assert present_value(COLUMN, key) == value


@pytest.mark.parametrize(
    ("texts", "told"),
    [
        (["terrain.slope"], "--vary terrain.slope: write KEY=FROM:TO:COUNT"),
        (["=0:1:3"], "--vary =0:1:3: write"),
        (["a.b=0:1:3", "a.b=0:1:4"], "--vary a.b=0:1:4: a.b is varied already"),
    ],
)
def test_what_is_no_range_on_a_command_line(texts, told):
    with pytest.raises(InputError, match="^" + told.replace("[", r"\[")):
        read_ranges(texts)


@pytest.mark.parametrize(
    ("key", "given", "told"),
    [
        ("terrain.slope", "0:1", "write KEY=FROM:TO:COUNT"),
        ("terrain.slope", "0:1:3:lin", "write KEY=FROM:TO:COUNT"),
        ("terrain.slope", "a:1:3", "FROM and TO must be numbers and COUNT whole"),
        ("terrain.slope", "0:1:2.5", "FROM and TO must be numbers and COUNT whole"),
        ("terrain.slope", "0:inf:3", "must be finite and differ"),
        ("terrain.slope", "1:1:3", "must be finite and differ"),
        ("terrain.slope", "0:1:1", "COUNT is 1; it must be 2 to 200"),
        ("terrain.slope", "0:1:201", "COUNT is 201; it must be 2 to 200"),
        ("terrain.slope", "0:1:3:log", "leave :log out"),
        ("terrain.slope", [0.1], "give 2 to 200 different numbers"),
        ("terrain.slope", [0.1, 0.1], "give 2 to 200 different numbers"),
        ("terrain.slop", "0:1:3", "unknown key; did you mean slope"),
        ("nothing.here", "0:1:3", "unknown key"),
        ("levels.kind", "0:1:3", "is no number"),
        ("levels", "0:1:3", "is no number"),
        ("horizontal.grid_spacing_m", "-5:1000:3", "must be at least"),
    ],
)
def test_what_is_wrong_is_one_line_that_names_the_key(key, given, told):
    with pytest.raises(InputError) as caught:
        knobs(COLUMN, {key: given})
    (line,) = caught.value.problems
    assert told in line
    assert key.partition(".")[0] in line


def test_every_mistake_is_told():
    with pytest.raises(InputError) as caught:
        knobs(COLUMN, {"terrain.slope": "0:1:1", "levels.kind": "0:1:3"})
    assert len(caught.value.problems) == 2
    for count in (0, 3):
        vary = dict.fromkeys(("a.a", "b.b", "c.c")[:count], "0:1:3")
        with pytest.raises(InputError, match="a map has one or two"):
            knobs(COLUMN, vary)
