"""A small sound column, fresh for every test, and a way to write files."""

from pathlib import Path

import pytest


@pytest.fixture
def plain():
    return {
        "title": "test column",
        "levels": {"kind": "uniform", "layers": 10, "top_m": 10000.0},
        "air": {"kind": "isothermal", "temperature_k": 250.0},
        "horizontal": {"grid_spacing_m": 1000.0},
    }


@pytest.fixture
def write(tmp_path):
    def put(text: str | bytes, name: str = "column.toml") -> Path:
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return put
