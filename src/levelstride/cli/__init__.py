"""The command ``levelstride``: one module per command, none imported before it is wanted."""

import sys
from collections.abc import Sequence

from levelstride import __version__
from levelstride.cli.commands import top_help
from levelstride.errors import InternalError, LevelstrideError

INTERRUPTED = 130
"""Exit code after an interruption from the keyboard, as shells have it."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Words after the command's name; those of the process by default.

    Returns
    -------
    int
        Exit code: 0 done, 2 bad input, 3 the calculation could not be finished, 1 a fault of the
        program, 130 interrupted.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    debug = "--debug" in words
    words = [word for word in words if word != "--debug"]
    if words in ([], ["--help"], ["-h"], ["help"]):
        print(top_help())
        return 0
    if words == ["--version"]:
        print(__version__)
        return 0
    try:
        return _run(words)
    except KeyboardInterrupt:
        print("levelstride: interrupted, nothing was written", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        sys.stderr.close()
        return 1
    except Exception as error:
        if debug:
            raise
        return _complain(error)


def _run(words: list[str]) -> int:
    from levelstride.cli.parsing import parse

    return parse(words)


def _complain(error: Exception) -> int:
    if isinstance(error, LevelstrideError) and not isinstance(error, InternalError):
        lines = str(error).splitlines()
        code = error.exit_code
    elif isinstance(error, MemoryError):
        lines = ["there is too little memory for this column; use fewer layers or workers"]
        code = 3
    else:
        lines = [f"fault of the program: {error!r}; run again with --debug and report it"]
        code = 1
    for line in lines:
        print(f"levelstride: {line}", file=sys.stderr)
    return code
