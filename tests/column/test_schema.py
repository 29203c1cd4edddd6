import json
import tomllib
from pathlib import Path

import jsonschema
import pytest

from levelstride.column.definition import Definition
from levelstride.column.explain import keys_of
from levelstride.column.read import schema

SAMPLES = sorted((Path(__file__).parents[2] / "columns").glob("*.toml"))
UNITS = {
    "_m": "[m]",
    "_pa": "[Pa]",
    "_k": "[K]",
    "_s": "[s]",
    "m_per_s": "[m/s]",
    "m2_per_s": "[m2/s]",
    "_per_m": "[1/m]",
    "_deg": "[degrees]",
}


def test_it_is_a_schema():
    made = schema()
    jsonschema.Draft202012Validator.check_schema(made)
    json.dumps(made, allow_nan=False)


def test_every_key_says_what_it_means_with_its_unit():
    for kinds in keys_of(Definition).values():
        for keys in kinds.values():
            for key, meaning in keys.items():
                assert meaning, key
                endings = [ending for ending in UNITS if key.endswith(ending)]
                if endings and not key.endswith(("per_s", "_error")):
                    assert UNITS[max(endings, key=len)] in meaning, key
    for made in [schema(), *schema()["$defs"].values()]:
        for key, described in made["properties"].items():
            assert described.get("description"), key


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_samples_fit(path):
    jsonschema.validate(tomllib.loads(path.read_text()), schema())


@pytest.mark.parametrize(
    "change",
    [
        {"levels": {"kind": "uniform", "layers": 10, "top_m": "high"}},
        {"horizontal": {"grid_spacing_m": -1.0}},
        {"air": {"kind": "vacuum"}},
        {"surprise": 1},
    ],
)
def test_mistakes_do_not_fit(plain, change):
    jsonschema.validate(plain, schema())
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(plain | change, schema())
