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
