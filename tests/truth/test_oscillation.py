"""What explicit methods do to an oscillation, q' = i omega q: textbook series.

With y = omega dt, amplitude and phase of one step of a method with stability polynomial P are those
of P(iy). Taylor's series of ln P(iy) - iy gives, for a polynomial that is exp up to order p,

    P(z) = exp(z) - z^(p+1)/(p+1)! + ...

    three stages of order 3, P = 1 + z + z^2/2 + z^3/6:
        ln P(z) = z - z^4/24 + z^5/30 - z^6/72 + O(z^7)
        |P(iy)| = 1 - y^4/24 + y^6/72 - y^8/1152 + O(y^10)
                  = (1 - y^4/12 + y^6/36)^(1/2)
        arg P(iy)/y = 1 + y^4/30 + O(y^6)
    order 4:  |P(iy)| = 1 - y^6/144,  arg P(iy)/y = 1 - y^4/120
    order 2, two stages:  |P(iy)| = 1 + y^4/8,  arg P(iy)/y = 1 + y^2/6
    forward Euler:  |P(iy)| = 1 + y^2/2,  arg P(iy)/y = 1 - y^2/3

The leading terms are those of Durran (2010), Numerical Methods for Fluid Dynamics, section 2.3
(amplification and relative phase change of Runge-Kutta methods; from memory, derived here).
"""

from fractions import Fraction
from math import factorial

import numpy as np
import pytest

from levelstride.accuracy.modes import normal_modes
from levelstride.accuracy.wave_errors import mode_errors
from levelstride.column.column import Horizontal
from levelstride.operator.wave import Wave
from levelstride.splitting import resolve
from levelstride.splitting.parts import split_operator
from levelstride.stability.amplification import energy_parts
from levelstride.stepper.imex import Stepper
from levelstride.tableaux.lookup import find
from oracles.columns import STAGGERINGS, isothermal_column

DX = 2000.0

SERIES = {
    # name: relative phase and amplitude, each as {power of y: coefficient}
    "forward Euler": ({2: Fraction(-1, 3)}, {2: Fraction(1, 2)}),
    "Heun RK2": ({2: Fraction(1, 6)}, {4: Fraction(1, 8)}),
    "SSPRK(3,3)": (
        {4: Fraction(1, 30)},
        {4: Fraction(-1, 24), 6: Fraction(1, 72), 8: Fraction(-1, 1152)},
    ),
    "RK4": ({4: Fraction(-1, 120)}, {6: Fraction(-1, 144)}),
}


def logarithm(order, terms):
    """Coefficients of ln(sum of z^k/k! up to the order) by n a_n = sum k l_k a_(n-k)."""
    a = [Fraction(1, factorial(k)) if k <= order else Fraction(0) for k in range(terms + 1)]
    log = [Fraction(0)] * (terms + 1)
    for n in range(1, terms + 1):
        log[n] = (n * a[n] - sum(k * log[k] * a[n - k] for k in range(1, n))) / n
    return log


def amplitude_series(order, terms):
    """exp of the real part of ln P(iy), in powers of y."""
    real = [
        c * (-1) ** (k // 2) if k % 2 == 0 else 0 for k, c in enumerate(logarithm(order, terms))
    ]
    found = [Fraction(1)] + [Fraction(0)] * terms
    for n in range(1, terms + 1):
        found[n] = sum(Fraction(k) * real[k] * found[n - k] for k in range(1, n + 1)) / n
    return found


def phase_series(order, terms):
    """Imaginary part of ln P(iy) over y, in powers of y."""
    log = logarithm(order, terms + 1)
    return [log[k + 1] * (-1) ** (k // 2) if k % 2 == 0 else Fraction(0) for k in range(terms + 1)]


@pytest.mark.parametrize("name", SERIES)
def test_the_textbook_series_are_those_of_the_polynomials(name):
    order = find(name).order
    phase, amplitude = SERIES[name]
    last = max(phase)
    derived = phase_series(order, last)
    assert {k: c for k, c in enumerate(derived) if c and k} == phase
    last = max(amplitude)
    derived = amplitude_series(order, last)
    assert {k: c for k, c in enumerate(derived) if c and k} == amplitude


def test_three_stages_of_order_three_have_the_printed_logarithm():
    assert logarithm(3, 6) == [0, 1, 0, 0, Fraction(-1, 24), Fraction(1, 30), Fraction(-1, 72)]


def stepped(name, staggering, dt):
    """Gravity and Lamb waves of a column and what one explicit step makes of them."""
    column = isothermal_column(
        8, 12e3, staggering=staggering, horizontal=Horizontal(DX, "staggered", 2)
    )
    wave = Wave(2 * np.pi / (12 * DX), column.horizontal)
    modes = normal_modes(column, column.airs[0], wave)
    parts = split_operator(resolve("all-explicit"), column, column.airs[0], wave)
    stepper = Stepper(energy_parts(parts, modes.weights), find(name), dt)
    moving = modes.frequency != 0
    modes = modes.select(moving & np.isin(modes.kind, ["gravity", "Lamb", "sound"]))
    return modes, mode_errors(modes, stepper.step(modes.vectors), dt)


@pytest.mark.parametrize("staggering", STAGGERINGS)
@pytest.mark.parametrize("name", SERIES)
def test_every_wave_of_a_column_is_stepped_as_the_series_say(name, staggering):
    phase, amplitude = SERIES[name]
    modes, errors = stepped(name, staggering, 0.4)
    y = np.abs(modes.frequency) * 0.4
    seen = (y > 0.02) & (y < 0.25)
    assert np.count_nonzero(seen) >= 4
    y = y[seen]
    size = np.abs(errors.factor)[seen]
    expected = 1 + sum(float(c) * y**k for k, c in amplitude.items())
    np.testing.assert_allclose(
        size, expected, rtol=0, atol=np.max(y) ** (max(amplitude) + 2) + 1e-13
    )
    relative = sum(float(c) * y**k for k, c in phase.items())
    np.testing.assert_allclose(errors.frequency_error[seen], np.abs(relative), rtol=0.1, atol=1e-12)
    turned = np.abs(np.angle(errors.factor[seen])) / y - 1
    assert np.all(np.sign(turned) == np.sign(relative))


def test_ssprk33_loses_amplitude_per_period_as_its_series_says():
    """(1 - y^4/24)^(2 pi/y) - 1 = -2 pi y^3/24 + ..."""
    modes, errors = stepped("SSPRK(3,3)", "charney-phillips", 0.4)
    y = np.abs(modes.frequency) * 0.4
    seen = (y > 0.02) & (y < 0.25)
    change = errors.amplitude_change_per_period[seen]
    np.testing.assert_allclose(change, -2 * np.pi * y[seen] ** 3 / 24, rtol=0.03)
