"""Whatever stands in a column file, it is read or refused in plain words; never a traceback."""

import copy
from pathlib import Path

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from levelstride.column import level_sets
from levelstride.column.level_report import level_report
from levelstride.column.read import build, load
from levelstride.errors import InputError

COLUMNS = Path(__file__).parents[2] / "columns"
SAMPLES = [path.read_bytes() for path in sorted(COLUMNS.glob("*.toml"))]
PLAIN = [dict(load(path).definition) for path in sorted(COLUMNS.glob("*.toml"))]
ASCENT = (COLUMNS / "wintermoor_ascent.csv").read_bytes()[:600]
relaxed = settings(
    max_examples=150,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)


def survive(read):
    """Return what was read, or check that it was refused in plain words."""
    try:
        column = read()
    except InputError as error:
        assert error.problems  # noqa: PT017
        for line in error.problems:
            assert line.isprintable()
            assert len(line) < 1000
        return None
    level_report(column)
    return column


@st.composite
def spoilt(draw, source):
    """Bytes with a few of them removed, replaced or doubled."""
    text = bytearray(draw(source))
    for _ in range(draw(st.integers(1, 6))):
        at = draw(st.integers(0, max(len(text) - 1, 0)))
        length = draw(st.integers(0, 12))
        text[at : at + length] = draw(st.binary(max_size=8) | st.sampled_from([b"-", b"e9", b"]"]))
    return bytes(text)


@relaxed
@given(st.binary(max_size=200) | st.text(max_size=200).map(lambda t: t.encode("utf-8", "replace")))
def test_any_bytes(write, content):
    survive(lambda: load(write(content)))


@relaxed
@given(spoilt(st.sampled_from(SAMPLES)))
def test_spoilt_samples(write, content):
    write(ASCENT, "wintermoor_ascent.csv")
    survive(lambda: load(write(content)))


SCALARS = (
    st.none()
    | st.booleans()
    | st.integers()
    | st.integers(-(10**400), 10**400)
    | st.floats()
    | st.text(max_size=10)
    | st.sampled_from([0.0, -0.0, 1e-320, 1e308, 1e6, 1e-3, 84852.0, "table", "sounding"])
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: (
        st.lists(inner, max_size=5) | st.dictionaries(st.text(max_size=8), inner, max_size=3)
    ),
    max_leaves=8,
)


def places(value, path=()):
    """Every place in nested data."""
    yield path
    items = value.items() if isinstance(value, dict) else ()
    if isinstance(value, list):
        items = list(enumerate(value))[:6]
    for key, inner in items:
        yield from places(inner, (*path, key))


@st.composite
def changed(draw):
    """A sound definition with a few places overwritten, removed or added."""
    plain = copy.deepcopy(draw(st.sampled_from(PLAIN)))
    for _ in range(draw(st.integers(1, 3))):
        path = draw(st.sampled_from([p for p in places(plain) if p]))
        inner = plain
        for key in path[:-1]:
            inner = inner[key]
        if draw(st.integers(0, 5)) == 0:
            del inner[path[-1]]
        elif isinstance(inner, dict) and draw(st.integers(0, 5)) == 0:
            inner[draw(st.text(max_size=6))] = draw(VALUES)
        else:
            inner[path[-1]] = draw(VALUES)
        if not plain:
            break
    return plain


@relaxed
@given(changed())
def test_changed_definitions(plain):
    survive(lambda: build(plain))


NUMBERS = st.floats() | st.floats(0.0, 1e5) | st.sampled_from([0.0, 1e-3, 1e6, 1e308])


@relaxed
@given(
    st.fixed_dictionaries(
        {"kind": st.just("table"), "heights_m": st.lists(NUMBERS, max_size=6)},
        optional={
            "at": st.sampled_from(["interfaces", "centres"]),
            "order": st.sampled_from(["bottom-up", "top-down"]),
        },
    )
    | st.fixed_dictionaries(
        {
            "kind": st.sampled_from(["geometric", "tanh"]),
            "layers": st.integers(-5, 400),
            "top_m": st.floats(1e-3, 1e6),
            "lowest_layer_m": st.floats(1e-3, 1e6),
        }
    ),
    st.floats(100.0, 1500.0),
    st.floats(0.0, 0.5),
    st.floats(-1000.0, 20000.0),
)
def test_any_levels_in_any_air(levels, temperature, frequency, altitude):
    plain = {
        "levels": levels,
        "air": {
            "kind": "constant-n",
            "surface_temperature_k": temperature,
            "buoyancy_frequency_per_s": frequency,
        },
        "horizontal": {"grid_spacing_m": 1000.0},
        "terrain": {"surface_altitude_m": altitude, "slope": 0.1},
    }
    column = survive(lambda: build(plain))
    if column is not None:
        assert (column.levels.thickness_m >= 0.99 * level_sets.THINNEST).all()
        assert (column.airs[0].temperature_f > 0.0).all()
        assert (column.airs[0].density_f > 0.0).all()


HEAD = """
[levels]
kind = "uniform"
layers = 5
top_m = 3000.0
[air]
kind = "sounding"
file = "ascent.csv"
[horizontal]
grid_spacing_m = 1000.0
"""
ROWS = st.lists(
    st.tuples(NUMBERS, NUMBERS, NUMBERS).map(lambda r: ",".join(map(repr, r))), max_size=5
)


@relaxed
@given(
    st.binary(max_size=100)
    | spoilt(st.just(ASCENT))
    | ROWS.map(lambda r: "\n".join(["height_m,pressure_pa,temperature_k", *r]).encode())
    | ROWS.map(lambda r: "\n".join(["pressure_pa,wind_m_per_s,temperature_k", *r]).encode())
)
def test_any_ascent(write, content):
    write(content, "ascent.csv")
    survive(lambda: load(write(HEAD)))


@relaxed
@given(
    st.lists(st.floats(0.5, 1e5), min_size=2, max_size=6),
    st.lists(st.floats(100.0, 1500.0), min_size=6, max_size=6),
    st.booleans(),
)
def test_any_listed_ascent(vertical, temperatures, by_pressure):
    vertical = sorted(set(vertical), reverse=by_pressure)
    air = {
        "kind": "sounding",
        "pressures_pa" if by_pressure else "heights_m": vertical,
        "temperatures_k": temperatures[: len(vertical)],
    }
    plain = {
        "levels": {"kind": "uniform", "layers": 5, "top_m": 3000.0},
        "air": air,
        "horizontal": {"grid_spacing_m": 1000.0},
    }
    survive(lambda: build(plain))
