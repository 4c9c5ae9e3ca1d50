"""Falling through columns, held against an ODE solver with events and sums by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from stackmill.timing.fall import Column, Cover, Lowering, Strip, Until, area_quantile, fall

RATE = st.floats(0.02, 5.0)
THICK = st.floats(0.5, 900.0)


def lowering(rates, duration_s, **more):
    rates = np.asarray(rates, dtype=float)
    return Lowering(rates[:, None], np.array([float(duration_s)]), **more)


def column(materials, thickness_nm):
    return Column(tuple(materials), np.asarray(thickness_nm, dtype=float)[:, None])


def by_solver(materials, thickness_nm, steps):
    """Boundary times by integrating dz/dt = rate(z) with an event at each boundary, step after step."""
    boundaries = np.cumsum(thickness_nm)
    met = np.full(len(thickness_nm), np.inf)
    depth, clock = 0.0, 0.0
    for rates, duration in steps:
        while duration > 0:
            k = int(np.searchsorted(boundaries, depth * (1 + 1e-13), side="right"))
            if k == len(materials):
                break
            floor = boundaries[k]

            def event(t, z, floor=floor):
                return z[0] - floor

            event.terminal = True
            run = solve_ivp(lambda t, z, v=rates[materials[k]]: [v], (0.0, duration), [depth], events=event, rtol=1e-12)
            if run.t_events[0].size:
                spent = float(run.t_events[0][0])
                depth, clock, duration = floor, clock + spent, duration - spent
                met[k] = clock
            else:
                depth, clock, duration = float(run.y[0, -1]), clock + duration, 0.0
        clock += duration
    return met


@pytest.mark.independent
@settings(max_examples=60, deadline=None)
@given(data=st.data())
def test_times_equal_an_ode_solver_with_events(data):
    n = data.draw(st.integers(1, 8))
    materials = data.draw(st.lists(st.integers(0, 3), min_size=n, max_size=n))
    thickness = data.draw(st.lists(THICK, min_size=n, max_size=n))
    steps = data.draw(
        st.lists(st.tuples(st.lists(RATE, min_size=4, max_size=4), st.floats(1.0, 4000.0)), min_size=1, max_size=4)
    )
    ours = fall([[column(materials, thickness)]], [lowering(r, t) for r, t in steps])
    times = np.array([ours.reach(0, 0, k + 1)[0] for k in range(n)])
    ends = np.cumsum([t for _, t in steps])
    # The solver's root finder fails where an event falls on the very end of its interval.
    assume(not np.isclose(times[:, None], ends, rtol=1e-9).any())
    judge = by_solver(materials, thickness, steps)
    both = np.isfinite(times) & np.isfinite(judge)
    assert (np.isfinite(times) == np.isfinite(judge)).all()
    np.testing.assert_allclose(times[both], judge[both], rtol=1e-9)


@pytest.mark.closed_form
def test_a_flat_stack_with_a_5_nm_film_takes_the_sum_of_thickness_over_rate():
    thickness = [300.0, 5.0, 450.0, 80.0, 600.0, 5.0, 40.0, 700.0]
    rates = [0.7, 0.35]
    materials = [0, 1] * 4
    times = np.cumsum([d / rates[m] for d, m in zip(thickness, materials, strict=True)])
    once = fall([[column(materials, thickness)]], [lowering(rates, 1e5)])
    pieces = fall([[column(materials, thickness)]], [lowering(rates, 7.3)] * 600)
    for k, time in enumerate(times):
        assert once.reach(0, 0, k + 1)[0] == pytest.approx(time, rel=1e-12)
        assert pieces.reach(0, 0, k + 1)[0] == pytest.approx(time, rel=1e-12)


@pytest.mark.closed_form
def test_a_material_that_does_not_mill_is_never_passed_but_a_film_of_no_thickness_is():
    run = fall(
        [[column([0, 1, 0], [10.0, 5.0, 10.0]), column([0, 1, 0], [10.0, 0.0, 10.0])]],
        [lowering([1.0, 0.0], 1e6)],
    )
    assert run.reach(0, 0, 1)[0] == 10.0
    assert np.isinf(run.reach(0, 0, 2)[0])
    assert run.reach(0, 1, 3)[0] == 20.0


@pytest.mark.closed_form
def test_a_strip_takes_only_leading_segments_and_a_cover_shields_its_region():
    regions = [[column([0, 1, 0], [10.0, 20.0, 30.0])], [column([0, 1, 0], [10.0, 20.0, 30.0])]]
    steps = [
        Cover(frozenset([1]), True),
        Strip(frozenset([1])),
        lowering([1.0, 1.0], 10.0),
        Strip(frozenset([1])),
        Cover(frozenset([1]), False),
        lowering([2.0, 2.0], 100.0),
    ]
    run = fall(regions, steps)
    assert [float(run.reach(0, 0, k)[0]) for k in range(4)] == [0.0, 10.0, 10.0, 25.0]
    assert [float(run.reach(1, 0, k)[0]) for k in range(4)] == [0.0, 15.0, 25.0, 40.0]


@pytest.mark.closed_form
def test_a_step_by_eye_ends_when_half_the_area_is_down_and_the_eye_may_be_late():
    thick = np.array([[60.0, 60.0]]), np.array([[90.0, 120.0]]), np.array([[200.0, 200.0]])
    columns = [Column((0,), t, a) for t, a in zip(thick, (0.3, 0.3, 0.4), strict=True)]
    until = Until(((0, 0, 1), (0, 1, 1), (0, 2, 1)), np.array([0.3, 0.3, 0.4]), 0.5, np.array([0.0, 7.0]))
    run = fall([columns], [Lowering(np.ones((1, 2)), None, until, name="look")])
    np.testing.assert_allclose(run.spans[0].end_s, [90.0, 127.0])


@pytest.mark.closed_form
def test_a_step_that_does_not_count_lowers_without_moving_the_clock():
    run = fall([[column([0, 0], [10.0, 10.0])]], [lowering([1.0], 12.0, counts=False), lowering([1.0], 30.0)])
    assert run.reach(0, 0, 1)[0] == 0.0
    assert run.reach(0, 0, 2)[0] == 8.0


@pytest.mark.independent
@settings(max_examples=100, deadline=None)
@given(
    st.lists(st.floats(0, 1e4), min_size=1, max_size=9).flatmap(
        lambda t: st.tuples(
            st.just(t), st.lists(st.floats(0.01, 1), min_size=len(t), max_size=len(t)), st.floats(0.01, 1)
        )
    )
)
def test_area_quantile_by_trying_every_time(case):
    times, area, share = case
    ours = area_quantile(np.array(times)[:, None], np.array(area), share)[0]
    enough = [
        t
        for t in sorted(times)
        if sum(a for a, x in zip(area, times, strict=True) if x <= t) >= share * sum(area) * (1 - 1e-9)
    ]
    assert ours == enough[0]
