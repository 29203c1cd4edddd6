"""A time scheme that is no tableau: a program with its name, source and start-up."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from functools import cached_property
from typing import Any, Final, Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from levelstride.schemes.program import Program, scalar_factors
from levelstride.tableaux.tableau import Tableau

Array: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]

ROUND_OFF: Final = 1e-9
"""Excess of an amplification factor over one that counts as none; double roots scatter so far."""

WEAK: Final = 0.1
"""A limit below this is where weak growth rises above round-off: there is none at all."""

LONGEST_AXIS: Final = 100.0
"""Up to here limits on the imaginary axis are sought [1]."""


@dataclass(frozen=True, eq=False)
class ProgramScheme:
    """A time-split or multistep scheme.

    Attributes
    ----------
    name : str
        As it is listed.
    program : Program
        One step.
    start : tuple of Program
        The first steps: number k starts from k + 1 time levels and makes one more.
    order : int
        Order on linear equations whose parts do not commute, start included.
    start_note : str
        How the first steps are taken, in words.
    knobs : mapping of str to float
        The knobs that it has, by their keys in ``[scheme]``.
    substeps : bool
        Whether explicit pressure gradients and divergences are stepped with sound, as parts of
        their own.
    """

    name: str
    program: Program
    order: int
    start: tuple[Program, ...] = ()
    start_note: str = ""
    aliases: tuple[str, ...] = ()
    source: str = ""
    note: str = ""
    knobs: Mapping[str, float] = field(default_factory=dict)
    substeps: bool = False
    kind: Literal["additive"] = "additive"

    @property
    def levels(self) -> int:
        """Time levels that a step starts from."""
        return self.program.levels

    @property
    def explicit_evaluations(self) -> int:
        """Slow tendencies that a model evaluates in a step, those of older levels being kept."""
        return self.program.needed("slow")

    @property
    def implicit_solves(self) -> int:
        """Systems solved in a step."""
        return self.program.solves

    @property
    def distinct_diagonals(self) -> tuple[float, ...]:
        """The different a of the systems (I - a dt F), ascending."""
        return self.program.diagonals

    @property
    def fingerprint(self) -> dict[str, Any]:
        """All that its answers depend on, as plain data."""
        return {"program": asdict(self.program), "start": [asdict(one) for one in self.start]}

    def slow_factor(self, z: Complex) -> Array:
        """Largest modulus of the factors of one step of q' = (z/dt) q, all of it slow.

        Parameters
        ----------
        z : ndarray of complex
            dt times the rate [1].
        """
        return np.asarray(np.abs(scalar_factors(self.program, slow=z)).max(axis=-1))

    @cached_property
    def computational_factors(self) -> tuple[float, ...]:
        """What a step leaves of each computational mode as dt vanishes, descending [1].

        One is undamped; a scheme of one level has none.
        """
        factors = scalar_factors(self.program, slow=np.zeros(1))[0]
        others = np.delete(factors, np.argmin(np.abs(factors - 1.0)))
        return tuple(sorted((float(abs(one)) for one in others), reverse=True))

    @cached_property
    def slow_order(self) -> int:
        """Order for slow terms alone, measured: how closely a factor comes to exp(z)."""
        z = 1j * np.array([0.08, 0.04])
        errors = np.abs(scalar_factors(self.program, slow=z) - np.exp(z)[:, None]).min(axis=-1)
        return round(float(np.log2(errors[0] / errors[1]))) - 1

    @cached_property
    def imaginary_axis_limit(self) -> float:
        """Largest Y with all factors of slow terms at iy at most one up to Y [1].

        For time-split schemes only what is frozen over the substeps counts as slow.
        """
        y = np.concatenate([np.geomspace(1e-3, 0.1, 40), np.arange(0.11, LONGEST_AXIS, 0.01)])
        grows = self.slow_factor(1j * y) > 1.0 + ROUND_OFF
        if not grows.any():
            return float("inf")
        at = int(np.argmax(grows))
        low, high = y[max(at - 1, 0)], y[at]
        if high < WEAK:
            return 0.0
        for _ in range(50):
            middle = (low + high) / 2
            if self.slow_factor(np.array([1j * middle]))[0] > 1.0 + ROUND_OFF:
                high = middle
            else:
                low = middle
        return float(low)


TimeScheme: TypeAlias = Tableau | ProgramScheme
"""Whatever a study can be given by name."""
