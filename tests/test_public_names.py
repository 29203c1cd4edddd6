import subprocess
import sys

import levelstride

NAMES = {
    "Advice",
    "AdviceRow",
    "CalculationError",
    "Calibration",
    "Column",
    "ColumnModes",
    "Comparison",
    "CurrentConfiguration",
    "Headroom",
    "InputError",
    "KnobMap",
    "Limit",
    "Observed",
    "Stretch",
    "Weights",
    "WorkPrecision",
    "advise",
    "build",
    "calibrate",
    "compare",
    "headroom",
    "knob_map",
    "level_report",
    "limit",
    "load",
    "modes",
    "stretch",
    "work_precision",
    "write_advice",
}
HEAVY = {"numpy", "scipy", "numba", "h5py", "pydantic", "rich", "cyclopts"}


def test_public_names_are_pinned_and_there():
    assert set(levelstride.__all__) == NAMES
    assert set(levelstride.__dir__()) >= NAMES
    for name in NAMES:
        assert getattr(levelstride, name).__doc__


def test_importing_the_package_imports_nothing_heavy():
    code = "import sys, levelstride; print(*{m.split('.')[0] for m in sys.modules})"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert not HEAVY & set(found.stdout.split())
