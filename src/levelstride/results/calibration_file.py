"""Calibration files: written by ``calibrate``, read by ``advise``."""

import json
from pathlib import Path
from typing import Any, Final

from levelstride.errors import InputError

from .atomic import check_folder, write_file
from .calibration import Calibration, SafetyFactor
from .export import to_plain
from .round_trip import from_plain_exact, to_plain_exact

KIND: Final = "levelstride calibration"
VERSION: Final = 1

LARGEST_FILE: Final = 16_000_000
"""Files larger than this [bytes] are taken for something else."""

_MEND: Final = "make it with 'levelstride calibrate --out'"


def check_calibration_file(path: Path) -> None:
    """Find out before a long calculation whether a calibration file can be written.

    Parameters
    ----------
    path : Path
        The file.

    Raises
    ------
    InputError
        If its folder does not exist or cannot be written into, or there is a folder of its name.
    """
    if path.is_dir():
        raise InputError(f"--out {path}: is a folder; name a file")
    if not path.parent.is_dir():
        raise InputError(
            f"--out {path}: the folder {path.parent} does not exist; create it or name another one"
        )
    check_folder(path.parent)


def write_calibration(calibration: Calibration, path: Path) -> None:
    """Write a calibration file, whole or not at all.

    Parameters
    ----------
    calibration : Calibration
        The calibration, with a safety factor.
    path : Path
        The file.

    Raises
    ------
    InputError
        If there is no safety factor to write, or the file cannot be written.
    """
    if calibration.safety_factor is None:
        raise InputError(f"--out {path}: there is no safety factor to write; {calibration.verdict}")
    check_calibration_file(path)
    plain = {
        "kind": KIND,
        "version": VERSION,
        "safety_factor": to_plain_exact(calibration.safety_factor),
        "calibration": to_plain(calibration),
    }
    text = json.dumps(plain, indent=2, ensure_ascii=False, allow_nan=False)
    write_file(path, f"{text}\n".encode())


def read_safety_factor(path: Path) -> SafetyFactor:
    """Read the safety factor of a calibration file.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    SafetyFactor
        What was measured.

    Raises
    ------
    InputError
        If it cannot be read or is no calibration file.
    """
    try:
        if path.is_file() and path.stat().st_size > LARGEST_FILE:
            raise ValueError("it is too large")
        plain: Any = json.loads(path.read_bytes())
    except OSError as error:
        raise InputError(
            f"--calibration {path}: cannot be read: {error.strerror}; check the path"
        ) from None
    except (ValueError, RecursionError):
        raise InputError(f"--calibration {path}: is no calibration file; {_MEND}") from None
    if not isinstance(plain, dict) or plain.get("kind") != KIND:
        raise InputError(f"--calibration {path}: is no calibration file; {_MEND}")
    if plain.get("version") != VERSION:
        raise InputError(
            f"--calibration {path}: version = {plain.get('version')!r}, this program reads "
            f"{VERSION}; {_MEND} once more"
        )
    try:
        found = from_plain_exact(SafetyFactor, plain["safety_factor"])
    except (ValueError, TypeError, KeyError, AttributeError):
        raise InputError(f"--calibration {path}: safety_factor is damaged; {_MEND}") from None
    return _checked(found, path)


def _checked(found: SafetyFactor, path: Path) -> SafetyFactor:
    bounds = [bound for bound in (found.lower, found.upper) if bound is not None]
    sound = all(0.0 < bound < 1e6 for bound in bounds) and bounds == sorted(bounds)
    if not bounds or not sound:
        raise InputError(
            f"--calibration {path}: safety_factor has lower = {found.lower!r} and upper = "
            f"{found.upper!r}; they must be above 0, lower below upper: {_MEND} once more"
        )
    return found
