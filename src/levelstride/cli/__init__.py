"""The command ``levelstride``: one module per command, none imported before it is wanted."""

import os
import signal
import sys
import threading
from collections.abc import Sequence

from levelstride import __version__
from levelstride.cli.commands import top_help
from levelstride.errors import in_words

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
    keyboard = _Keyboard()
    try:
        with keyboard:
            code = _run(words)
            sys.stdout.flush()
            return code
    except BrokenPipeError:
        # Whoever read the output has left; nothing may be flushed to it at the end either.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except (KeyboardInterrupt, Exception) as error:
        if keyboard.interrupted or isinstance(error, KeyboardInterrupt):
            for line in ("interrupted", *getattr(error, "__notes__", ())):
                print(f"levelstride: {line}", file=sys.stderr)
            return INTERRUPTED
        if debug:
            raise
        return _complain(error)


class _Keyboard:
    """Remembers an interruption, which a library being loaded may turn into another error."""

    interrupted = False

    def __enter__(self) -> None:
        self._before = None
        if threading.current_thread() is threading.main_thread():
            self._before = signal.signal(signal.SIGINT, self._interrupt)

    def __exit__(self, *_: object) -> None:
        if self._before is not None:
            signal.signal(signal.SIGINT, self._before)

    def _interrupt(self, *_: object) -> None:
        self.interrupted = True
        raise KeyboardInterrupt


def _run(words: list[str]) -> int:
    from levelstride.cli.parsing import parse

    return parse(words)


def _complain(error: Exception) -> int:
    lines, code = in_words(error)
    for line in (*lines, *getattr(error, "__notes__", ())):
        print(f"levelstride: {line}", file=sys.stderr)
    return code
