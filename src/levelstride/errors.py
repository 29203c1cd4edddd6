"""What can go wrong, sorted by who can mend it."""


class LevelstrideError(Exception):
    """Base of every error this package raises on purpose."""

    exit_code = 1


class InputError(LevelstrideError):
    """Something the user gave is wrong and the user can mend it.

    Parameters
    ----------
    problems : str
        One line per mistake: file, key path, value received, what is allowed, what to do.
    """

    exit_code = 2

    def __init__(self, *problems: str) -> None:
        self.problems: tuple[str, ...] = problems
        super().__init__("\n".join(problems))


class CalculationError(LevelstrideError):
    """The question is sound but the calculation could not be finished."""

    exit_code = 3


class InternalError(LevelstrideError):
    """A promise of the program itself is broken; never the user's fault."""

    exit_code = 1


def in_words(error: BaseException) -> tuple[list[str], int]:
    """Say what went wrong.

    Parameters
    ----------
    error : BaseException
        The error.

    Returns
    -------
    lines : list of str
        One line per mistake.
    code : int
        Exit code: 2 bad input, 3 the calculation could not be finished, 1 a fault of the program.

    Examples
    --------
    >>> in_words(CalculationError("no step is stable"))
    (['no step is stable'], 3)
    """
    if isinstance(error, LevelstrideError) and not isinstance(error, InternalError):
        return str(error).splitlines(), error.exit_code
    if isinstance(error, MemoryError):
        return ["there is too little memory for this column; use fewer layers or workers"], 3
    return [f"fault of the program: {error!r}; run again with --debug and report it"], 1
