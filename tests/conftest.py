"""Settings that all tests share."""

import os

import pytest
from hypothesis import settings

# A change is judged by the same examples each time; whoever develops meets new ones. How long an
# example takes judges nothing: machines are shared.
settings.register_profile("new-examples", deadline=None)
settings.register_profile("same-examples", derandomize=True, deadline=None)
settings.load_profile("same-examples" if os.environ.get("CI") else "new-examples")


@pytest.fixture(autouse=True)
def _width_of_a_file(monkeypatch):
    """Output is as wide as in a file, whatever terminal the tests run in."""
    monkeypatch.delenv("COLUMNS", raising=False)
