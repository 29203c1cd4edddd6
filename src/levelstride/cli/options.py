"""Arguments that several commands share."""

from typing import Annotated

from cyclopts import Parameter

ColumnFile = Annotated[str, Parameter(help="Column file (TOML).")]
Json = Annotated[
    bool, Parameter(name="--json", help="Print JSON to standard output and nothing else there.")
]
