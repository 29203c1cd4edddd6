"""Words of the command line turned into one call."""

from importlib import import_module

from cyclopts import App, CycloptsError, Parameter

from levelstride import __version__
from levelstride.cli.commands import COMMANDS
from levelstride.errors import InputError


def parse(words: list[str]) -> int:
    """Call the command that the words ask for.

    Parameters
    ----------
    words : list of str
        Words after the program's name.

    Returns
    -------
    int
        Exit code of the command.

    Raises
    ------
    InputError
        If the words make no command: one line.
    """
    app = App(
        name="levelstride",
        help_format="plaintext",
        version=__version__,
        default_parameter=Parameter(negative=()),
    )
    for name, text in COMMANDS.items():
        function = getattr(import_module(f"levelstride.cli.{name}"), name)
        app.command(function, name=name, help=text)
    try:
        command, bound, _ = app.parse_args(words, print_error=False, exit_on_error=False)
    except CycloptsError as error:
        text = " ".join(str(error).split()).rstrip(".")
        asked = f" {words[0]}" if words[0] in COMMANDS else ""
        raise InputError(f"{text}; 'levelstride{asked} --help' lists what is known") from None
    code = command(*bound.args, **bound.kwargs)
    return int(code or 0)
