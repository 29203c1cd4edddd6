"""Arguments that several commands share."""

from typing import Annotated

from cyclopts import Parameter

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
