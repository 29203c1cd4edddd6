"""Finished work kept on disk as it ends, so that a calculation can be broken off and taken up."""

import hashlib
import json
import re
from pathlib import Path
from typing import Any, Final

from .atomic import make_folder, sweep, write_file

FOLDER: Final = "kept"
"""Folder inside the one of the results."""


class KeptItems:
    """A folder with one small file for every finished item.

    A file is written whole under a temporary name, synced and renamed, so that at every moment
    each file is complete, even if the process or the machine is stopped. It holds its own key and a
    hash of its content; one that does not agree with both (a damaged disk, a changed file) counts
    as missing, and its item is done again.

    Parameters
    ----------
    folder : Path
        Folder of the results; ``kept`` is made in it with the first item. Its parent must exist.
    """

    def __init__(self, folder: Path) -> None:
        self._parent, self.folder = folder, folder / FOLDER
        self._made = False
        sweep(folder)
        sweep(self.folder)

    def find(self, key: str) -> Any:
        """Look up an item.

        Parameters
        ----------
        key : str
            Hexadecimal digits that stand for all that the item depends on.

        Returns
        -------
        Any
            The plain data that were kept; None if there are none.
        """
        path = self._path(key)
        try:
            stored = json.loads(path.read_bytes())
            sound = stored["key"] == key and stored["sha256"] == _hash(key, stored["item"])
        except (OSError, ValueError, KeyError, TypeError, RecursionError):
            return None
        return stored["item"] if sound else None

    def keep(self, key: str, item: Any) -> None:
        """Keep an item; when this returns it is on disk.

        Parameters
        ----------
        key : str
            Hexadecimal digits.
        item : Any
            Plain data for JSON, finite numbers only.

        Raises
        ------
        InputError
            If it cannot be written.
        """
        if not self._made:
            make_folder(self._parent)
            make_folder(self.folder)
            self._made = True
        stored = {"key": key, "sha256": _hash(key, item), "item": item}
        write_file(self._path(key), (json.dumps(stored, allow_nan=False) + "\n").encode())

    def _path(self, key: str) -> Path:
        if not re.fullmatch("[0-9a-f]{8,}", key):
            raise ValueError(f"a key is hexadecimal digits, not {key!r}")
        return self.folder / f"{key}.json"


def _hash(key: str, item: Any) -> str:
    text = json.dumps([key, item], sort_keys=True, allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()
