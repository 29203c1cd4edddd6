import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.column.column_file import levels_csv, to_toml
from levelstride.column.read import build, load
from levelstride.column.variants import with_levels

SAMPLES = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_a_written_column_is_the_same_column(path, tmp_path):
    column = load(path)
    written = tmp_path / "again.toml"
    written.write_text(to_toml(column, "again\nand again"), encoding="utf-8")
    assert load(written).digest == column.digest
    other = with_levels(column, column.levels.interfaces_m[:-1] * 1.01)
    written.write_text(to_toml(other), encoding="utf-8")
    again = load(written)
    assert again.digest == other.digest
    np.testing.assert_array_equal(again.levels.interfaces_m, other.levels.interfaces_m)


@given(st.text(st.characters(codec="utf-8"), max_size=200))
def test_any_title_survives(title):
    column = build(
        {
            "title": title,
            "levels": {"kind": "uniform", "layers": 3, "top_m": 3000.0},
            "air": {"kind": "standard", "name": 'a \\ "b" \x7f'},
            "horizontal": {"grid_spacing_m": 1000.0},
            "split": {"vertical-diffusion": "after-step"},
        }
    )
    assert build(tomllib.loads(to_toml(column))).digest == column.digest


def test_levels_as_csv_are_levels_of_a_column_file(tmp_path, write):
    heights = [0.0, 20.123456789012345, 1.0 / 3.0 + 100.0, 5000.0]
    write(levels_csv(heights, [0.0, 1.0, 2.0, 3.0]), "levels.csv")
    text = (
        "[levels]\nkind='file'\nfile='levels.csv'\n[air]\nkind='standard'\n"
        "[horizontal]\ngrid_spacing_m=1000.0\n"
    )
    np.testing.assert_array_equal(load(write(text)).levels.interfaces_m, heights)
