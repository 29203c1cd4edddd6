"""Put the contents of the files that a column file refers to into its definition.

After this a definition stands alone: it can be built again elsewhere, and its digest covers
everything.
"""

import hashlib
from collections.abc import Callable
from pathlib import Path

from .csv_table import CsvTable, read_csv, read_text
from .definition import AdviceTable, Definition, FileLevels, OneAir, SoundingAir, TableLevels
from .level_sets import check_heights
from .problems import Problems, nearest
from .sounding import check_ascent, read_ascent


def embed(
    definition: Definition, folder: Path, problems: Problems, broken: frozenset[str]
) -> tuple[Definition, frozenset[str]]:
    """Read every file named in the definition.

    Parameters
    ----------
    definition : Definition
        The model of the column file.
    folder : Path
        Folder that relative paths start from.
    problems : Problems
        Where mistakes are added.
    broken : frozenset of str
        Tables that are stand-ins already.

    Returns
    -------
    definition : Definition
        With CSV contents in place of CSV names, and an absolute path of the tableau file.
    broken : frozenset of str
        With the tables whose files are wrong added.
    """
    changed: dict[str, object] = {}
    wrong = set(broken)
    if isinstance(definition.levels, FileLevels):
        table = _levels(definition.levels, folder, problems)
        changed["levels"] = table or definition.levels
        wrong |= set() if table else {"levels"}
    airs = []
    for i, air in enumerate(definition.air):
        where = "air" if len(definition.air) == 1 else f"air[{i}]"
        made = _air(air, where, folder, problems)
        airs.append(made or air)
        wrong |= set() if made else {"air"}
    changed["air"] = airs
    if definition.reference is not None:
        made = _air(definition.reference, "reference", folder, problems)
        changed["reference"] = made or definition.reference
        wrong |= set() if made else {"reference"}
    changed["advice"] = _advice(definition.advice, folder, problems)
    return definition.model_copy(update=changed), frozenset(wrong)


def _levels(table: FileLevels, folder: Path, problems: Problems) -> TableLevels | None:
    read = read_csv(folder / table.file, problems, "levels.file", bare="height_m")
    if read is None:
        return None
    name = "height_m" if "height_m" in read.columns else ""
    if not name and len(read.columns) == 1:
        name = next(iter(read.columns))
    if not name:
        advice = f"no column height_m among several; {nearest('height_m', read.columns)}; rename it"
        problems.add("line 1", advice, file=read.file)
        return None
    values = read.columns[name].tolist()
    label = _row_label(read, name)
    if not check_heights(values, table.at, table.order, label, problems, read.file):
        return None
    return TableLevels(kind="table", heights_m=values, at=table.at, order=table.order)


def _row_label(read: CsvTable, name: str) -> Callable[[int], str]:
    def label(row: int) -> str:
        return name if row < 0 else f"line {read.lines[row]}, {name}"

    return label


def _air(air: OneAir, where: str, folder: Path, problems: Problems) -> OneAir | None:
    if not isinstance(air, SoundingAir):
        return air
    lists = (air.heights_m, air.pressures_pa, air.temperatures_k, air.winds_m_per_s)
    listed = any(values is not None for values in lists)
    if (air.file is None) != listed:
        problems.add(
            f"{where}.file",
            "a sounding needs either a file or the lists temperatures_k and heights_m or "
            "pressures_pa; give one of the two",
        )
        return None
    if air.file is None:
        return air
    ascent = read_ascent(folder / air.file, f"{where}.file", problems)
    if ascent is None or not check_ascent(ascent, problems):
        return None
    contents = {name: values.tolist() for name, values in ascent.values.items()}
    return air.model_copy(update={"file": None, **contents})


def _advice(advice: AdviceTable, folder: Path, problems: Problems) -> AdviceTable:
    if advice.tableau_file is None:
        return advice
    path = folder / advice.tableau_file
    try:
        read_text(path)
    except (OSError, ValueError) as error:
        reason = (isinstance(error, OSError) and error.strerror) or str(error)
        problems.add(
            "advice.tableau_file", f"cannot read {path}: {reason}; check the path", path.name
        )
        return advice
    return advice.model_copy(update={"tableau_file": str(path.resolve())})


def content_digest(path: str) -> str:
    """SHA-256 of a file's contents, so that a digest does not depend on where the file lies."""
    return hashlib.sha256(Path(path).read_bytes()).hexdigest()
