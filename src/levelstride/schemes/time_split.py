"""Time-split Runge-Kutta: large stages of slow terms, short substeps of sound inside each.

Every stage starts from the state at the beginning of the step and goes forward by a share of it
(1/3, 1/2, 1) in substeps. Slow tendencies are those of the stage before and are frozen over the
substeps. A substep of length h first takes explicit pressure gradients and slow tendencies, then
divergences, which see the new wind, and the implicit terms:

    y* = y + h G [(1 + d) y - d y_before] + h S Y
    (I - h (1 + b)/2 F) y_new = y* + h D y* + h (1 - b)/2 F y

G pressure gradients, D divergences, F the implicit terms, Y the stage before, y_before the substep
before. Divergences of the horizontal wind are in D even where a splitting calls them implicit, as
long as no pressure gradient of u is: the new wind is known by then.

The off-centring b damps vertical sound. The divergence damping d extrapolates pressure forward in
time, which damps sound as a diffusion of divergence of coefficient d c^2 h does; the first substep
of a stage has no pressure to extrapolate from and does without.

References
----------
Wicker, Skamarock 2002, Mon. Weather Rev. 130, 2088-2097,
doi:10.1175/1520-0493(2002)130<2088:TSMFEM>2.0.CO;2 (stages and substeps).
Klemp, Skamarock, Dudhia 2007, Mon. Weather Rev. 135, 2897-2913, doi:10.1175/MWR3440.1
(off-centring and damping of the substeps). Both from memory.
"""

from __future__ import annotations

from typing import Final

from levelstride.schemes.program import Program, Row

STAGES: Final = (1 / 3, 1 / 2, 1.0)
"""Share of the step that each stage goes forward."""


def time_split(substeps: int, off_centring: float, divergence_damping: float) -> Program:
    """Make the program of a step.

    Parameters
    ----------
    substeps : int
        Of the last stage; the others have their share of it, rounded, at least one.
    off_centring : float
        b, from 0 (trapezoidal) to 1 (backward Euler) [1].
    divergence_damping : float
        d [1].

    Examples
    --------
    >>> time_split(6, 0.1, 0.1).solves
    11
    """
    rows: list[Row] = []
    stage = 0
    for share in STAGES:
        count = max(1, round(share * substeps))
        h = share / count
        before, now = None, 0
        for _ in range(count):
            rows += _substep(h, now, before, stage, len(rows) + 1, off_centring, divergence_damping)
            before, now = now, len(rows)
        stage = now
    return Program(1, tuple(rows), (stage,))


def _substep(
    h: float,
    now: int,
    before: int | None,
    stage: int,
    new: int,
    off_centring: float,
    damping: float,
) -> list[Row]:
    """Two rows; ``new`` is the number of the first."""
    extra = 0.0 if before is None else damping
    gradients = [("wind", now, h * (1.0 + extra))]
    if before is not None and extra:
        gradients.append(("wind", before, -h * extra))
    moved = Row(((now, 1.0),), (*gradients, ("slow", stage, h)))
    old = 0.5 * h * (1.0 - off_centring)
    fast = (("fast", now, old),) if old else ()
    solved = Row(((new, 1.0),), (("pressure", new, h), *fast), solve=0.5 * h * (1.0 + off_centring))
    return [moved, solved]
