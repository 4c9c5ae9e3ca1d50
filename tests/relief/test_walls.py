"""The upright edge of a masked step: a fan of facets at its top, another at its foot, nothing in between.

The step is one material that starts at two heights, in a cell wide enough that its two walls do not meet. Exact:
Hopf's formula on the table's own H (relief_cases.corner and foot). At a wall's top level ground meets the facet on
the upper concave envelope of H, at its foot on the lower convex hull: both touch H where H'(p) p = H(p) - H(0).
"""

from __future__ import annotations

import functools

import numpy as np
import pytest
from relief_cases import (
    BACKENDS,
    OX,
    SHAPES,
    Isotropic,
    corner,
    envelope_slope,
    foot,
    ground,
    line_plan,
    milled,
    peak,
    rotating,
    speed_of,
    step_count,
    table_of,
)
from scipy.optimize import brentq

from stackmill.materials.library import Library
from stackmill.rates.yields import angular_shape
from stackmill.relief.slope_speed import slope_table
from stackmill.relief.terrain import untouched

LIBRARY = Library.load()
ORDERS = [False, True]
STEP, TOP, FLOOR = 3.0, 1.6, 0.6  # the step's height, the widths of its high and its low ground, in units


def masked(per_unit, step=STEP, top=TOP, low=FLOOR):
    """High ground `top` wide in low ground `low` wide, one material, with `per_unit` points a unit."""
    inside = 2 * round(0.5 * top * per_unit)
    points = inside + 2 * round(0.5 * low * per_unit)
    return ground(line_plan(points, inside), 1.0 / per_unit, [[(OX, 50.0)], [(OX, 50.0)]], [-step, 0.0])


def both_sides(terrain, height):
    """Distances inward of the left wall with the heights there, and distances outward with the heights there."""
    dx, high = terrain.step_nm[1], int(terrain.column.sum())
    start = (terrain.column.size - high) // 2
    inward = (np.arange(high // 2) + 0.5) * dx
    outward = (np.arange(start) + 0.5) * dx
    over = height[0, start : start + high // 2]
    under = height[0, :start][::-1]
    return inward, over, outward, under


@functools.cache
def normal_table():
    return table_of(rotating(0.0), SHAPES[:1], np.ones(1))


@functools.cache
def walls(backend, per_unit, second_order):
    terrain = masked(per_unit)
    surface = milled(backend, terrain, normal_table(), 1.0, second_order=second_order)
    return terrain, surface


def chord_deg(away, heights, near, far):
    """The angle of the chord between two distances."""
    low, high = np.interp([near, far], away, heights)
    return float(np.degrees(np.arctan((high - low) / (far - near))))


def errors(backend, per_unit, second_order):
    """Mean-absolute errors times width of the tops and the feet of the walls."""
    terrain, surface = walls(backend, per_unit, second_order)
    inward, over, outward, under = both_sides(terrain, surface.height_nm)
    dx = terrain.step_nm[1]
    top = np.abs(over - corner(normal_table(), OX, inward, 1.0)).sum() * dx
    low = np.abs(under + STEP - foot(normal_table(), OX, outward, 1.0)).sum() * dx
    return top, low


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("second_order", "top", "low"), [(False, 5.5e-3, 1.1e-2), (True, 3.5e-3, 3.5e-3)])
def test_a_wall_becomes_the_envelopes_of_its_speed(backend, second_order, top, low):
    """L1, in units squared, at 200 points a unit; the bounds: about the grid step, as the fans start as points."""
    found = errors(backend, 200, second_order)
    assert found[0] <= top
    assert found[1] <= low


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
def test_the_angle_of_a_walls_facet(backend, second_order):
    """The chord over the middle of the facet, 0.30 to 0.50 in from the wall, within 0.15 degrees."""
    terrain, surface = walls(backend, 200, second_order)
    inward, over, *_ = both_sides(terrain, surface.height_nm)
    exact = chord_deg(np.array([0.3, 0.5]), corner(normal_table(), OX, np.array([0.3, 0.5]), 1.0), 0.3, 0.5)
    assert chord_deg(inward, over, 0.3, 0.5) == pytest.approx(exact, abs=0.15)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
def test_two_walls_of_one_step_are_mirrored(backend, second_order):
    _, surface = walls(backend, 200, second_order)
    assert surface.height_nm == pytest.approx(surface.height_nm[:, ::-1], abs=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("tilt", [0, 60])
def test_no_point_of_a_wall_ever_rises(backend, second_order, tilt):
    """A beam only takes away. Fluxes that smear (Lax and Friedrichs') make feet of walls rise."""
    table = table_of(rotating(tilt), SHAPES[:1], np.ones(1))
    terrain = masked(100)
    surface = untouched(terrain)
    steps = step_count(terrain, table, 1.0, second_order=second_order)
    for _ in range(steps):
        before = surface.height_nm.copy()
        BACKENDS[backend](terrain, surface, table, duration_s=1.0 / steps, steps=1, second_order=second_order)
        assert (surface.height_nm <= before + 1e-12).all()


@pytest.mark.closed_form
@pytest.mark.parametrize(("second_order", "least"), [(False, 0.70), (True, 0.70)])
def test_order_of_convergence_on_a_walls_top_and_foot(second_order, least):
    """Three halvings of the grid. Fans that start as points leave first order less than 1, for any method."""
    grids = np.array([50, 100, 200, 400])
    found = np.array([errors("kernel", n, second_order) for n in grids])
    top, low = -np.polyfit(np.log(grids), np.log(found), 1)[0]
    assert top >= least
    assert low >= least


@functools.cache
def isotropic_errors(second_order):
    """L1 errors of an upright wall, 1 high, that walks sideways for 0.4 at the speed of level ground."""
    table = table_of(rotating(0.0), [Isotropic()], np.ones(1))
    grids, found, time = np.array([50, 100, 200, 400]), [], 0.4
    for n in grids:
        terrain = masked(n, step=1.0)
        surface = milled("kernel", terrain, table, time, second_order=second_order)
        inward, over, _, under = both_sides(terrain, surface.height_nm)
        gone = -1.0 - np.sqrt(np.maximum(time**2 - inward**2, 0.0))
        exact = np.where(inward > time, -time, gone)
        wrong = np.abs(over - exact).sum() + np.abs(under + 1.0 + time).sum()
        found.append(wrong * terrain.step_nm[1])
    return grids, np.array(found)


@pytest.mark.closed_form
@pytest.mark.parametrize(("second_order", "courant", "least"), [(False, 0.9, 0.55), (True, 0.5, 0.60)])
def test_an_isotropic_wall_walks_sideways_and_rounds_its_foot(second_order, courant, least):
    """Exact: the old edge of the foot is the centre of a quarter circle; the top stays sharp.

    A wall that walks is blurred on the way. First order: by the scheme's own diffusion, dx (1 - c)/2 at Courant
    number c, to a standard deviation sqrt(dx (1 - c) t), whose L1 is that times sqrt(2/pi); order 1/2. The rounded
    foot adds up to a grid step times the width of the ground. Second order must do no worse at its own c.
    """
    grids, found = isotropic_errors(second_order)
    blur = np.sqrt((1.0 - courant) * 0.4 / grids * 2.0 / np.pi)
    assert (found <= blur + 0.8 / grids).all()
    assert -np.polyfit(np.log(grids), np.log(found), 1)[0] >= least


# --- the library's own angular laws ---------------------------------------------------------------------------


@functools.cache
def of_library(name):
    """A table of one material of the library, in units where its level ground falls 1."""
    return slope_table(rotating(0.0), [angular_shape(LIBRARY.get(name), energy_ev=1000.0)], np.ones(1))


def facet_and_foot(name):
    """Slopes of the facet and of the foot where they meet level ground, with the slope of the fastest facet."""
    speed = speed_of(of_library(name), 0)
    best = peak(speed)
    return envelope_slope(speed, 1e-3, best), envelope_slope(speed, best, 200.0), best


def side_slope(speed, low, high, wanted):
    """The slope between two at which dH/dp is `wanted`."""
    return float(brentq(lambda p: (speed(1.001 * p) - speed(0.999 * p)) / (0.002 * p) - wanted, low, high))


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("name", ["SiO2", "W", "Al", "Si", "Cu", "Ti"])
def test_facets_and_feet_of_library_materials_have_the_angles_of_their_envelopes(backend, name):
    """Angles by brentq on the angular law against the surface, 28 points over the narrower fan, second order.

    A fan runs from its kink with level ground, at t H'(p*), to the wall. Its angle is read as the chord from 5/6 to
    2/3 of the kink's distance, away from the kink, which the grid rounds; exact: the same chord between the two
    slopes that brentq finds for these places. The limit is 0.15 degrees, and the kink itself lies where the surface
    leaves its level, within 3 points.
    """
    table = of_library(name)
    speed = speed_of(table, 0)
    facet, low, best = facet_and_foot(name)
    pace = {p: (speed(1.001 * p) - speed(0.999 * p)) / (0.002 * p) for p in (facet, low)}
    drop = speed(best) + 0.3
    finest = min(abs(pace[facet]), abs(pace[low])) / 28.0
    terrain = masked(1.0 / finest, drop, 2.6 * pace[facet], 4.0 * abs(pace[low]))
    surface = milled(backend, terrain, table, 1.0, second_order=True)
    inward, over, outward, under = both_sides(terrain, surface.height_nm)
    for away, heights, sign, slope, ends in (
        (inward, over, 1.0, facet, (facet, best)),
        (outward, under + drop, -1.0, low, (low, 1e4)),
    ):
        kink = abs(pace[slope])
        places = np.array([2.0, 2.5]) / 3.0 * kink
        exact_slopes = [side_slope(speed, *ends, sign * x) for x in places]
        exact = [sign * p * x - speed(p) for p, x in zip(exact_slopes, places, strict=True)]
        wanted = chord_deg(places, np.array(exact), *places)
        found = chord_deg(away, heights, *places)
        assert found == pytest.approx(wanted, abs=0.15)
        left = np.flatnonzero(np.abs(heights + speed(0.0)) > 0.1 * finest * slope)
        assert away[left[-1]] == pytest.approx(kink, abs=3.0 * finest)
