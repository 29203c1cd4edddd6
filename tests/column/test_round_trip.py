import copy
import json
import pickle
from dataclasses import fields
from pathlib import Path

import numpy as np
import pytest

from levelstride.column.read import build, load

SAMPLES = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))


def assert_same(one, two):
    assert one.digest == two.digest
    np.testing.assert_array_equal(one.levels.interfaces_m, two.levels.interfaces_m)
    for first, second in zip(one.airs, two.airs, strict=True):
        for field in fields(first):
            np.testing.assert_array_equal(getattr(first, field.name), getattr(second, field.name))
    for name in ("slope_f", "diffusivity_c", "diffusivity_f", "upper_damping_f"):
        np.testing.assert_array_equal(getattr(one, name), getattr(two, name))
    assert one.split == two.split
    assert (one.reference is None) == (two.reference is None)


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_definition_makes_the_same_column_again(path):
    column = load(path)
    assert_same(column, build(column.definition))
    assert_same(column, build(json.loads(json.dumps(column.definition))))
    assert_same(column, pickle.loads(pickle.dumps(column)))


def test_digest_depends_on_contents_not_on_place(write, tmp_path):
    text = (
        "[levels]\nkind='file'\nfile='z.csv'\n[air]\nkind='standard'\n"
        "[horizontal]\ngrid_spacing_m=1000.0\n[advice]\ntableau_file='mine.toml'\n"
    )
    write("0\n100\n300\n", "z.csv")
    write("# mine\n", "mine.toml")
    first = load(write(text))
    other = tmp_path / "elsewhere"
    other.mkdir()
    for name in ("z.csv", "mine.toml", "column.toml"):
        (other / name).write_bytes((tmp_path / name).read_bytes())
    assert load(other / "column.toml").digest == first.digest
    write("0\n100\n301\n", "z.csv")
    changed = load(tmp_path / "column.toml")
    assert changed.digest != first.digest
    write("# mine, changed\n", "mine.toml")
    assert load(tmp_path / "column.toml").digest != changed.digest
    assert first.advice.tableau_file == str((tmp_path / "mine.toml").resolve())


def test_defaults_and_whole_numbers_do_not_change_the_digest(plain):
    first = build(plain)
    plain["levels"]["top_m"] = 10000
    plain["column"] = {"staggering": "charney-phillips"}
    assert build(plain).digest == first.digest


def test_a_changed_definition_is_another_column(plain):
    column = build(plain)
    changed = copy.deepcopy(dict(column.definition))
    changed["levels"]["top_m"] = np.float64(12000.0)
    changed["levels"]["layers"] = np.int64(12)
    again = build(changed)
    assert again.levels.nlev == 12
    assert again.digest != column.digest


def test_split_by_name_term_or_not_at_all(plain):
    assert build(plain).split is None
    plain["split"] = {"name": "sound"}
    assert build(plain).split == "sound"
    plain["split"] = "sound+buoyancy"
    assert build(plain).split == "sound+buoyancy"
    plain["split"] = {"buoyancy": "implicit"}
    assert build(plain).split == {"buoyancy": "implicit"}


def test_centres_and_order(plain):
    heights = [0.0, 100.0, 250.0, 500.0]
    plain["levels"] = {"kind": "table", "heights_m": heights}
    expected = build(plain).levels.interfaces_m
    np.testing.assert_array_equal(expected, heights)
    plain["levels"] = {"kind": "table", "heights_m": heights[::-1], "order": "top-down"}
    np.testing.assert_array_equal(build(plain).levels.interfaces_m, heights)
    plain["levels"] = {"kind": "table", "heights_m": [50.0, 175.0, 375.0], "at": "centres"}
    np.testing.assert_allclose(build(plain).levels.interfaces_m, heights)


def test_levels_from_a_file_with_several_columns(write):
    write("index,height_m\n3,500\n2,250\n1,100\n0,0\n", "z.csv")
    text = (
        "[levels]\nkind='file'\nfile='z.csv'\norder='top-down'\n[air]\nkind='standard'\n"
        "[horizontal]\ngrid_spacing_m=1000.0\n"
    )
    column = load(write(text))
    np.testing.assert_array_equal(column.levels.interfaces_m, [0.0, 100.0, 250.0, 500.0])
    assert column.definition["levels"]["kind"] == "table"
