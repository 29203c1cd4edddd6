"""The check of a limit at every sampled wave, as frozen plain data.

Units and missing numbers are as in ``dataset``.
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class CertifiedWave:
    """One wave on both sides of a certified limit.

    Parameters
    ----------
    air : str
        Air state.
    wavenumber_per_m : float
        Wavenumber along one axis [1/m].
    growth_below_per_s, growth_above_per_s : float or None
        Growth rate at the stable and at the unstable step [1/s]; None where there is none: no
        unstable step, a stage without solution, or nothing left after a step.
    tolerated_per_s : float
        Tolerated growth rate, own growth of this wave included [1/s].
    method : str
        How the growth was found.
    """

    air: str
    wavenumber_per_m: float
    growth_below_per_s: float | None
    growth_above_per_s: float | None
    tolerated_per_s: float
    method: str


@dataclass(frozen=True, slots=True, kw_only=True)
class RefutedStep:
    """A limit that a certificate refuted, so that it was found again below.

    Parameters
    ----------
    step_s : float
        The step [s].
    air : str
        Air state that breaks a criterion there.
    wavenumber_per_m : float
        Its wavenumber along one axis [1/m].
    criterion : str
        Criteria that it breaks, joined by ``+``.
    """

    step_s: float
    air: str
    wavenumber_per_m: float
    criterion: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Certificate:
    """A limit checked on both sides at every sampled wave.

    Parameters
    ----------
    below_s : float
        Step at which no wave breaks a criterion [s].
    above_s : float or None
        Step at which the wave that binds breaks one [s]; None where no wave binds.
    breaks_above : str
        Criteria that it breaks there, joined by ``+``; empty if none.
    waves : tuple of CertifiedWave
        Every sampled wave of every air state.
    worst : int
        Place of the wave that binds, or of that of fastest growth at the step if none binds.
    refuted : tuple of RefutedStep
        Limits that were refuted and replaced, the longest first.
    """

    below_s: float
    above_s: float | None
    breaks_above: str
    waves: tuple[CertifiedWave, ...]
    worst: int
    refuted: tuple[RefutedStep, ...] = ()

    @property
    def worst_wave(self) -> CertifiedWave:
        """The wave that binds, or that of fastest growth at the step if none binds."""
        return self.waves[self.worst]
