"""Which column files a user means who names several, or a folder."""

import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from types import MappingProxyType

from ..errors import InputError


def column_files(given: Sequence[str]) -> Mapping[str, str]:
    """Find the column files among files and folders.

    Parameters
    ----------
    given : sequence of str
        Column files; and folders, of which every ``.toml`` file is taken, but for those that hold
        tableaux instead of a column.

    Returns
    -------
    mapping of str to str
        Paths by a name of their own: that of the file without its ending, with as many folders
        before it as tell files of the same name apart.

    Raises
    ------
    InputError
        If a folder has no column files or cannot be read.
    """
    paths: list[Path] = []
    problems: list[str] = []
    for one in map(Path, given):
        if not one.is_dir():
            paths.append(one)
            continue
        try:
            inside = sorted(p for p in one.glob("*.toml") if p.is_file() and _may_be_column(p))
        except OSError as error:
            problems.append(f"{one}: cannot read this folder: {error.strerror}; check the path")
            continue
        if not inside:
            problems.append(f"{one}: this folder has no column files; they end in .toml")
        paths += inside
    if problems:
        raise InputError(*problems)
    unlike = list({path.absolute(): path for path in paths}.values())
    return MappingProxyType(dict(zip(_names(unlike), map(str, unlike), strict=True)))


def _may_be_column(path: Path) -> bool:
    """Whether a file is none of tableaux; one that cannot be read may be anything."""
    if path.name.startswith("."):
        return False
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return True
    return "levels" in raw or not {"tableau", "explicit"} & raw.keys()


def _names(paths: Sequence[Path]) -> list[str]:
    parts = [(*path.absolute().parent.parts[1:], path.stem) for path in paths]
    depth, deepest = 1, max(map(len, parts), default=1)
    while True:
        names = ["-".join(part[-depth:]) for part in parts]
        if len({name.lower() for name in names}) == len(names):
            return names
        if depth == deepest:
            return [f"{name}-{i}" for i, name in enumerate(names, start=1)]
        depth += 1
