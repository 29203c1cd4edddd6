"""How much a step amplifies states before they decay, over all waves of a column."""

from math import pi

from levelstride.column.column import Column
from levelstride.results.transient import TransientFound
from levelstride.schemes.scheme import TimeScheme
from levelstride.splitting.splitting import Splitting
from levelstride.stability.bites import anatomy
from levelstride.stability.spectrum import sampled_wavenumbers
from levelstride.stability.tolerance import Tolerance
from levelstride.stability.transient_growth import TransientGrowth, transient_growth
from levelstride.stability.wave_problem import WaveProblem


def transient_at_step(
    column: Column, splitting: Splitting, tableau: TimeScheme, step_s: float
) -> TransientFound:
    """Find the largest power of a step and the state that it amplifies most.

    Parameters
    ----------
    column : Column
        All of its air states are looked at, at every sampled wave.
    splitting : Splitting
        The splitting.
    tableau : TimeScheme
        The time scheme.
    step_s : float
        The step [s].

    Returns
    -------
    TransientFound
        Of the wave at which the step adds most to what the column does by itself.

    Raises
    ------
    CalculationError
        If an implicit stage has no solution at this step.
    """
    if tableau.kind == "explicit":
        splitting = splitting.without_implicit()
    asked = column.advice
    tolerance = Tolerance(asked.efolding_s, asked.transient_limit)
    problems = (
        WaveProblem(column, air, splitting, tableau, float(kappa))
        for air in column.airs
        for kappa in sampled_wavenumbers(column.horizontal)
    )
    found = ((problem, transient_growth(problem, step_s, tolerance)) for problem in problems)
    return _described(column, *max(found, key=lambda one: _added(one[1])))


def _added(growth: TransientGrowth) -> float:
    return growth.log_largest_norm - growth.log_exponential_norm


def _described(column: Column, problem: WaveProblem, growth: TransientGrowth) -> TransientFound:
    faces = column.levels.interfaces_m
    if growth.steps == 0:
        kind, lowest, highest = "none", 0, column.levels.nlev - 1
        kinds: dict[str, float] = {}
        energy: dict[str, float] = {}
    else:
        state = anatomy(problem, problem.newest(growth.state[:, None]))
        kinds, energy = state.kind_share, state.energy_share
        kind = max(kinds, key=lambda name: kinds[name])
        lowest, highest = state.layer_lowest, state.layer_highest
    return TransientFound(
        step_s=growth.step_s,
        largest_norm=growth.largest_norm,
        steps=growth.steps,
        time_s=growth.steps * growth.step_s,
        exponential_norm=growth.exponential_norm,
        beyond_exponential=growth.beyond_exponential,
        rising=growth.rising,
        air=problem.air.name,
        wavenumber_per_m=problem.kappa,
        wavelength_m=2 * pi / problem.kappa,
        kind=kind,
        kind_share=kinds,
        energy_share=energy,
        layer_lowest=lowest,
        layer_highest=highest,
        bottom_m=float(faces[lowest]),
        top_m=float(faces[highest + 1]),
    )
