"""Numbers and reasons in plain words, the same in every file and on the terminal."""

from math import floor, log10

from .biting import Bites
from .dataset import AdviceRow, Limit, OwnGrowth

CAUTION = (
    "Linear theory on a single column: confirm the step in the full model and under your own "
    "centre's practice before operational use."
)

_KIND_NAMES = {
    "sound": "sound wave",
    "gravity": "gravity wave",
    "Lamb": "Lamb wave",
    "computational": "computational mode",
    "vortical": "vortical mode",
}
_ROW_KINDS = ("transport", "mixing")


def number(value: float | None, digits: int = 4) -> str:
    """Write a number with so many digits, a dash where there is none.

    Examples
    --------
    >>> number(27.31662)
    '27.32'
    >>> number(1234567.0), number(0.000012345), number(24.0), number(None)
    ('1.235e+06', '1.234e-05', '24', '-')
    """
    if value is None:
        return "-"
    text = f"{value:.{digits}g}"
    if "e" in text and abs(value) < 10 ** (digits + 1):
        return text if abs(value) < 1 else f"{value:.0f}"
    return text


def step(value: float | None, digits: int = 4) -> str:
    """Write a step [s] with so many digits, never longer than it is.

    Examples
    --------
    >>> step(27.31996), step(0.1 + 0.2), step(600.0), step(2.4)
    ('27.31', '0.3', '600', '2.4')
    """
    if value is None or value <= 0.0:
        return number(value, digits)
    places = digits - 1 - floor(log10(value))
    shown = floor(value * 10.0**places * (1.0 + 1e-12)) / 10.0**places
    return number(shown, digits)


def percent(value: float | None, digits: int = 2) -> str:
    """Write a share in percent.

    Examples
    --------
    >>> percent(0.8312), percent(-0.00123), percent(None)
    ('83 %', '-0.12 %', '-')
    """
    return "-" if value is None else f"{number(100.0 * value, digits)} %"


def metres(value: float) -> str:
    """Write a length in m or km.

    Examples
    --------
    >>> metres(140.0), metres(5996.0), metres(19.73)
    ('140 m', '6.0 km', '20 m')
    """
    return f"{value:.0f} m" if value < 1000.0 else f"{value / 1000.0:.1f} km"


def wave(bites: Bites) -> str:
    """Name a wave and the layers that hold it.

    Examples
    --------
    >>> wave(Bites(wavenumber_per_m=1e-3, growth_per_s=1e-4, kind="sound", layer_lowest=0,
    ...            layer_highest=3, bottom_m=0.0, top_m=140.0, wavelength_m=6283.2))
    'sound wave of 6.3 km, layers 0-3 (0-140 m)'
    """
    if bites.kind in _ROW_KINDS:
        return f"{bites.kind} in {layers(bites)}"
    name = kind_name(bites.kind)
    if bites.time_mode == "computational":
        name = f"computational mode in time, {name}"
    length = f" of {metres(bites.wavelength_m)}" if bites.wavelength_m is not None else ""
    return f"{name}{length}, {layers(bites)}"


def kind_name(kind: str) -> str:
    """Name a kind of wave.

    Examples
    --------
    >>> kind_name("Lamb"), kind_name("transport")
    ('Lamb wave', 'transport')
    """
    return _KIND_NAMES.get(kind, kind)


def layers(bites: Bites) -> str:
    """Name the layers that hold a disturbance, with their heights."""
    heights = f"({bites.bottom_m:.0f}-{bites.top_m:.0f} m)"
    if bites.layer_lowest == bites.layer_highest:
        return f"layer {bites.layer_lowest} {heights}"
    return f"layers {bites.layer_lowest}-{bites.layer_highest} {heights}"


def limit_reason(limit: Limit) -> str:
    """Say what binds the stable step."""
    if limit.unbounded:
        return f"nothing bites up to {number(limit.scanned_to_s)} s"
    if limit.bites is None:
        return limit.criterion
    return f"{limit.criterion}: {wave(limit.bites)}"


def in_short(binding: str) -> str:
    """Shorten a reason for a narrow column of a table; files keep it whole.

    Examples
    --------
    >>> in_short("spectrum+transient: sound wave of 6.0 km, layers 0-3 (0-140 m)")
    'spectrum, transient: sound 6.0 km, layers 0-3'
    >>> in_short("frequency of gravity waves: 1.3 % at 24.5 s, 1 % allowed")
    'frequency of gravity waves'
    """
    what, _, _ = binding.partition(": ")
    if what.startswith(("frequency", "amplitude", "interval")):
        return what
    return binding.partition(" (")[0].replace("+", ", ").replace(" wave of ", " ")


def own_growth(growth: OwnGrowth) -> str:
    """Say how the semi-discrete column grows by itself."""
    return (
        f"The column itself grows, whatever the step: air {growth.air}, "
        f"{number(growth.growth_per_s, 3)} 1/s at wavenumber "
        f"{number(growth.wavenumber_per_m, 3)} 1/m, cause: {growth.cause}."
    )


def headroom(row: AdviceRow) -> str:
    """Say how far the advised step is from the stable and from the strict step."""
    if row.advised_step_s is None:
        return "none"
    if row.stable_step_s is None:
        stable = f"nothing bites up to {number(row.scanned_to_s)} s"
    else:
        share = percent(row.advised_step_s / row.stable_step_s)
        stable = f"{share} of the stable step {step(row.stable_step_s)} s"
        if row.efolding_s is not None:
            stable += f" (growth tolerated: e-fold in {number(row.efolding_s)} s)"
    if row.strict_step_s is None:
        return stable
    share = percent(row.advised_step_s / row.strict_step_s)
    return f"{stable}; {share} of the strict step {step(row.strict_step_s)} s"
