"""Arguments that several commands share, and what they may not say."""

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

from cyclopts import Parameter

if TYPE_CHECKING:
    from levelstride.column.column import Column

ColumnFile = Annotated[str, Parameter(help="Column file (TOML).")]
Json = Annotated[
    bool, Parameter(name="--json", help="Print JSON to standard output and nothing else there.")
]
Certify = Annotated[
    bool,
    Parameter(
        name="--certify",
        negative=(),
        help="Check both sides of the limit at every sampled wave, and find it again where one "
        "refutes it; takes longer.",
    ),
]
Efolding = Annotated[
    float | None,
    Parameter(help="Tolerated e-folding time [s]; that of the column file by default."),
]
Out = Annotated[Path, Parameter(help="Folder for the files; made if missing.")]
Workers = Annotated[
    int | None, Parameter(help="Processes to share the work; one per core by default.")
]
Cluster = Annotated[
    str | None, Parameter(help="Address of a Dask scheduler whose workers do the work instead.")
]


def check_splitting(split: str | None, column: "Column", file: str) -> None:
    """Refuse to go on without a splitting.

    Parameters
    ----------
    split : str or None
        What ``--split`` says.
    column : Column
        The column, which may name one.
    file : str
        Its file.

    Raises
    ------
    InputError
        If neither names one.
    """
    from levelstride.errors import InputError

    if split is None and column.split is None:
        raise InputError(
            f"--split: none given and {file} has no [split]; name one, e.g. --split sound"
        )


def check_efolding(efolding_s: float | None) -> None:
    """Refuse an e-folding time that is none.

    Parameters
    ----------
    efolding_s : float or None
        What ``--efolding`` says [s].

    Raises
    ------
    InputError
        If it is no time above 0.
    """
    from levelstride.errors import InputError

    if efolding_s is not None and not 0.0 < efolding_s < 1e12:
        raise InputError(f"--efolding {efolding_s:g}: must be a time above 0 [s]")
