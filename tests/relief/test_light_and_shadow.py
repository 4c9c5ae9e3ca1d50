"""What stands between a point and the beam: horizons, hidden shares of the light, and what they do to a surface."""

from __future__ import annotations

import numpy as np
import pytest
from relief_cases import (
    AL,
    BACKENDS,
    FLAT,
    OX,
    SHAPES,
    W,
    disc_plan,
    flat_speed,
    ground,
    line_in,
    milled,
    rotating,
    speed_of,
    swinging,
    table_of,
)
from scipy.integrate import quad
from scipy.optimize import brentq

from stackmill.relief import kernel, reference
from stackmill.relief.slope_speed import BINS, ROTATING


def hull(height, step, side=0):
    """The kernel's horizons of a section, upwards to greater (0) or smaller (1) x."""
    n = len(height)
    found = np.empty(n)
    kernel._horizons(height, step, np.empty(2 * n), np.empty(2 * n, dtype=np.int64), found, side)
    return found


def wall(points=200, at=120, high=3.0):
    """Level ground with a wall `high` from point `at` on; the cell repeats it, so it stands again to the left."""
    height = np.zeros(points)
    height[at:] = high
    return height


# --- the speed of slopes --------------------------------------------------------------------------------------


def direct(shape, slope, incidence, azimuth=0.0):
    """Y(g) cos g / cos b over Y(0) of a slope under one direction, by the formula of rates/facets.py."""
    cos_b = 1.0 / np.sqrt(1.0 + slope**2)
    cosine = cos_b * np.cos(incidence) - slope * cos_b * np.sin(incidence) * np.cos(azimuth)
    return float(shape.ratio(np.array(np.arccos(cosine)))) * cosine / cos_b if cosine > 0.0 else 0.0


def by_quadrature(light, shape, slope):
    """The same, averaged over a turn or a swing by scipy's adaptive quadrature."""
    if light.kind == ROTATING:
        return quad(lambda a: direct(shape, slope, light.high_rad, a), 0.0, np.pi, limit=200)[0] / np.pi
    if light.low_rad == light.high_rad:
        return direct(shape, slope, light.high_rad)
    swing = light.high_rad - light.low_rad
    return quad(lambda th: direct(shape, slope, th), light.low_rad, light.high_rad, limit=200)[0] / swing


@pytest.mark.independent
@pytest.mark.parametrize(
    "light",
    [
        rotating(0.0),
        rotating(30.0),
        rotating(60.0),
        rotating(75.0),
        swinging(60.0, 60.0),
        swinging(-20.0, 50.0),
        swinging(30.0, 80.0),
    ],
)
def test_the_speed_of_slopes_is_what_quadrature_over_the_light_gives(light):
    """Slopes to 80 degrees either way, within 1e-4 of level ground's speed or of the slope's own."""
    table = table_of(light)
    for material, shape in enumerate(SHAPES):
        level = by_quadrature(light, shape, 0.0)
        for slope in (-5.6, -2.0, -0.7, -0.1, 0.05, 0.4, 1.1, 3.0):
            expected = flat_speed(table, material) * by_quadrature(light, shape, slope) / level
            found = speed_of(table, material)(slope)
            assert found == pytest.approx(expected, rel=1e-4, abs=1e-4 * flat_speed(table, material))


# --- horizons -------------------------------------------------------------------------------------------------


@pytest.mark.closed_form
@pytest.mark.parametrize("horizon", [reference.horizon, hull], ids=["reference", "kernel"])
def test_the_horizon_beside_a_wall(horizon):
    """Height over distance to the wall's upper edge."""
    found = horizon(wall(), 0.1)
    assert found[:120] == pytest.approx(3.0 / (0.1 * (120 - np.arange(120))), rel=1e-12)
    assert (found[120:] == 0.0).all()


@pytest.mark.independent
@pytest.mark.parametrize("seed", range(20))
@pytest.mark.parametrize("rough", [0.01, 1.0, 100.0])
def test_the_hull_sees_what_looking_at_every_point_sees(seed, rough):
    random = np.random.default_rng(seed)
    points = int(random.integers(2, 150))
    height = rough * np.cumsum(random.normal(size=points))
    if seed % 3 == 0:
        height = np.round(height / rough) * rough  # terraces: many points alike
    step = random.uniform(0.1, 10.0)
    assert hull(height, step) == pytest.approx(reference.horizon(height, step), rel=1e-12, abs=1e-12 * rough)
    left = reference.horizon(height[::-1], step)[::-1]
    assert hull(height, step, side=1) == pytest.approx(left, rel=1e-12, abs=1e-12 * rough)


# --- the hidden part of the light -----------------------------------------------------------------------------


@pytest.mark.closed_form
@pytest.mark.parametrize("tilt", [30, 45, 60, 75, 85])
def test_the_share_of_a_turning_beam_that_a_wall_hides(tilt):
    """acos(d/(H tan a))/pi of the whole circle: where the wall's shadow in the beam's plane is longer than d."""
    high, step = 3.0, 0.1
    light = rotating(tilt)
    distance = step * (120 - np.arange(120))
    seen = reference.horizon(wall(high=high), step)[:120]
    share = light.hidden_bins(seen, 1) / BINS / 2.0
    expected = np.arccos(np.minimum(1.0, distance / (high * np.tan(np.radians(tilt))))) / np.pi
    assert share == pytest.approx(expected, abs=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize(("low", "high"), [(20, 70), (-10, 60), (-40, 40), (0, 50)])
def test_the_share_of_a_swinging_beam_that_a_wall_hides(low, high):
    """The part of the swing that is lower than the wall's upper edge; of what comes from its side."""
    distance = 0.1 * (120 - np.arange(120))
    seen = reference.horizon(wall(), 0.1)[:120]
    lowest_seen = np.degrees(np.arctan(distance / 3.0))
    expected = np.clip((high - lowest_seen) / (high - max(low, 0)), 0.0, 1.0)
    assert swinging(low, high).hidden_bins(seen, 1) / BINS == pytest.approx(expected, abs=1e-12)
    assert swinging(-high, -low).hidden_bins(seen, -1) / BINS == pytest.approx(expected, abs=1e-12)
    assert (swinging(low, high).hidden_bins(np.zeros(5), 1) == 0.0).all()


@pytest.mark.closed_form
@pytest.mark.parametrize("horizon", [0.5, 1.2, 4.0])
def test_the_kernel_hides_as_many_bins(horizon):
    for light in (rotating(60.0), swinging(50.0, 50.0), swinging(20.0, 70.0), swinging(-30.0, 60.0)):
        for side, number in ((1, 0), (-1, 1)):
            found = kernel._hidden_bins(horizon, number, light.kind, light.low_rad, light.high_rad, light.steepest_tan)
            assert found == pytest.approx(float(light.hidden_bins(np.array([horizon]), side)[0]), abs=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("tilt", [45, 60, 75])
def test_all_of_the_light_hidden_is_all_of_the_speed(tilt):
    """The hidden shares of both sides together are 1 for every slope that mills at all."""
    table = table_of(rotating(tilt))
    assert table.hidden[0, :, -1] + table.hidden[1, :, -1] == pytest.approx(np.ones_like(table.hidden[0, :, -1]))
    assert table.hidden[0, :, -1] == pytest.approx(table.hidden[1, :, -1, ::-1], abs=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
def test_ground_in_a_shadow_falls_at_the_part_of_the_light_it_sees(backend):
    """One short time step beside a wall that does not mill: level ground loses what the hidden azimuths bring.

    All azimuths bring level ground the same, so the share of the circle is the share of the speed.
    """
    tilt, high, step = 60.0, 2.0, 0.05
    table = table_of(rotating(tilt), SHAPES[:2], np.array([1.0, 0.0]))
    plan = np.zeros(200, dtype=np.intp)
    plan[150:] = 1
    terrain = ground(plan, step, [[(OX, 50.0)], [(W, 50.0)]], [0.0, high])
    surface = milled(backend, terrain, table, 1e-4, steps=1)
    right = step * (150 - np.arange(1, 149))
    left = step * (1 + np.arange(1, 149))
    reach = high * np.tan(np.radians(tilt))
    hidden = sum(np.arccos(np.minimum(1.0, d / reach)) / np.pi for d in (right, left))
    fall = -surface.height_nm[0, 1:149] / (1e-4 * flat_speed(table, OX))
    assert fall == pytest.approx(1.0 - hidden, abs=1e-9)


# --- the lee of a line under a still beam ---------------------------------------------------------------------


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("tilt", "known", "time"), [(45, 0.43404, 0.5), (60, 0.19496, 0.3)])
def test_the_wedge_behind_a_line_has_the_slope_at_which_fill_keeps_up_with_the_line(backend, tilt, known, time):
    """H_ox(p) = v_W, by brentq on the table: gentle slopes away from a still beam are slower than level ground.

    The known slopes are of the same equation by quadrature of its own. The times end before the line's own facet
    has crossed its top to the lee.
    """
    table = table_of(swinging(tilt, tilt), SHAPES[:2], FLAT[:2])
    slow, speed = flat_speed(table, W), speed_of(table, OX)
    slope = float(brentq(lambda p: speed(p) - slow, 0.0, 2.0))
    assert slope == pytest.approx(known, abs=1e-4)
    per_half = 40
    terrain = line_in(OX, W, 12 * per_half, 2 * per_half, 0.25 / per_half)
    height = milled(backend, terrain, table, time).height_nm[0]
    found = np.diff(height)[5 * per_half - 16 : 5 * per_half - 6] / terrain.step_nm[1]
    assert found == pytest.approx(np.full(10, slope), abs=0.002)


# --- azimuths of a cell ---------------------------------------------------------------------------------------


def fixed(count):
    def bearings(step):
        azimuth = 2.0 * np.pi / count * (np.arange(count) + 0.5)
        return np.stack([np.cos(azimuth), np.sin(azimuth)], axis=1)

    return bearings


def plug_in(fill, tilt, per_radius=6, fall=0.6):
    """A round plug of W, radius 0.25, in a cell of five radii, until the level fill has fallen so far."""
    table = table_of(rotating(tilt))
    plan = disc_plan(5 * per_radius, float(per_radius))
    terrain = ground(plan, 0.25 / per_radius, [[(fill, 50.0)], [(W, 50.0)]])
    return terrain, table, fall / flat_speed(table, fill)


def rms_over_relief(one, other):
    return np.sqrt(np.mean((one - other) ** 2)) / np.ptp(other)


@pytest.mark.independent
@pytest.mark.parametrize("tilt", [60, 75])
def test_eight_turned_azimuths_are_worth_sixty_four(tilt, monkeypatch):
    """Root mean square of the difference: 0.5 % of the relief."""
    case = plug_in(OX, tilt)
    turned = milled("kernel", *case).height_nm
    monkeypatch.setattr(reference, "bearings", fixed(64))
    assert rms_over_relief(turned, milled("reference", *case).height_nm) <= 0.005


@pytest.mark.independent
def test_eight_fixed_azimuths_would_not_do(monkeypatch):
    """So that the test above means something: azimuths that do not turn leave rays in the ground."""
    case = plug_in(OX, 75)
    turned = milled("kernel", *case).height_nm
    monkeypatch.setattr(reference, "bearings", fixed(8))
    assert rms_over_relief(milled("reference", *case).height_nm, turned) > 0.01


@pytest.mark.slow
@pytest.mark.independent
@pytest.mark.parametrize(("tilt", "bound"), [(60, 0.005), (75, 0.02)])
def test_eight_turned_azimuths_where_the_relief_is_deep(tilt, bound, monkeypatch):
    """W in Al, whose relief is 2.5 radii at 60 degrees. At 75 degrees 64 and 128 differ by 0.9 % themselves."""
    case = plug_in(AL, tilt, per_radius=8, fall=1.2)
    turned = milled("kernel", *case).height_nm
    monkeypatch.setattr(reference, "bearings", fixed(64))
    assert rms_over_relief(turned, milled("reference", *case).height_nm) <= bound


@pytest.mark.closed_form
def test_bearings_are_mirrored_and_turned_into_themselves_and_fill_the_circle():
    for step in range(50):
        found = reference.bearings(step)
        assert np.hypot(*found.T) == pytest.approx(np.ones(len(found)), rel=1e-12)
        for change in ([[-1, 0], [0, 1]], [[0, -1], [1, 0]]):
            turned = found @ np.array(change).T
            nearest = np.abs(turned[:, None] - found[None]).max(axis=2).min(axis=1)
            assert nearest.max() <= 1e-12
    azimuth = np.concatenate([np.arctan2(*reference.bearings(step).T[::-1]) for step in range(200)])
    gaps = np.diff(np.sort(azimuth))
    assert gaps.max() <= 4.0 * 2.0 * np.pi / len(azimuth)


@pytest.mark.closed_form
@pytest.mark.parametrize("rows", [4, 9, 40])
@pytest.mark.parametrize("step", range(6))
def test_a_shadow_of_a_cell_that_repeats_does_not_end_with_the_cell(rows, step):
    """A line along y, cut at any length: light from a slant comes from the copies of the cell too.

    The shadow of the line is 3.7 long, the cells 0.2 to 2; held against one long enough that none is repeated. One
    point in a hundred may differ: an edge of a shadow falls between points.
    """
    height = np.repeat(wall(points=40, at=25, high=1.0)[None], rows, axis=0)
    long = np.repeat(height[:1], 400, axis=0)
    for bearing in reference.bearings(step):
        found = reference.in_shadow(height, (0.05, 0.05), bearing, 3.7)
        expected = reference.in_shadow(long, (0.05, 0.05), bearing, 3.7)[200]
        assert (found != expected[None]).mean() <= 0.01


def beside(terrain, shaded):
    """Heights (2, ny, nx) of a cell and of the middle one of three by three of its copies, after the same time."""
    table = table_of(rotating(75.0))
    time = 0.4 / flat_speed(table, OX)
    copies = ground(np.tile(terrain.column, (3, 3)), terrain.step_nm, [[(OX, 50.0)], [(W, 50.0)]])
    ny, nx = terrain.column.shape
    one = milled("kernel", terrain, table, time, shadow=shaded).height_nm
    many = milled("kernel", copies, table, time, shadow=shaded).height_nm
    return np.stack([one, many[ny : 2 * ny, nx : 2 * nx]])


@pytest.mark.closed_form
@pytest.mark.parametrize("shaded", [False, True])
def test_a_cell_and_nine_of_it_mill_alike(shaded):
    """Exactly without shadow; with it to 1 % of the relief, as an edge of a shadow may fall between points."""
    one, many = beside(ground(disc_plan(14, 4.0), 0.04, [[(OX, 50.0)], [(W, 50.0)]]), shaded)
    assert np.abs(one - many).max() <= (0.01 if shaded else 1e-12) * np.ptp(one)
