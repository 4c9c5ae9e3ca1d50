"""When a column's centre stops being flat: facets from its edges, feet of walls, shadows.

Yield curves are Yamamura's form, Y(th)/Y(0) = cos^-f(th) exp(-f cos(th_opt) (1/cos(th) - 1)).
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq, minimize_scalar

from stackmill.timing.fall import Column, Cover, Lowering, Strip, fall
from stackmill.timing.flatness import SlopeSpeeds, flat_until

SLOPE = np.concatenate([[0.0], np.tan(np.radians(np.linspace(0.2, 89.8, 2000)))])
OXIDE, TUNGSTEN = (1.0, 2.3, 66.0), (0.9, 1.5, 62.0)


def vertical(curve, slope):
    flat, f, optimum = curve
    over = np.sqrt(1 + np.square(slope))
    return flat * over**f * np.exp(-f * np.cos(np.radians(optimum)) * (over - 1))


def speeds(*curves, shadow_tan=0.0):
    return SlopeSpeeds(SLOPE, np.stack([vertical(c, SLOPE) for c in curves]), shadow_tan)


def until(columns, steps, distance, beams, sloped=None):
    best = fall([columns], steps, keep_left=True)
    return flat_until(
        sloped=np.zeros(len(columns), bool) if sloped is None else np.array(sloped),
        distance_nm=np.asarray(distance, float),
        columns=columns,
        best=best,
        region=0,
        speeds=beams,
    )


def column(*segments):
    materials, thickness = zip(*segments, strict=True)
    return Column(materials, np.array(thickness, float)[:, None])


def beam(*rates, time=1e6):
    return Lowering(np.array(rates)[:, None], np.array([float(time)]))


def kink(curve, limit):
    """Fastest chord up to a slope, by a scalar search of its own."""
    found = minimize_scalar(
        lambda p: -(vertical(curve, p) - curve[0]) / p,
        bounds=(1e-6, limit),
        method="bounded",
        options={"xatol": 1e-12},
    )
    return -found.fun


@pytest.mark.independent
def test_a_slow_line_is_flat_until_the_kinks_from_its_edges_meet():
    steepest = brentq(lambda p: vertical(TUNGSTEN, p) - 1.0, 1e-3, np.tan(np.radians(55)))
    assert np.degrees(np.arctan(steepest)) == pytest.approx(29.79, abs=0.01)  # of the pair, worked out beforehand
    columns = [column((0, 1e4)), column((1, 1e4))]
    times = until(columns, [beam(1.0, 0.9)], [[np.inf, 800.0], [250.0, np.inf]], [speeds(OXIDE, TUNGSTEN)])
    assert times[1] == pytest.approx(250.0 / kink(TUNGSTEN, steepest), rel=2e-3)
    assert np.isinf(times[0])


@pytest.mark.independent
def test_a_standing_wall_sends_the_fastest_kink_and_a_foot():
    columns = [column((0, 1000.0), (0, 1e5)), column((0, 1e5))]
    times = until(columns, [beam(1.0)], [[np.inf, 300.0], [300.0, np.inf]], [speeds(OXIDE)])
    assert times[0] == pytest.approx(300.0 / 0.5542, rel=1e-3)  # the kink speed of an oxide wall's top
    assert times[1] == pytest.approx(300.0 / 0.1045, rel=2e-3)  # and the speed of its foot


@pytest.mark.closed_form
def test_columns_that_fall_alike_stay_flat_and_differences_add_up_over_layers():
    same = [column((0, 500.0), (0, 1e5)), column((0, 500.0), (0, 1e5))]
    assert np.isinf(until(same, [beam(1.0, 0.9)], [[np.inf, 50.0], [50.0, np.inf]], [speeds(OXIDE, TUNGSTEN)])).all()
    # two tungsten plugs of 300 nm, oxide between them: travel is kept over the pause
    plugs = [column((0, 1e5)), column((1, 300.0), (0, 1000.0), (1, 300.0), (0, 1e5))]
    steepest = brentq(lambda p: vertical(TUNGSTEN, p) - 1.0, 1e-3, np.tan(np.radians(55)))
    pace = kink(TUNGSTEN, steepest)
    way = pace * (300.0 / 0.9) * 1.5
    times = until(plugs, [beam(1.0, 0.9)], [[np.inf, 1e6], [way, np.inf]], [speeds(OXIDE, TUNGSTEN)])
    assert 300.0 / 0.9 < times[1] < 300.0 / 0.9 * 2 + 1000.0


@pytest.mark.closed_form
def test_the_foot_of_a_slope_spreads_over_the_faster_floor():
    # a curve on which gentle slopes come down slower than flat ground, as under a tilted rotating beam
    slope = np.array([0.0, 0.5, 1.0, 2.0])
    table = SlopeSpeeds(slope, np.array([[1.0, 0.8, 1.1, 1.5], [0.9, 1.0, 1.2, 1.3]]), 0.0)
    columns = [column((0, 1e5)), column((1, 1e5))]
    times = until(columns, [beam(1.0, 0.9)], [[np.inf, 300.0], [1e9, np.inf]], [table])
    assert times[0] == pytest.approx(300.0 / 0.4)  # (1.0 - 0.8) / 0.5, up to the slope that keeps up


@pytest.mark.closed_form
def test_a_shadow_falls_on_what_lies_low_beside_what_stands_high():
    columns = [column((0, 1e5)), column((1, 1e5))]
    tan = np.tan(np.radians(60.0))
    flat_only = SlopeSpeeds(SLOPE, np.stack([np.full_like(SLOPE, 1.0), np.full_like(SLOPE, 0.9)]), tan)
    times = until(columns, [beam(1.0, 0.9)], [[np.inf, 200.0], [1e9, np.inf]], [flat_only])
    assert times[0] == pytest.approx(200.0 / tan / 0.1)


@pytest.mark.closed_form
def test_a_slope_is_never_flat_a_strip_leaves_a_wall_and_a_cover_does_not():
    columns = [column((2, 400.0), (0, 1e5)), column((0, 1e5)), column((0, 1e5))]
    distance = [[np.inf, 300.0, 1e9], [1e9, np.inf, 1e9], [1e9, 1e9, np.inf]]
    steps = [
        Cover(frozenset([0]), True),
        Strip(frozenset([2])),
        Cover(frozenset([0]), False),
        beam(1.0, 0.9, 0.5),
    ]
    none = until(columns, steps, distance, [None, None, None, speeds(OXIDE, TUNGSTEN, OXIDE)], [False, False, True])
    assert none[2] == 0.0
    bare = until(
        columns,
        [Strip(frozenset([2])), beam(1.0, 0.9, 0.5)],
        distance,
        [None, speeds(OXIDE, TUNGSTEN, OXIDE)],
    )
    assert bare[0] == pytest.approx(300.0 / 0.5542, rel=1e-3)
