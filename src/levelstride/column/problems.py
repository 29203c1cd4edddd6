"""Collect every mistake of a file, one line each, before any of them is raised."""

from collections.abc import Iterable, Sequence
from difflib import get_close_matches

from ..errors import InputError


def show(value: object) -> str:
    """Write a received value on one short line, as it would stand in the file."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float | str):
        text = repr(value) if isinstance(value, float) else f'"{value}"'
    elif isinstance(value, int):
        text = str(value) if value.bit_length() < 200 else "a whole number of over 60 digits"
    elif isinstance(value, dict):
        text = "a table"
    elif isinstance(value, list | tuple):
        text = f"a list of {len(value)}"
    else:
        text = str(value)
    return brief(text, 60)


def brief(text: str, longest: int = 200) -> str:
    """Keep a text from the user's file on one line, printable and short."""
    text = "".join(c if c.isprintable() else "?" for c in text)
    return text if len(text) <= longest else f"{text[: longest - 3]}..."


def nearest(word: str, known: Iterable[str]) -> str:
    """Name the nearest known word, or all known words where none is near."""
    choices = list(known)
    close = get_close_matches(word, choices, n=1, cutoff=0.6)
    if close:
        return f"did you mean {close[0]}?"
    return f"known here: {brief(', '.join(choices), 400)}"


class Problems:
    """The mistakes found so far in one file and the files that it refers to.

    Parameters
    ----------
    source : str
        The file as the user named it.
    """

    def __init__(self, source: str) -> None:
        self.source = source
        self.lines: list[str] = []

    def add(self, where: str, advice: str, *value: object, file: str | None = None) -> None:
        """Add one mistake.

        Parameters
        ----------
        where : str
            Key path or line and column.
        advice : str
            What is allowed and how to mend it.
        *value : object
            The value received, if there is one.
        file : str, optional
            The file at fault, where it is not the source itself.
        """
        received = f" = {show(value[0])}" if value else ""
        place = f"{where}{received}: " if where else ""
        line = f"{file or self.source}: {place}{advice}"
        if line not in self.lines:
            self.lines.append(line)

    def add_many(
        self, where: Sequence[str], advice: str, *value: object, file: str | None = None
    ) -> None:
        """Add a mistake made at several places: the first in full, the others counted."""
        more = f" (and {len(where) - 1} more like it)" if len(where) > 1 else ""
        self.add(where[0], advice + more, *value, file=file)

    def raise_if_any(self) -> None:
        """Raise everything found.

        Raises
        ------
        InputError
            If any mistake was added.
        """
        if self.lines:
            raise InputError(*self.lines)
