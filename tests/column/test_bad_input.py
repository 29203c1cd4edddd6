"""Every mistake is one line: file, key path, value, what is allowed and how to mend it."""

import pytest

from levelstride.column import level_sets
from levelstride.column.read import build, load
from levelstride.errors import InputError

SOUND = """
title = "sound"
[levels]
kind = "uniform"
layers = 10
top_m = 10000.0
[air]
kind = "standard"
[horizontal]
grid_spacing_m = 1000.0
"""
LEVELS = 'kind = "uniform"\nlayers = 10\ntop_m = 10000.0'
AIR = 'kind = "standard"'


def lines_of(path):
    with pytest.raises(InputError) as caught:
        load(path)
    assert caught.value.exit_code == 2
    for line in caught.value.problems:
        assert "\n" not in line
        assert line.count(": ") >= 1
    return list(caught.value.problems)


def table(heights, **more):
    rest = "".join(f'\n{key} = "{value}"' for key, value in more.items())
    return f'kind = "table"\nheights_m = {heights}{rest}'


def test_sound(write):
    assert load(write(SOUND)).title == "sound"


CASES = {
    "unknown table": ("[horizontal]", "[horizontals]", ["horizontals: unknown key", "horizontal?"]),
    "unknown key": ("layers =", "layrs =", ["levels.layrs: unknown key; did you mean layers?"]),
    "key of another kind": (
        "top_m = 10000.0",
        "top_m = 10000.0\nlowest_layer_m = 3.0",
        ["levels.lowest_layer_m", 'not a key of kind "uniform" but of "geometric"'],
    ),
    "wrong type": ("layers = 10", 'layers = "ten"', ['levels.layers = "ten": must be a whole']),
    "whole number with a point": (
        "layers = 10",
        "layers = 10.0",
        ["levels.layers = 10.0", "whole"],
    ),
    "truth is no number": ("= 1000.0", "= true", ["grid_spacing_m = true: must be a number"]),
    "text is no number": ("= 1000.0", '= "1000"', ['grid_spacing_m = "1000": must be a number']),
    "not finite": ("= 1000.0", "= inf", ["grid_spacing_m = inf: must be a finite number"]),
    "missing table": (f"[air]\n{AIR}", "", ["air: this table is missing; add [air]"]),
    "missing key": (
        "layers = 10\n",
        "",
        ["levels.layers: this key is missing", "Number of layers"],
    ),
    "missing kind": (AIR, "", ["air.kind: this key is missing", '"standard"', '"sounding"']),
    "unknown kind": (AIR, 'kind = "standart"', ['air.kind = "standart"', "did you mean standard?"]),
    "level kind of later days": (
        'kind = "uniform"',
        'kind = "netcdf"',
        ['levels.kind = "netcdf": must be one of "table", "file", "uniform"'],
    ),
    "unknown choice": (
        "= 1000.0",
        '= 1000.0\ngradient = "stagered"',
        ['horizontal.gradient = "stagered"', "did you mean staggered?"],
    ),
    "grid spacing zero": ("= 1000.0", "= 0", ["horizontal.grid_spacing_m = 0", "at least 0.001"]),
    "grid spacing negative": ("= 1000.0", "= -3.0", ["grid_spacing_m = -3.0", "spacing dx [m]"]),
    "single layer": (LEVELS, table([0.0, 100.0]), ["levels.heights_m", "at least two layers"]),
    "one layer": ("layers = 10", "layers = 1", ["levels.layers = 1: must be at least 2"]),
    "repeated": (LEVELS, table([0.0, 100.0, 100.0, 300.0]), ["heights_m[2] = 100.0", "repeats"]),
    "not monotone": (
        LEVELS,
        table([0.0, 200.0, 100.0, 300.0]),
        ["levels.heights_m[2] = 100.0: follows 200 m", "negative thickness (-100 m)"],
    ),
    "nan height": (LEVELS, "kind='table'\nheights_m=[0.0, nan, 9.0]", ["heights_m[1] = nan"]),
    "order contrary": (LEVELS, table([300.0, 100.0, 0.0]), ['write order = "top-down"']),
    "order contrary the other way": (
        LEVELS,
        table([0.0, 100.0, 300.0], order="top-down"),
        ['order says "top-down"; write order = "bottom-up"'],
    ),
    "not from the ground": (LEVELS, table([10.0, 100.0, 300.0]), ["heights_m[0] = 10.0", "be 0"]),
    "centres that are none": (
        LEVELS,
        table([100.0, 150.0, 500.0], at="centres"),
        ["levels.heights_m", 'at = "interfaces"'],
    ),
    "geometric without a ratio": (
        LEVELS,
        'kind = "geometric"\nlayers = 4\ntop_m = 100000.0\nlowest_layer_m = 1.0',
        ["levels.lowest_layer_m = 1.0", "cannot reach the top", "more layers"],
    ),
    "lowest layer above the top": (
        LEVELS,
        'kind = "geometric"\nlayers = 4\ntop_m = 100.0\nlowest_layer_m = 200.0',
        ["reaches the top"],
    ),
    "memory": ("layers = 10", "layers = 900000000", ["levels.layers", "memory", "at most"]),
    "memory, absurdly": ("layers = 10", f"layers = 1{'0' * 300}", ["levels.layers", "at most"]),
    "above the standard atmosphere": (
        "top_m = 10000.0",
        "top_m = 84853.0",
        ['air.kind = "standard"', "84.852 km", "lower the top"],
    ),
    "temperature negative": (
        AIR,
        'kind = "isothermal"\ntemperature_k = -300.0',
        ["air.temperature_k = -300.0: must be at least 100"],
    ),
    "temperature in Celsius": (
        AIR,
        'kind = "isothermal"\ntemperature_k = 15.0',
        ["looks like degrees Celsius: write 288.15"],
    ),
    "pressure in hPa": (
        AIR,
        AIR + "\nsurface_pressure_pa = 1013.25",
        ["air.surface_pressure_pa = 1013.25", "looks like hPa: write 101325.0"],
    ),
    "neutral air too deep": (
        AIR,
        'kind = "constant-n"\nsurface_temperature_k = 90.0e0\nbuoyancy_frequency_per_s = 0.0',
        ["air.surface_temperature_k = 90.0: must be at least 100"],
    ),
    "temperature zero below the lid": (
        "top_m = 10000.0\n[air]\n" + AIR,
        'top_m = 40000.0\n[air]\nkind = "constant-n"\nsurface_temperature_k = 300.0\n'
        "buoyancy_frequency_per_s = 0.001",
        ["air.buoyancy_frequency_per_s = 0.001", "falls to zero", "lower the top"],
    ),
    "no air left": (
        "top_m = 10000.0\n[air]\n" + AIR,
        'top_m = 900000.0\n[air]\nkind = "isothermal"\ntemperature_k = 200.0',
        ["air.kind", "no air to speak of"],
    ),
    "one name for two airs": (
        f"[air]\n{AIR}",
        f'[[air]]\n{AIR}\nname = "x"\n[[air]]\n{AIR}\nname = "x"',
        ['air[1].name = "x": names must differ'],
    ),
    "second air wrong": (
        f"[air]\n{AIR}",
        f'[[air]]\n{AIR}\n[[air]]\nkind = "isothermal"\ntemperature_k = nan',
        ["air[1].temperature_k = nan"],
    ),
    "wind of no sounding": (
        "[horizontal]",
        '[wind]\nkind = "sounding"\n[horizontal]',
        ['wind.kind = "sounding": air has no wind'],
    ),
    "uneven wind table": (
        "[horizontal]",
        '[wind]\nkind = "table"\nheights_m = [0.0, 9.0]\nspeeds_m_per_s = [1.0]\n[horizontal]',
        ["wind.speeds_m_per_s: has 1 entries and heights_m 2"],
    ),
    "wind table downward": (
        "[horizontal]",
        "[wind]\nkind='table'\nheights_m=[9.0, 0.0]\nspeeds_m_per_s=[1.0, 2.0]\n[horizontal]",
        ["wind.heights_m[1] = 0.0", "list heights upward"],
    ),
    "updraft twice": (
        "[horizontal]",
        "[updraft]\nspeed_m_per_s = 1.0\nheights_m = [0.0]\n[horizontal]",
        ["updraft: needs either"],
    ),
    "rotation twice": (
        "[horizontal]",
        "[rotation]\ncoriolis_per_s = 1e-4\nlatitude_deg = 50.0\n[horizontal]",
        ["rotation: needs exactly one"],
    ),
    "damping above the lid": (
        "[horizontal]",
        "[upper_damping]\nrate_per_s = 0.1\nbase_m = 10000.0\n[horizontal]",
        ["upper_damping.base_m = 10000.0", "below the lid"],
    ),
    "decay height without exponential": (
        "[horizontal]",
        "[terrain]\nslope = 0.1\ndecay_height_m = 100.0\n[horizontal]",
        ["terrain.decay_height_m = 100.0", 'decay = "exponential"'],
    ),
    "given gradient without its number": (
        "= 1000.0",
        '= 1000.0\ngradient = "given"',
        ["horizontal.largest_gradient_per_m: this key is missing"],
    ),
    "ground above the top": (
        "[horizontal]",
        "[terrain]\nsurface_altitude_m = 12000.0\n[horizontal]",
        ["terrain.surface_altitude_m = 12000.0", "below the top"],
    ),
    "diffusion twice": (
        "[horizontal]",
        "[diffusion]\nvertical_m2_per_s = 1.0\nheights_m = [0.0]\n[horizontal]",
        ["diffusion: has both"],
    ),
    "split by name and term": (
        "[horizontal]",
        '[split]\nname = "sound"\nbuoyancy = "implicit"\n[horizontal]',
        ["split", "has a name and single terms"],
    ),
    "tableau file that is not there": (
        "[horizontal]",
        '[advice]\ntableau_file = "none.toml"\n[horizontal]',
        ["advice.tableau_file", "none.toml", "No such file"],
    ),
    "level file that is not there": (
        LEVELS,
        'kind = "file"\nfile = "none.csv"',
        ["levels.file", "none.csv", "No such file", "check the path"],
    ),
    "a table that is none": (f"[air]\n{AIR}\n", "", ["air: this table is missing"]),
}


@pytest.mark.parametrize("name", CASES)
def test_one_mistake_is_one_line(write, name):
    old, new, said = CASES[name]
    assert old in SOUND
    path = write(SOUND.replace(old, new, 1))
    lines = lines_of(path)
    found = [line for line in lines if all(word in line for word in said)]
    assert len(found) == 1, lines
    assert found[0].startswith(f"{path}: ")
    assert len(lines) == 1 + (name == "unknown table") + (name == "unknown key")


def test_not_toml(write):
    (line,) = lines_of(write("levels = [1, 2"))
    assert "not valid TOML" in line
    (line,) = lines_of(write("x = " + "[" * 20000))
    assert "nested too deeply" in line
    (line,) = lines_of(write(b"\xff\xfe\x00"))
    assert "UTF-8" in line


def test_no_file(tmp_path):
    (line,) = lines_of(tmp_path / "nowhere.toml")
    assert "No such file" in line
    (line,) = lines_of(tmp_path)
    assert "not a file" in line
    with pytest.raises(InputError):
        load("a\0b")


def test_byte_order_mark_and_crlf_are_read(write):
    assert load(write(b"\xef\xbb\xbf" + SOUND.replace("\n", "\r\n").encode())).title == "sound"


def test_all_mistakes_at_once(write):
    write("height_m,temperature_k\n0,15.0\n10,14.0\n", "a.csv")
    text = SOUND.replace(LEVELS, table([0.0, 200.0, 100.0]))
    text = text.replace(AIR, 'kind = "sounding"\nfile = "a.csv"').replace("= 1000.0", "= -1.0")
    text += '[wind]\nkind = "uniform"\nspeed = 3\n[rotation]\n'
    lines = lines_of(write(text))
    for word in (
        "levels.heights_m[2]",
        "a.csv: line 2",
        "grid_spacing_m",
        "wind.speed",
        "rotation",
    ):
        assert any(word in line for line in lines), (word, lines)


HEAD = SOUND.replace(AIR, 'kind = "sounding"\nfile = "ascent.csv"')
ASCENTS = {
    "too short": ("height_m,temperature_k\n0,280\n", ["has 1 rows", "at least two"]),
    "header alone": ("height_m,temperature_k\n", ["has 0 rows"]),
    "empty": ("", ["empty"]),
    "unsorted": (
        "height_m,temperature_k\n0,280\n900,270\n500,275\n",
        ["line 4, height_m = 500.0", "not sorted upward", "sort them"],
    ),
    "downward": ("height_m,temperature_k\n900,270\n500,275\n0,280\n", ["reverse them"]),
    "duplicated": (
        "height_m,temperature_k\n0,280\n500,275\n500,275\n900,270\n",
        ["line 4, height_m = 500.0: repeats the row before it"],
    ),
    "missing": (
        "height_m,temperature_k\n0,280\n500,\n900,n/a\n",
        ["line 3, temperature_k", "missing", "and 1 more"],
    ),
    "ragged": ("height_m,temperature_k\n0,280\n500\n900,270\n", ["line 3: has 1 entries", "2 col"]),
    "not finite": ("height_m,temperature_k\n0,280\n500,inf\n", ["line 3, temperature_k"]),
    "Celsius": (
        "height_m,temperature_k\n0,15\n500,10\n",
        ["line 2, temperature_k = 15.0", "degrees Celsius: add 273.15", "and 1 more"],
    ),
    "not positive": ("height_m,temperature_k\n0,280\n500,-999\n", ["between 100 and 1500 K"]),
    "hPa": (
        "pressure_pa,temperature_k\n1013,288\n500,250\n",
        ["pressure_pa = 1013.0", "looks like hPa; multiply by 100"],
    ),
    "pressure upward": (
        "pressure_pa,temperature_k\n100000,288\n50000,250\n60000,250\n",
        ["line 4, pressure_pa = 60000.0", "pressure must fall"],
    ),
    "pressure against height": (
        "height_m,pressure_pa,temperature_k\n0,100000,288\n500,100001,250\n",
        ["line 3, pressure_pa", "pressure must fall"],
    ),
    "no height": ("z,temperature_k\n0,288\n500,250\n", ["no column height_m", "found: z, temp"]),
    "no temperature": ("height_m,t\n0,288\n500,250\n", ["no column temperature_k"]),
    "one name twice": ("height_m,temperature_k,height_m\n0,1,0\n", ["two columns have one name"]),
    "two units": (
        "pressure_pa,pressure_hpa,temperature_k\n1,1,1\n2,2,2\n",
        ["both pressure_pa and pressure_hpa"],
    ),
    "not text": (b"\xff\xfe\xfd", ["air.file", "UTF-8"]),
}


@pytest.mark.parametrize("name", ASCENTS)
def test_ascents(write, name):
    text, said = ASCENTS[name]
    write(text, "ascent.csv")
    lines = lines_of(write(HEAD))
    assert len(lines) == 1
    assert "ascent.csv" in lines[0]
    assert all(word in lines[0] for word in said), lines[0]


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("height_m,temperature_k\n2000,270\n9000,230\n", "starts 2000 m above the ground"),
        ("height_m,temperature_k\n2000,270\n9000,230\n", "terrain.surface_altitude_m"),
        ("pressure_pa,temperature_k\n80000,270\n30000,230\n", "give surface_pressure_pa"),
        ("height_m,temperature_k\n-900,270\n-500,268\n", "ends 500 m below the ground"),
    ],
)
def test_ascent_and_ground_do_not_meet(write, text, said):
    write(text, "ascent.csv")
    path = write(HEAD)
    (line,) = lines_of(path)
    assert line.startswith(f"{path}: air: the ascent")
    assert said in line


LEVEL_FILES = {
    "negative thickness": ("0\n100\n50\n200\n", ["line 3, height_m = 50.0", "negative thickness"]),
    "repeated": ("height_m\n0\n100\n100\n", ["line 4, height_m = 100.0: repeats"]),
    "not a number": ("0\n100\nabc\n", ["line 3, height_m = nan", "finite height"]),
    "single": ("0\n100\n", ["at least two layers"]),
    "contrary": ("300\n100\n0\n", ['write order = "top-down"']),
    "no column": ("a,b\n0,1\n1,2\n", ["no column height_m"]),
}


@pytest.mark.parametrize("name", LEVEL_FILES)
def test_level_files(write, name):
    text, said = LEVEL_FILES[name]
    write(text, "levels.csv")
    path = write(SOUND.replace(LEVELS, 'kind = "file"\nfile = "levels.csv"'))
    (line,) = lines_of(path)
    assert "levels.csv: " in line
    assert all(word in line for word in said), line


def test_a_sounding_from_file_and_list_or_neither(plain):
    for air in (
        {"kind": "sounding"},
        {"kind": "sounding", "file": "x.csv", "heights_m": [0.0, 1.0]},
        {"kind": "sounding", "heights_m": [0.0, 1.0]},
        {"kind": "sounding", "heights_m": [0.0, 900.0], "temperatures_k": [280.0, 270.0, 260.0]},
    ):
        plain["air"] = air
        with pytest.raises(InputError, match=r"^<memory>: air"):
            build(plain)


def test_memory_counts_for_listed_heights_too(plain, monkeypatch):
    monkeypatch.setattr(level_sets, "memory_bytes", lambda: 1600 * 25)
    assert level_sets.most_layers() == 5
    plain["levels"] = {"kind": "table", "heights_m": [float(i) for i in range(7)]}
    with pytest.raises(InputError, match="use at most 5"):
        build(plain)
    plain["levels"] = {"kind": "table", "heights_m": [float(i) for i in range(6)]}
    assert build(plain).levels.nlev == 5
