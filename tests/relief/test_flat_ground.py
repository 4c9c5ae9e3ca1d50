"""Level ground falls as by columns alone: the surface must give exactly the times that thickness over rate gives."""

from __future__ import annotations

import numpy as np
import pytest
from relief_cases import (
    AL,
    BACKENDS,
    NITRIDE,
    OX,
    W,
    flat_speed,
    ground,
    line_plan,
    milled,
    rotating,
    step_count,
    swinging,
    table_of,
)

STACK = [(OX, 0.6), (W, 0.3), (NITRIDE, 0.005), (AL, 0.9), (OX, 0.25), (NITRIDE, 0.4), (AL, 0.05), (W, 0.2), (OX, 0.7)]
"""Nine films in um, one of them 5 nm: thinner than any time step is long."""
PLANS = {"section": np.zeros((1, 5), dtype=np.intp), "cell": np.zeros((3, 4), dtype=np.intp)}
LIGHTS = {"normal": rotating(0.0), "60 rotating": rotating(60.0), "45 still": swinging(45.0, 45.0)}


def flat_times(table, stack):
    return np.cumsum([thickness / flat_speed(table, material) for material, thickness in stack])


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", [False, True])
@pytest.mark.parametrize(
    ("plan", "light"),
    [
        ("section", "normal"),
        ("section", "60 rotating"),
        ("section", "45 still"),
        ("cell", "normal"),
        ("cell", "60 rotating"),
    ],
)
@pytest.mark.parametrize("steps", [1, 7, 400])
def test_a_level_stack_falls_at_thickness_over_rate_whatever_the_time_step(backend, second_order, plan, light, steps):
    table = table_of(LIGHTS[light])
    terrain = ground(PLANS[plan], 0.02, [STACK])
    times = flat_times(table, STACK)
    surface = milled(backend, terrain, table, 1.01 * times[-1], steps=steps, second_order=second_order)
    assert surface.passed_s == pytest.approx(np.broadcast_to(times, surface.passed_s.shape), rel=1e-12)
    assert (surface.segment == len(STACK)).all()
    assert surface.height_nm == pytest.approx(np.full(terrain.column.shape, terrain.floor_nm[0, -1]), rel=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("light", ["normal", "60 rotating"])
def test_the_time_asked_for_is_where_the_surface_is(backend, light):
    """In the middle of a film: what is left of it, from what is left of the time."""
    table = table_of(LIGHTS[light])
    times = flat_times(table, STACK)
    terrain = ground(PLANS["cell"], 0.02, [STACK])
    surface = milled(backend, terrain, table, times[2] + 0.1, steps=13)
    expected = terrain.floor_nm[0, 2] - 0.1 * flat_speed(table, AL)
    assert surface.height_nm == pytest.approx(np.full((3, 4), expected), rel=1e-12)
    assert surface.clock_s == pytest.approx(times[2] + 0.1, rel=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", [False, True])
@pytest.mark.parametrize("tilt", [0, 60])
def test_columns_alike_fall_alike_however_they_are_cut_into_segments(backend, second_order, tilt):
    """Two columns of the same films, one of them cut into more segments: nothing tells them apart."""
    table = table_of(rotating(tilt))
    cut = [(m, half) for m, thickness in STACK for half in (0.25 * thickness, 0.75 * thickness)]
    terrain = ground(line_plan(24, 8, rows=6), 0.05, [STACK, cut])
    times = flat_times(table, STACK)
    duration = 1.01 * times[-1]
    surface = milled(backend, terrain, table, duration, second_order=second_order)
    whole, halves = terrain.column == 0, terrain.column == 1
    assert np.ptp(surface.height_nm) <= 1e-12
    for k, time in enumerate(times):
        assert surface.passed_s[whole][:, k] == pytest.approx(np.full(whole.sum(), time), rel=1e-9)
        assert surface.passed_s[halves][:, 2 * k + 1] == pytest.approx(np.full(halves.sum(), time), rel=1e-9)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("tilt", [0, 60])
@pytest.mark.parametrize("plan", ["section", "cell"])
def test_a_feature_a_hundred_times_wider_than_deep_is_flat_at_its_centre(backend, tilt, plan):
    """Its edges' news has not come that far: at its centre the bar has the times of its own films.

    The relief here is less than a tenth of the bar's depth, so no shadow of its edge is longer than a few points.
    """
    table = table_of(rotating(tilt))
    bar = [(W, 1.0), (NITRIDE, 0.3)]
    rows = 1 if plan == "section" else 6
    terrain = ground(line_plan(200, 100, rows), 1.3, [[(OX, 1.0), (NITRIDE, 0.3)], bar])
    times = flat_times(table, bar)
    surface = milled(backend, terrain, table, 1.001 * times[-1], steps=step_count(terrain, table, times[-1]) + 5)
    for middle in (99, 100):
        assert surface.passed_s[0, middle] == pytest.approx(times, rel=1e-9)
