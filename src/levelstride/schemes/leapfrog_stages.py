"""Leapfrog stages closed by a synchronising stage: a multistep pattern made an explicit method.

With N stages of h = dt/N,

    Y_0 = q,  Y_1 = Y_0 + h L Y_0,  Y_k = Y_{k-2} + 2 h L Y_{k-1},  k = 2..N
    q_new = [(1 - b) Y_N + (1 + b) (Y_{N-1} + h L Y_N)]/2

so that no computational mode is carried into the next step. b = 0 is the modified midpoint rule
with its smoothing step: order 2, growing weakly on the imaginary axis, as h^4. b > 0 damps: order
1, stable on the imaginary axis up to |L| h = sqrt(1 - ((1 - b)/(1 + b))^2). b = 1 with N = 1 is
the step of Matsuno.

References
----------
Gragg 1965, SIAM J. Numer. Anal. 2, 384-403 (also Hairer, Norsett, Wanner 1993, Solving Ordinary
Differential Equations I, section II.9). Matsuno 1966, J. Meteor. Soc. Japan 44, 76-84. From memory;
the limit is derived in the test.
"""

from __future__ import annotations

from fractions import Fraction

from levelstride.tableaux.tableau import CoefficientText, Tableau

NAME = "Leapfrog-sync"
SOURCE = "Gragg (1965), SIAM J. Numer. Anal. 2, 384-403, with the smoothing step off-centred"


def leapfrog_stages(stages: int, off_centring: float) -> Tableau:
    """Make the tableau.

    Parameters
    ----------
    stages : int
        N, at least 1.
    off_centring : float
        b, from 0 to 1 [1].
    """
    b = Fraction(str(off_centring))
    h = Fraction(1, stages)
    zero = [Fraction(0)] * (stages + 1)
    rows = [zero, [h, *zero[1:]]]
    for k in range(2, stages + 1):
        rows.append([w + 2 * h * (j == k - 1) for j, w in enumerate(rows[k - 2])])
    closed = [
        ((1 - b) * last + (1 + b) * (before + h * (j == stages))) / 2
        for j, (last, before) in enumerate(zip(rows[stages], rows[stages - 1], strict=True))
    ]
    a = tuple(tuple(map(str, row)) for row in rows)
    weights = tuple(map(str, closed))
    order = 1 if b else 2
    return Tableau(
        name=NAME,
        coefficient_text=CoefficientText(a, weights, a, weights),
        order=order,
        explicit_order=order,
        implicit_order=order,
        kind="explicit",
        source=SOURCE,
        note=f"{stages} leapfrog stages, off-centring {off_centring:g} of the synchronising stage",
        precision="exact",
    )
