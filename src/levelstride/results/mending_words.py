"""A mended level set in plain words, and the reason where there is none."""

from .mending import Mended, Release
from .wording import number, percent, step

_CHANGED = 0.01
"""Relative change of a thickness from which a layer counts as changed."""

_HARDLY = 0.02
"""Relative gain of the step below which the layers hardly matter."""


def obstacle_words(mended: Mended) -> str:
    """Say which constraint stands in the way of the target.

    Parameters
    ----------
    mended : Mended
        Without a solution, with what was tried.
    """
    helps = [release for release in mended.releases if release.carries]
    names = [_constraint(release, mended) for release in helps if release.constraint != "all"]
    if len(names) == 1:
        return f"{names[0]}: without this constraint {step(mended.target_step_s)} s is carried"
    if names:
        listed = f"{'; '.join(names[:-1])}; and {names[-1]}"
        return f"{listed}: without any one of these {step(mended.target_step_s)} s is carried"
    if helps:
        return (
            "several constraints together (ratio, lid"
            + (", lowest layer" if mended.lowest_kept else "")
            + f"): without all of them {step(mended.target_step_s)} s is carried, without one of "
            "them it is not"
        )
    largest = max([release.largest_step_s for release in mended.releases], default=0.0)
    largest = max(largest, mended.verified_step_s or 0.0)
    before = mended.stable_step_before_s or largest
    hardly = "hardly depends" if largest < (1 + _HARDLY) * before else "depends too little"
    return (
        f"none of the constraints: the step {hardly} on the thickness of the layers, and without "
        f"any constraint {step(largest)} s is the longest found; what binds is the "
        f"{mended.criterion} criterion, so change the splitting, the tableau or the grid spacing"
    )


def _constraint(release: Release, mended: Mended) -> str:
    count, lid = len(mended.thickness_m), mended.interfaces_m[-1]
    return {
        "lowest layer": f"the lowest layer, kept at {number(mended.thickness_m[0])} m",
        "ratio": f"the bound of {number(mended.largest_ratio)} on the ratio of neighbouring layers",
        "lid": f"the number of {count} layers below a lid of {number(lid)} m",
    }[release.constraint]


def verdict_words(mended: Mended) -> str:
    """Give the answer in one sentence.

    Parameters
    ----------
    mended : Mended
    """
    target = f"{step(mended.target_step_s)} s"
    if mended.verified_step_s is None:
        carried = "nothing bites"
    else:
        carried = f"stable step {step(mended.verified_step_s)} s"
    if mended.carried and mended.unchanged:
        return f"The level set carries {target} as it is ({carried}); nothing needs to change."
    if mended.carried:
        changed = [change for change in mended.changes if abs(change.factor - 1) > _CHANGED]
        most = max(mended.changes, key=lambda change: max(change.factor, 1 / change.factor))
        return (
            f"{target} is carried ({carried}) with {len(changed)} of {len(mended.changes)} layers "
            f"changed by more than {percent(_CHANGED)}, most of all layer {most.layer}: "
            f"{number(most.before_m)} m becomes {number(most.after_m)} m."
        )
    return (
        f"No level set was found that carries {target} under these constraints; the longest step "
        f"found is {step(mended.verified_step_s)} s. In the way: {mended.obstacle}."
    )
