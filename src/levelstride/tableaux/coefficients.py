"""Coefficients of a tableau: text read exactly, rounded once.

A coefficient is a string of integers, decimals, ``+ - * / **``, ``sqrt()`` and parentheses.
Decimals are read as text, so ``"0.1"`` is one tenth. Values stay fractions until a
square root that is not rational appears; from then on they are decimals of `DIGITS` digits.
"""

import ast
import re
import warnings
from decimal import Context, Decimal, DecimalException
from fractions import Fraction
from functools import lru_cache
from math import isqrt
from typing import Final, TypeAlias

from levelstride.errors import InputError

Number: TypeAlias = Fraction | Decimal
"""An exact fraction, or a decimal of `DIGITS` digits once a root is involved."""

DIGITS: Final = 80
"""Working precision of irrational coefficients [decimal digits]."""

CONTEXT: Final = Context(prec=DIGITS, Emin=-10_000, Emax=10_000)
"""Decimal arithmetic of the room; overflow, invalid operation and division by zero are errors."""

_LONGEST: Final = 1000
_LARGEST_EXPONENT: Final = 64
_MOST_BITS: Final = 20_000
_LARGEST: Final = 10**6
_NUMBER: Final = re.compile(r"\d+(?:\.\d*)?(?:[eE][+-]?\d{1,2})?|\.\d+(?:[eE][+-]?\d{1,2})?")
_TOKENS: Final = re.compile(rf"(?:{_NUMBER.pattern}|sqrt|[-+*/() ])+")
_ALLOWED: Final = (
    "allowed are integers, decimals, fractions, + - * / **, sqrt() and parentheses, "
    'for example "1/2 - sqrt(3)/6"'
)


class _RefusalError(Exception):
    """Why a text is no coefficient."""


@lru_cache(maxsize=4096)
def evaluate(text: str) -> Number:
    """Exact value of a coefficient.

    Parameters
    ----------
    text : str
        For example ``"1/2 - sqrt(3)/6"`` or ``"0.435866521508459"``.

    Returns
    -------
    Fraction or Decimal

    Raises
    ------
    InputError
        If the text is not an expression of the allowed kind, or has no finite moderate value.

    Examples
    --------
    >>> evaluate("0.1 + 1/5")
    Fraction(3, 10)
    """
    try:
        return _read(text)
    except _RefusalError as refusal:
        shown = text if len(text) <= 60 else text[:57] + "..."
        raise InputError(f"coefficient {shown!r} {refusal}; {_ALLOWED}") from None


def rounded(value: Number) -> float:
    """Nearest double of an exact value."""
    return float(value)


def as_decimal(value: Number) -> Decimal:
    """Value as a decimal of `DIGITS` digits."""
    if isinstance(value, Decimal):
        return value
    return CONTEXT.divide(Decimal(value.numerator), Decimal(value.denominator))


def as_fraction(value: Number) -> Fraction:
    """Value as a fraction; exact, also for the digits of a decimal."""
    return Fraction(value)


def _read(text: str) -> Number:
    if len(text) > _LONGEST:
        raise _RefusalError(f"is {len(text)} characters long, at most {_LONGEST} are read")
    if not text.strip():
        raise _RefusalError("is empty")
    if not _TOKENS.fullmatch(text):
        raise _RefusalError("has signs that belong to no coefficient")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            tree = ast.parse(text.strip(), mode="eval")
        value = _walk(tree.body, text.strip())
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise _RefusalError("cannot be read as an expression") from None
    except ZeroDivisionError:
        raise _RefusalError("divides by zero") from None
    except DecimalException:
        raise _RefusalError("has no finite value") from None
    if not -_LARGEST <= value <= _LARGEST:
        raise _RefusalError(f"is larger than {_LARGEST}")
    return value


def _walk(node: ast.expr, text: str) -> Number:
    match node:
        case ast.Constant():
            return _literal(text[node.col_offset : node.end_col_offset])
        case ast.UnaryOp(op=ast.USub(), operand=operand):
            value = _walk(operand, text)
            return -value if isinstance(value, Fraction) else CONTEXT.minus(value)
        case ast.UnaryOp(op=ast.UAdd(), operand=operand):
            return _walk(operand, text)
        case ast.BinOp(left=left, op=op, right=right):
            return _combine(_walk(left, text), op, _walk(right, text))
        case ast.Call(func=ast.Name(id="sqrt"), args=[argument], keywords=[]):
            return _root(_walk(argument, text))
        case _:
            raise _RefusalError("holds an operation that is not allowed")


def _literal(text: str) -> Fraction:
    if not _NUMBER.fullmatch(text):
        raise _RefusalError(f"holds {text!r}, which is no plain number")
    return Fraction(text)


def _combine(left: Number, op: ast.operator, right: Number) -> Number:
    if isinstance(op, ast.Pow):
        return _power(left, right)
    if isinstance(left, Fraction) and isinstance(right, Fraction):
        if _bits(left) + _bits(right) > _MOST_BITS:
            raise _RefusalError("has too many digits")
        return _combine_fractions(left, op, right)
    a, b = as_decimal(left), as_decimal(right)
    match op:
        case ast.Add():
            return CONTEXT.add(a, b)
        case ast.Sub():
            return CONTEXT.subtract(a, b)
        case ast.Mult():
            return CONTEXT.multiply(a, b)
        case ast.Div():
            return CONTEXT.divide(a, b)
        case _:
            raise _RefusalError("holds an operation that is not allowed")


def _combine_fractions(left: Fraction, op: ast.operator, right: Fraction) -> Fraction:
    match op:
        case ast.Add():
            return left + right
        case ast.Sub():
            return left - right
        case ast.Mult():
            return left * right
        case ast.Div():
            return left / right
        case _:
            raise _RefusalError("holds an operation that is not allowed")


def _power(base: Number, exponent: Number) -> Number:
    whole = isinstance(exponent, Fraction) and exponent.denominator == 1
    if not whole or not -_LARGEST_EXPONENT <= exponent <= _LARGEST_EXPONENT:
        raise _RefusalError(f"has an exponent that is no integer within +-{_LARGEST_EXPONENT}")
    count = int(exponent)
    if isinstance(base, Decimal):
        return CONTEXT.power(base, count)
    if _bits(base) * abs(count) > _MOST_BITS:
        raise _RefusalError("has too many digits")
    return base**count


def _root(value: Number) -> Number:
    if value < 0:
        raise _RefusalError("takes the square root of a negative number")
    if isinstance(value, Decimal):
        return CONTEXT.sqrt(value)
    top, bottom = isqrt(value.numerator), isqrt(value.denominator)
    if top * top == value.numerator and bottom * bottom == value.denominator:
        return Fraction(top, bottom)
    return CONTEXT.sqrt(as_decimal(value))


def _bits(value: Fraction) -> int:
    return value.numerator.bit_length() + value.denominator.bit_length()
