"""The commands by name, with the module and the line of help of each."""

from collections.abc import Mapping
from typing import Final

COMMANDS: Final[Mapping[str, str]] = {
    "check": "Read a column file and report on its levels and air.",
    "limit": "Find the longest stable step of one tableau and splitting, and what bites first.",
    "advise": "Try tableaux and splittings and advise a step for each, the cheapest first.",
    "compare": "Put tableaux and splittings side by side: accuracy, damping and cost.",
    "stretch": "Stretch the levels and find how far a step goes with them, and what limits it.",
    "calibrate": "Compare steps that a model survived or lost with the linear limit.",
    "modes": "Show the normal modes of a column, and how far levels and a step distort them.",
    "tableaux": "List the IMEX tableaux, or show one with its audit.",
    "schema": "Print the JSON Schema of the column file, for editors.",
}
"""Each lives in the module of its name, in a function of its name."""


def top_help() -> str:
    """Write the help of the whole command, without importing what parses the rest."""
    width = max(map(len, COMMANDS))
    listed = "\n".join(f"  {name:<{width}}  {text}" for name, text in COMMANDS.items())
    return f"""\
Usage: levelstride COMMAND [OPTIONS]

How long a step can this level set carry, and what bites first?

Commands:
{listed}

Options:
  --help, -h  Show this text; after a command, its own.
  --version   Show the version.
  --debug     Show where an error comes from.

Exit codes: 0 done, 2 bad input, 3 the calculation could not be finished."""
