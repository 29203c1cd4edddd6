"""Frozen records to plain data and back, without losing a digit."""

import math
import types
from collections.abc import Callable, Mapping
from dataclasses import fields, is_dataclass
from fractions import Fraction
from typing import Any, Literal, TypeVar, Union, cast, get_args, get_origin, get_type_hints

Record = TypeVar("Record")


def to_plain_exact(record: Any) -> Any:
    """Turn a record into dicts, lists, numbers and text from which it can be made again.

    Parameters
    ----------
    record : Any
        A dataclass of numbers, text, fractions, tuples, mappings and such dataclasses.

    Returns
    -------
    Any
        Data for JSON; fractions and numbers that are not finite become text.
    """
    if is_dataclass(record) and not isinstance(record, type):
        return {f.name: to_plain_exact(getattr(record, f.name)) for f in fields(record)}
    if isinstance(record, Mapping):
        return {str(key): to_plain_exact(value) for key, value in record.items()}
    if isinstance(record, list | tuple):
        return [to_plain_exact(value) for value in record]
    if record is None or isinstance(record, bool | int | str):
        return record
    if isinstance(record, Fraction):
        return str(record)
    value = float(record)
    return value if math.isfinite(value) else repr(value)


def from_plain_exact(kind: type[Record], plain: Any) -> Record:
    """Make a record again of what ``to_plain_exact`` made of it.

    Parameters
    ----------
    kind : type
        Its dataclass.
    plain : Any
        The plain data.

    Returns
    -------
    Record
        Equal to the first one.

    Raises
    ------
    ValueError, TypeError, KeyError
        If the data are not those of such a record.

    Examples
    --------
    >>> from levelstride.results.dataset import Window
    >>> from_plain_exact(Window, to_plain_exact(Window(from_s=0.1, to_s=float("inf"))))
    Window(from_s=0.1, to_s=inf)
    """
    return cast(Record, _made(kind, plain))


def _made(kind: Any, plain: Any) -> Any:
    origin, inner = get_origin(kind), get_args(kind)
    if origin in (types.UnionType, Union):
        if plain is None:
            return None
        return _made(next(one for one in inner if one is not types.NoneType), plain)
    if origin is Literal:
        if plain not in inner:
            raise ValueError(f"{plain!r} is none of {inner}")
        return plain
    if origin is tuple:
        return tuple(_made(inner[0], value) for value in plain)
    if origin is not None and issubclass(origin, Mapping):
        return {key: _made(inner[1], value) for key, value in plain.items()}
    if isinstance(kind, type) and is_dataclass(kind):
        hints = get_type_hints(kind)
        make: Callable[..., Any] = kind
        return make(**{f.name: _made(hints[f.name], plain[f.name]) for f in fields(kind)})
    if kind in (float, Fraction):
        return kind(plain)
    if not isinstance(plain, kind):
        raise TypeError(f"{plain!r} is not of {kind}")
    return plain
