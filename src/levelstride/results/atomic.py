"""Write files whole or not at all."""

import errno
import os
import re
import shutil
import socket
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import IO, Final

from levelstride.errors import InputError

_MEND: Final[Mapping[int, str]] = {
    errno.ENOSPC: "the disk is full; make room or name another folder with --out",
    errno.EDQUOT: "your disk quota is used up; make room or name another folder with --out",
    errno.EROFS: "the file system is read-only; name another folder with --out",
    errno.EACCES: "writing there is not allowed; change its permissions or name another folder",
    errno.EPERM: "writing there is not allowed; change its permissions or name another folder",
    errno.ENAMETOOLONG: "the name is too long; name another folder with --out",
}


_PREFIX: Final = ".levelstride-"
"""How the names of temporary files and folders begin: then follow host and process."""


def check_folder(folder: Path) -> None:
    """Find out before a long calculation whether a folder of files can be written.

    Parameters
    ----------
    folder : Path
        The folder; it may be missing, but its parent must exist.

    Raises
    ------
    InputError
        If the folder cannot be made or written into.
    """
    try:
        place = _place_of(folder)
        if not os.access(place, os.W_OK | os.X_OK):
            raise PermissionError(errno.EACCES, "not writable")
    except OSError as error:
        raise _problem(folder, error) from error


def make_folder(folder: Path) -> None:
    """Make a folder if it is missing.

    Parameters
    ----------
    folder : Path
        The folder; its parent must exist.

    Raises
    ------
    InputError
        If it cannot be made.
    """
    try:
        _place_of(folder)
        folder.mkdir(exist_ok=True)
    except OSError as error:
        raise _problem(folder, error) from error


def write_file(path: Path, content: bytes) -> None:
    """Write one file whole: under its name there is always the old or the new content.

    Parameters
    ----------
    path : Path
        The file; its folder must exist.
    content : bytes
        Its content.

    Raises
    ------
    InputError
        If it cannot be written.
    """
    try:
        descriptor, name = tempfile.mkstemp(prefix=_own_prefix(), dir=path.parent)
        temporary = Path(name)
        try:
            with os.fdopen(descriptor, "wb") as file:
                _write_through(file, content)
            temporary.chmod(0o666 & ~_umask())
            temporary.replace(path)
        finally:
            temporary.unlink(missing_ok=True)
        _sync_folder(path.parent)
    except OSError as error:
        raise _problem(path.parent, error) from error


def sweep(folder: Path) -> None:
    """Remove temporary files that processes left in a folder when they were killed.

    Parameters
    ----------
    folder : Path
        The folder; what is in it under other names, or belongs to a living process or another
        host, stays.
    """
    try:
        names = [entry.name for entry in os.scandir(folder) if entry.name.startswith(_PREFIX)]
    except OSError:
        return
    ours = re.compile(rf"{re.escape(f'{_PREFIX}{socket.gethostname()}_')}(\d+)-")
    for name in names:
        owner = ours.match(name)
        if owner and not _alive(int(owner[1])):
            left = folder / name
            if left.is_dir() and not left.is_symlink():
                shutil.rmtree(left, ignore_errors=True)
            else:
                left.unlink(missing_ok=True)


def _own_prefix() -> str:
    return f"{_PREFIX}{socket.gethostname()}_{os.getpid()}-"


def _alive(process: int) -> bool:
    if os.name != "posix":
        return True
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except OSError:
        pass
    return True


def write_folder(folder: Path, files: Mapping[str, bytes]) -> tuple[Path, ...]:
    """Write files into a folder, each whole, none if one of them cannot be written.

    The files are written and synced to a temporary folder on the same file system first and
    renamed only when all are there. A missing folder is made; other files in an existing one are
    left alone.

    Parameters
    ----------
    folder : Path
        The folder; its parent must exist.
    files : mapping of str to bytes
        Contents by file name.

    Returns
    -------
    tuple of Path
        The files written.

    Raises
    ------
    InputError
        If the folder cannot be made or written into, or the disk is full.
    """
    try:
        staging = Path(tempfile.mkdtemp(prefix=_own_prefix(), dir=_place_of(folder)))
    except OSError as error:
        raise _problem(folder, error) from error
    try:
        for name, content in files.items():
            _write_synced(staging / name, content)
        _publish(staging, folder, tuple(files))
    except OSError as error:
        raise _problem(folder, error) from error
    finally:
        shutil.rmtree(staging, ignore_errors=True)
    return tuple(folder / name for name in files)


def _place_of(folder: Path) -> Path:
    """Where the temporary folder goes: inside the folder, or beside it while it is missing."""
    if folder.is_dir():
        return folder
    if folder.exists() or folder.is_symlink():
        raise InputError(f"--out {folder}: is not a folder; name another one or move it away")
    parent = folder.parent
    if not parent.is_dir():
        raise InputError(
            f"--out {folder}: the folder {parent} does not exist; create it or name another one"
        )
    return parent


def _write_synced(path: Path, content: bytes) -> None:
    with path.open("xb") as file:
        _write_through(file, content)


def _write_through(file: IO[bytes], content: bytes) -> None:
    file.write(content)
    file.flush()
    os.fsync(file.fileno())


def _publish(staging: Path, folder: Path, names: tuple[str, ...]) -> None:
    if staging.parent == folder:
        blocked = [name for name in names if (folder / name).is_dir()]
        if blocked:
            raise InputError(f"--out {folder}: {blocked[0]} in it is a folder; move it away")
        for name in names:
            (staging / name).replace(folder / name)
        _sync_folder(folder)
    else:
        staging.chmod(0o777 & ~_umask())
        staging.rename(folder)
        _sync_folder(folder.parent)


def _umask() -> int:
    mask = os.umask(0o077)
    os.umask(mask)
    return mask


def _sync_folder(folder: Path) -> None:
    if os.name == "posix":
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


def _problem(folder: Path, error: OSError) -> InputError:
    reason = f"({error.strerror or error}) name another folder with --out"
    mend = _MEND.get(error.errno or 0, reason)
    return InputError(f"--out {folder}: cannot be written, nothing was: {mend}")
