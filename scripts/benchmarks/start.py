"""How long the command takes before it does anything."""

from __future__ import annotations

import subprocess
import sys
import time

ROUNDS = 7
WORDS = (
    ("--help",),
    ("advise", "--help"),
    ("check", "columns/brackwater_coast.toml"),
    ("tableaux",),
)


def seconds(words: tuple[str, ...]) -> float:
    """Shortest time of a few runs."""
    code = "import sys; from levelstride.cli import main; sys.exit(main())"
    times = []
    for _ in range(ROUNDS):
        start = time.perf_counter()
        subprocess.run([sys.executable, "-c", code, *words], check=True, capture_output=True)
        times.append(time.perf_counter() - start)
    return min(times)


def rows() -> list[dict[str, float | int | str]]:
    """Time whole processes: a row per command."""
    return [{"command": " ".join(words), "seconds": seconds(words)} for words in WORDS]
