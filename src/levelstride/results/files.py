"""The files of an advice."""

from collections.abc import Sequence
from pathlib import Path

from .atomic import write_folder
from .dataset import Advice, ColumnOutcome
from .export import to_csv, to_json, to_text
from .outcomes import to_summary_csv
from .store import to_hdf5


def write_advice(advice: Advice, folder: Path) -> tuple[Path, ...]:
    """Write ``advice.json``, ``advice.csv``, ``advice.txt`` and ``advice.h5`` into a folder.

    Parameters
    ----------
    advice : Advice
        The advice.
    folder : Path
        The folder; made if it is missing and its parent exists.

    Returns
    -------
    tuple of Path
        The files written.

    Raises
    ------
    InputError
        If they cannot be written; then none is.
    """
    return write_folder(
        folder,
        {
            "advice.json": to_json(advice).encode(),
            "advice.csv": to_csv(advice).encode(),
            "advice.txt": to_text(advice).encode(),
            "advice.h5": to_hdf5(advice),
        },
    )


def write_summary(outcomes: Sequence[ColumnOutcome], folder: Path) -> Path:
    """Write ``summary.csv`` into a folder.

    Parameters
    ----------
    outcomes : sequence of ColumnOutcome
        One per column.
    folder : Path
        The folder; made if it is missing and its parent exists.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    InputError
        If it cannot be written.
    """
    return write_folder(folder, {"summary.csv": to_summary_csv(outcomes).encode()})[0]
