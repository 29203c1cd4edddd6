"""``levelstride schema``: the JSON Schema of the column file."""

import sys

from levelstride.cli.options import Json


def schema(*, json: Json = False) -> None:
    """Print the JSON Schema of the column file, which editors check and complete with."""
    from levelstride.column.read import schema as column_schema
    from levelstride.results.export import to_json

    sys.stdout.write(to_json(column_schema()))
