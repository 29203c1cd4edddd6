"""Measure what the modules beside this one offer as rows(); tables, and the numbers as JSON."""

from __future__ import annotations

import argparse
import importlib.util
import json
import platform
import sys
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

HERE = Path(__file__).parent
Rows = list[Mapping[str, float | int | str]]


def modules() -> list[str]:
    return sorted(path.stem for path in HERE.glob("*.py") if path.stem != "__main__")


def rows_of(name: str) -> Rows:
    spec = importlib.util.spec_from_file_location(f"benchmark_{name}", HERE / f"{name}.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    found: Rows = module.rows()
    return found


def written(value: Any) -> str:
    return f"{value:.4g}" if isinstance(value, float) else str(value)


def show(name: str, rows: Rows) -> None:
    table = Table(title=name, title_justify="left", box=box.SIMPLE_HEAD, pad_edge=False)
    headings = list(dict.fromkeys(key for row in rows for key in row))
    for heading in headings:
        table.add_column(Text(heading.replace("_", " ")), justify="right")
    for row in rows:
        table.add_row(*(Text(written(row.get(heading, ""))) for heading in headings))
    width = None if sys.stdout.isatty() else 160
    Console(markup=False, highlight=False, width=width).print(table)


def main() -> int:
    parser = argparse.ArgumentParser(prog="scripts/bench", description=__doc__)
    parser.add_argument("names", nargs="*", help=f"what to measure: {', '.join(modules())}")
    parser.add_argument("--json", type=Path, help="file to keep the numbers in")
    parser.add_argument("--from", dest="folder", type=Path, default=Path(), help=argparse.SUPPRESS)
    asked = parser.parse_args()
    unknown = sorted(set(asked.names) - set(modules()))
    if unknown:
        parser.error(f"{', '.join(unknown)} is not there; there are {', '.join(modules())}")
    found = {}
    for name in asked.names or modules():
        found[name] = rows_of(name)
        show(name, found[name])
    if asked.json is not None:
        kept = {
            "created_utc": time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime()),
            "python": platform.python_version(),
            "machine": platform.machine(),
            "tables": found,
        }
        path = asked.folder / asked.json
        path.write_text(json.dumps(kept, indent=2) + "\n", encoding="utf-8")
        print(f"written: {path}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
