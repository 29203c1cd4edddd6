"""A certificate as a record, and in words."""

from levelstride.results import certificate as records
from levelstride.results.wording import number
from levelstride.stability.certificate import DENSE, SOLVED, Certificate
from levelstride.stability.tolerance import Tolerance


def record(certificate: Certificate) -> records.Certificate:
    """Turn a certificate into the record of it.

    Parameters
    ----------
    certificate : levelstride.stability.certificate.Certificate
        One that holds.
    """
    return records.Certificate(
        below_s=certificate.low,
        above_s=certificate.high,
        breaks_above="+".join(certificate.breaks_high),
        waves=tuple(
            records.CertifiedWave(
                air=wave.problem.air.name,
                wavenumber_per_m=wave.problem.kappa,
                growth_below_per_s=_finite(wave.growth_low),
                growth_above_per_s=_finite(wave.growth_high),
                tolerated_per_s=wave.tolerated,
                method=wave.method,
            )
            for wave in certificate.waves
        ),
        worst=certificate.waves.index(certificate.worst),
        refuted=tuple(
            records.RefutedStep(
                step_s=refuted.step_s,
                air=refuted.problem.air.name,
                wavenumber_per_m=refuted.problem.kappa,
                criterion="+".join(refuted.broken),
            )
            for refuted in certificate.refuted
        ),
    )


def in_words(certificate: Certificate, tolerance: Tolerance) -> str:
    """Say what was certified and how far that goes."""
    if certificate.marched:
        how = (
            f"{SOLVED} at the eigenvalues that marches bring out, around that of the wave that "
            f"binds and around 1 and -1, and a march of {certificate.marched} steps of every wave "
            "at that step; growth found is there but for its residual, growth hidden from the "
            "march is not excluded"
        )
    else:
        how = f"{DENSE} and exact power norms"
    text = (
        f"certified at all {len(certificate.waves)} sampled waves by {how}: no criterion is broken "
        f"at {certificate.low:.6g} s with an e-fold in {number(tolerance.efolding_s)} s tolerated"
    )
    if certificate.high is None:
        text += ", where alone they were asked since none of them binds"
    elif certificate.breaks_high:
        broken = " and ".join(certificate.breaks_high)
        text += f", {broken} broken at {certificate.high:.6g} s by the wave that binds"
    else:
        text += f", and none at {certificate.high:.6g} s either: the limit lies on the safe side"
    for refuted in certificate.refuted:
        text += (
            f"; {refuted.step_s:.6g} s, found first, is refuted by the wave at "
            f"{refuted.problem.kappa:.4g} 1/m"
        )
    return text


def _finite(rate: float | None) -> float | None:
    return rate if rate is not None and abs(rate) < float("inf") else None
