"""The window by its definition, held against brute force over the draws."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.ensemble.run import Outcome, Spoil
from stackmill.planning.windows import (
    best_stop,
    chance_curve,
    find_window,
    left_standing,
    quantiles,
    success_spans,
    weighted_quantile,
    window_ends,
)

TIME = st.integers(0, 40).map(float) | st.just(np.inf)


def outcome(exposed, lost, legs=None, upper=None, area=None):
    exposed = np.asarray(exposed, float)
    draws = len(exposed)
    upper = exposed[None] if upper is None else np.asarray(upper, float)
    return Outcome(
        level_s=(),
        level=(),
        exposed_s=exposed,
        lost_s=np.asarray(lost, float),
        lost_by=np.zeros(draws, int),
        spoilt=(Spoil(-1, 0, 0, 1.0),),
        spoilt_s=np.asarray(lost, float)[None],
        upper_s=upper,
        upper_area=np.ones(len(upper)) if area is None else np.asarray(area, float),
        wanted=tuple((0, k) for k in range(len(upper))),
        leg_start_s=np.zeros((1, draws)) if legs is None else np.asarray(legs, float),
        end_s=np.full(draws, np.inf),
    )


def brute_chance(exposed, lost, weights, time):
    return sum(w for e, x, w in zip(exposed, lost, weights, strict=True) if e <= time < x)


@pytest.mark.independent
@settings(max_examples=200, deadline=None)
@given(st.lists(st.tuples(TIME, TIME), min_size=1, max_size=25), st.floats(0.05, 1.0))
def test_chances_best_stop_and_window_by_trying_every_time(pairs, confidence):
    exposed, lost = np.array([e for e, _ in pairs]), np.array([x for _, x in pairs])
    weights = np.full(len(pairs), 1 / len(pairs))
    curve = chance_curve(*success_spans(outcome(exposed, lost), 0), weights)
    grid = np.arange(0.0, 45.0, 0.25)
    brute = np.array([brute_chance(exposed, lost, weights, t) for t in grid])
    np.testing.assert_allclose([curve.at(t) for t in grid], brute, atol=1e-12)
    stop = best_stop(curve)
    assert curve.at(stop) == pytest.approx(brute.max(), abs=1e-12)
    ends = window_ends(curve, stop, confidence)
    good = brute >= confidence - 1e-12
    if ends is None:
        assert not good.any()
        return
    late = np.inf if ends[1] is None else ends[1]
    inside = (grid >= ends[0]) & (grid < late)
    assert good[inside].all()
    for just_outside in (ends[0] - 0.25, late):
        if 0 <= just_outside < 45:
            assert brute_chance(exposed, lost, weights, just_outside) < confidence


@pytest.mark.closed_form
def test_times_count_from_the_last_look_and_what_came_before_it_cannot_be_mended():
    # three draws whose look ends at 50, 60 and 70; all need 10 more and are lost 5 later; a fourth lost before
    legs = [[0, 0, 0, 0], [50, 60, 70, 60]]
    result = outcome([60, 70, 80, 40], [65, 75, 85, 55], legs)
    weights = np.full(4, 0.25)
    whole = chance_curve(*success_spans(result, 1), weights)
    assert whole.at(9.9) == 0.0
    assert whole.at(10.0) == 0.75
    assert whole.at(15.0) == 0.0
    by_clock = chance_curve(*success_spans(result, 0), weights)
    assert by_clock.chance.max() == 0.25  # the one that is lost before its look; the others start only after


@pytest.mark.closed_form
def test_a_stop_by_eye_that_is_the_last_step_holds_at_its_end():
    result = outcome([20, 30], [25, 35], [[0, 0], [22, 32]])
    assert chance_curve(*success_spans(result, 0), np.full(2, 0.5)).at(1e9) == 1.0
    assert chance_curve(*success_spans(result, 1), np.full(2, 0.5)).at(0.0) == 1.0


@pytest.mark.closed_form
def test_left_standing_is_the_mean_share_still_covered():
    result = outcome([10, 10], [99, 99], upper=[[5, 5], [10, 30]], area=[0.75, 0.25])
    assert left_standing(result, np.full(2, 0.5), 0, 20.0) == pytest.approx(0.125)


@pytest.mark.independent
@settings(max_examples=100, deadline=None)
@given(st.lists(TIME, min_size=1, max_size=30), st.floats(0.01, 1.0))
def test_quantiles_by_counting(times, share):
    times = np.array(times)
    weights = np.full(len(times), 1 / len(times))
    want = min(t for t in times if np.sum(times <= t) >= share * len(times) * (1 - 1e-9))
    assert weighted_quantile(times, weights, share) == want
    assert quantiles(times[None], weights, [share])[0][0] == want


@pytest.mark.regression
def test_a_stop_moved_into_the_window_has_the_chance_of_where_it_is_told():
    # exposed: 90 of 100 draws at 1 s, one at 2 s, the rest never. 0.90 cannot be told from 0.91 by so few draws, so
    # the best stop is at 1 s; but only from 2 s on is the chance the one asked for.
    found = outcome([1.0] * 90 + [2.0] + [np.inf] * 9, [9.0] * 100)
    ensemble = SimpleNamespace(outcome=found, best_outcome=outcome([1.0], [9.0]), weights=np.full(100, 0.01))
    window = find_window(ensemble, 0.905)
    assert (window.best_stop_s, window.best_stop_chance) == (1.0, pytest.approx(0.90))
    assert (window.exposed_s, window.stop_s, window.chance) == (2.0, 2.0, pytest.approx(0.91))
