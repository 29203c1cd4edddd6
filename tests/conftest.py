"""Settings that all tests share."""

import os

from hypothesis import settings

# A change is judged by the same examples each time; whoever develops meets new ones.
settings.register_profile("same-examples", derandomize=True, deadline=None)
if os.environ.get("CI"):
    settings.load_profile("same-examples")
