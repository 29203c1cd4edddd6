"""Multistep schemes: slow terms explicit, fast terms implicit, over two or three time levels."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from levelstride.schemes.program import Program, Row

EULER: Final = Program(1, (Row(((0, 1.0),), (("slow", 0, 1.0),), solve=1.0),), (1, 0))
"""First step of every multistep scheme: forward Euler for slow, backward Euler for fast terms."""

EULER_NOTE: Final = "first step: forward Euler for slow, backward Euler for fast terms"


def multistep(old: Sequence[float], slow: Sequence[float], fast: Sequence[float]) -> Program:
    """Make the program of a linear multistep pair.

    q_{n+1} = sum_k old_k q_{n-k} + dt sum_k slow_k S q_{n-k} + dt (fast_0 F q_{n+1} + fast_1 F q_n
    + ...).

    Parameters
    ----------
    old, slow : sequence of float
        Weights of q_n, q_{n-1}, ... and of their slow tendencies [1].
    fast : sequence of float
        Weights of the fast tendencies of q_{n+1}, q_n, q_{n-1}, ... [1].
    """
    levels = max(len(old), len(slow), len(fast) - 1)
    tendencies = [("slow", k, float(w)) for k, w in enumerate(slow) if w]
    tendencies += [("fast", k, float(w)) for k, w in enumerate(fast[1:]) if w]
    of = tuple((k, float(w)) for k, w in enumerate(old) if w)
    row = Row(of, tuple(tendencies), solve=float(fast[0]))
    return Program(levels, (row,), (levels, *range(levels - 1)))


def starting(second: Program, levels: int) -> tuple[Program, ...]:
    """First steps of a scheme of two or three levels: Euler, then a given scheme of two levels."""
    grown = Program(2, second.rows, (2, 0, 1))
    return (EULER, grown)[: levels - 1]


def leapfrog(off_centring: float, filtering: float, share: float) -> Program:
    """Make the program of a filtered leapfrog step with off-centred trapezoidal fast terms.

    With p the filtered state of the level before,

        q_{n+1} = p + 2 dt S q_n + dt [(1 + b) F q_{n+1} + (1 - b) F p]
        d = f (p - 2 q_n + q_{n+1}),    q_n <- q_n + s d,    q_{n+1} <- q_{n+1} - (1 - s) d

    Parameters
    ----------
    off_centring : float
        b [1].
    filtering : float
        f, the coefficient of the filter [1].
    share : float
        s: 1 is the filter of Robert and Asselin, 1/2 conserves the mean of the three levels [1].

    References
    ----------
    Robert 1966, J. Meteor. Soc. Japan 44, 237-245; Asselin 1972, Mon. Weather Rev. 100, 487-490.
    Williams 2009, Mon. Weather Rev. 137, 2538-2546, doi:10.1175/2009MWR2724.1 (from memory; f is
    half of its nu, s its alpha).
    """
    fast = (("fast", 1, 1.0 - off_centring),) if off_centring != 1.0 else ()
    stepped = Row(((1, 1.0),), (("slow", 0, 2.0), *fast), solve=1.0 + off_centring)
    if not filtering:
        return Program(2, (stepped,), (2, 0))
    d = {0: -2.0 * filtering, 1: filtering, 2: filtering}
    middle = Row(tuple((v, (v == 0) + share * w) for v, w in d.items()))
    newest = Row(tuple((v, (v == 2) - (1.0 - share) * w) for v, w in d.items()))
    if share == 1.0:
        return Program(2, (stepped, middle), (2, 3))
    return Program(2, (stepped, middle, newest), (4, 3))
