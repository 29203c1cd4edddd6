import doctest
import pkgutil
from importlib import import_module
from pathlib import Path

import pytest

import levelstride

MODULES = ["levelstride"] + [
    module.name for module in pkgutil.walk_packages(levelstride.__path__, "levelstride.")
]
FOUND = [
    (f"{test.name}", test)
    for name in MODULES
    for test in doctest.DocTestFinder().find(import_module(name))
    if test.examples
]


def test_there_are_examples():
    assert len(FOUND) > 15


@pytest.mark.parametrize("test", [t for _, t in FOUND], ids=[name for name, _ in FOUND])
def test_example_runs(test, monkeypatch):
    monkeypatch.chdir(Path(__file__).parents[1])
    lines = []
    doctest.DocTestRunner().run(test, out=lines.append)
    assert not lines, "".join(lines)
