import os
import subprocess
import sys

import pytest

from levelstride.cli import main

TINY = """\
title = "Tiny [test] column"
[levels]
kind = "geometric"
layers = 6
top_m = 9000.0
lowest_layer_m = 600.0
[air]
kind = "isothermal"
temperature_k = 260.0
[horizontal]
grid_spacing_m = 3000.0
[advice]
tableaux = ["ARS(2,3,2)", "ars233"]
splits = ["sound", "sound+buoyancy"]
divides_s = [600, 900]
"""


@pytest.fixture(name="tiny")
def _tiny(tmp_path):
    path = tmp_path / "tiny.toml"
    path.write_text(TINY)
    return path


@pytest.fixture(name="run")
def _run(capsys, monkeypatch, tmp_path):
    """Run the command in this process, in an empty folder; returns code, output and complaints."""
    folder = tmp_path / "here"
    folder.mkdir()
    monkeypatch.chdir(folder)

    def run(*words):
        code = main([str(word) for word in words])
        captured = capsys.readouterr()
        return code, captured.out, captured.err

    return run


@pytest.fixture(name="start")
def _start():
    """Start the command as a process of its own."""

    def start(*words, **options):
        code = "import sys; from levelstride.cli import main; sys.exit(main())"
        command = [sys.executable, *options.pop("flags", ()), "-c", code, *map(str, words)]
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1"}
        return subprocess.run(
            command, capture_output=True, text=True, env=environment, check=False, **options
        )

    return start
