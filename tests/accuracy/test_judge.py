"""The projection screens, matched eigenvalues decide."""

from dataclasses import replace

import numpy as np
import pytest

from levelstride.accuracy import column_waves, step_wave_errors
from levelstride.accuracy.judge import StepJudge
from levelstride.accuracy.matching import Follower
from levelstride.accuracy.wave_errors import StepErrors
from levelstride.column.column import Horizontal
from levelstride.splitting import resolve
from levelstride.tableaux import find
from oracles.columns import isothermal_column

SPLIT, TABLEAU = resolve("sound+buoyancy"), find("UJ3(1,3,2)")


def column_for(**limits):
    column = isothermal_column(12, 20e3, 250.0, horizontal=Horizontal(2000.0, "staggered", 2))
    return replace(column, advice=replace(column.advice, **limits))


def judge(column):
    return StepJudge(column_waves(column), SPLIT, TABLEAU, column.advice)


def test_accepted_steps_carry_the_matched_errors():
    column = column_for()
    found = judge(column).at(1.0)
    matched = step_wave_errors(column, SPLIT, TABLEAU, 1.0, resolved_only=True).resolved
    assert found.accurate
    assert found.frequency_error == matched.frequency_error
    assert found.amplitude_change_per_period == matched.worst_change_per_period
    assert found.ambiguous == 0


def test_matching_decides_where_the_projection_would_refuse():
    column = column_for()
    dt = 3.0
    matched = step_wave_errors(column, SPLIT, TABLEAU, dt, resolved_only=True).resolved
    projected = StepErrors(column_waves(column), SPLIT, TABLEAU).at(dt)
    ours, theirs = (
        abs(matched.worst_change_per_period),
        abs(projected.amplitude_change_per_period),
    )
    assert ours < 0.99 * theirs
    between = column_for(amplitude_loss_per_period=(ours + theirs) / 2, frequency_error=1.0)
    assert judge(between).at(dt).accurate
    below = column_for(amplitude_loss_per_period=0.9 * ours, frequency_error=1.0)
    found = judge(below).at(dt)
    assert not found.accurate
    assert abs(found.amplitude_change_per_period) > 0.9 * ours


def test_steps_of_half_a_period_are_refused_without_matching(monkeypatch):
    monkeypatch.setattr(Follower, "follow", None)
    assert not judge(column_for()).at(400.0).accurate


def test_the_wave_that_refused_last_is_asked_first(monkeypatch):
    asked, follow = [], Follower.follow

    def watched(self, *arguments):
        asked.append(self)
        return follow(self, *arguments)

    monkeypatch.setattr(Follower, "follow", watched)
    strict = judge(column_for(amplitude_loss_per_period=1e-9))
    first = strict.at(2.0)
    assert not first.accurate
    assert len(asked) == 1
    assert not strict.at(1.9).accurate
    assert asked[0] is asked[1]


def test_the_projection_stands_in_for_waves_in_doubt(monkeypatch):
    def lost(self, exponent, right, left, dt):
        found = follow(self, exponent, right, left, dt)
        nothing = np.full(exponent.size, np.nan)
        return replace(
            found, factor=nothing + 0j, turn=nothing, matched=np.zeros(exponent.size, dtype=bool)
        )

    follow = Follower.follow
    monkeypatch.setattr(Follower, "follow", lost)
    column = column_for()
    found = judge(column).at(1.0)
    projected = StepErrors(column_waves(column), SPLIT, TABLEAU).at(1.0)
    assert found.ambiguous == sum(w.modes.frequency.size for w in column_waves(column))
    assert found.frequency_error == pytest.approx(projected.frequency_error)
    assert found.amplitude_change_per_period == projected.amplitude_change_per_period
