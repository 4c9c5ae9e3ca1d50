"""The same ground as a section and as a cell, mirrored and turned: no axis and no side is special."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from relief_cases import (
    AL,
    BACKENDS,
    NITRIDE,
    OX,
    W,
    disc_plan,
    flat_speed,
    ground,
    line_in,
    line_plan,
    milled,
    off,
    rotating,
    step_count,
    swinging,
    table_of,
)

from stackmill.relief import kernel, reference

ORDERS = [False, True]
STACKS = [[(OX, 0.3), (NITRIDE, 0.05), (OX, 50.0)], [(W, 0.4), (AL, 50.0)], [(AL, 0.25), (W, 50.0)]]


def fall_time(table, fall=0.5):
    return fall / flat_speed(table, OX)


def odd_plan(rows, points):
    """Ground without any symmetry: a bar, a disc and an L."""
    plan = np.zeros((rows, points), dtype=np.intp)
    plan[:, 2:5] = 1
    y, x = np.mgrid[:rows, :points]
    plan[np.hypot(x - 11.3, y - 5.2) < 3.1] = 2
    plan[9:11, 8:15] = 1
    plan[9:14, 8:10] = 1
    return plan


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("tilt", [0, 60, 75])
@pytest.mark.parametrize("turned", [False, True], ids=["along y", "along x"])
def test_a_cell_of_a_line_is_its_section(backend, second_order, tilt, turned):
    """To rounding without shadow: a section signs its slopes, a cell knows their size, and both give one flux."""
    table = table_of(rotating(tilt))
    plan = line_plan(30, 10)
    section = ground(plan, 0.05, STACKS[:2])
    whole = np.repeat(plan, 5, axis=0)
    cell = ground(whole.T if turned else whole, 0.05, STACKS[:2])
    time = fall_time(table)
    steps = step_count(cell, table, time, second_order=second_order)
    one = milled(backend, section, table, time, steps=steps, second_order=second_order, shadow=False)
    other = milled(backend, cell, table, time, steps=steps, second_order=second_order, shadow=False)
    height = other.height_nm.T if turned else other.height_nm
    assert height == pytest.approx(np.repeat(one.height_nm, 5, axis=0), abs=1e-12)


def width_at(height, level, step):
    """How wide the ground is above a level, its edges between points."""
    n = len(height)
    middle = n // 2
    over = height - level
    right = middle + np.argmax(over[middle:] <= 0.0)
    left = middle - np.argmax(over[middle::-1] <= 0.0)
    right_edge = right - over[right] / (over[right] - over[right - 1])
    left_edge = left + over[left] / (over[left] - over[left + 1])
    return (right_edge - left_edge) * step


def widths(height, step):
    """Widths at a quarter, half and three quarters of the relief."""
    low, high = height.min(), height.max()
    return np.array([width_at(height, low + part * (high - low), step) for part in (0.25, 0.5, 0.75)])


def line_both_ways(fill, tilt, per_half=16):
    """The relief's profile of a line of W by its section (exact horizons) and by its cell (eight azimuths)."""
    table = table_of(rotating(tilt))
    step = 0.25 / per_half
    time = fall_time(table)
    section = line_in(fill, W, 6 * per_half, 2 * per_half, step)
    cell = line_in(fill, W, 6 * per_half, 2 * per_half, step, rows=4)
    steps = step_count(cell, table, time)
    one = milled("kernel", section, table, time, steps=steps).height_nm[0]
    other = milled("kernel", cell, table, time, steps=steps).height_nm[0]
    return one, other, step


@pytest.mark.independent
@pytest.mark.parametrize("fill", [OX, AL], ids=["in oxide", "in aluminium"])
@pytest.mark.parametrize("tilt", [45, 60, 75])
def test_a_cell_of_a_line_in_its_shadow_has_its_sections_widths(fill, tilt):
    """Azimuths in a section are bins hidden by an exact horizon, in a cell eight directions, turned: 2.5 %."""
    one, other, step = line_both_ways(fill, tilt)
    assert widths(other, step) == pytest.approx(widths(one, step), rel=0.025)
    assert np.ptp(other) == pytest.approx(np.ptp(one), rel=0.025)


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("tilt", [0, 60, 75])
def test_cells_mirrored_and_turned_give_surfaces_mirrored_and_turned(backend, second_order, tilt):
    """With shadow, on ground that is not symmetric itself."""
    table = table_of(rotating(tilt))
    plan = odd_plan(16, 16)
    time = fall_time(table, 0.3)

    def surface(changed):
        return milled(backend, ground(changed, 0.06, STACKS), table, time, second_order=second_order).height_nm

    straight = surface(plan)
    assert np.ptp(straight) > 0.08
    assert surface(plan[:, ::-1])[:, ::-1] == pytest.approx(straight, abs=1e-12)
    assert surface(plan[::-1])[::-1] == pytest.approx(straight, abs=1e-12)
    assert np.rot90(surface(np.rot90(plan)), -1) == pytest.approx(straight, abs=1e-12)
    assert pytest.approx(straight, abs=1e-12) == surface(plan.T).T


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("tilt", [0, 60, 75])
def test_cells_of_uneven_steps_transposed_give_surfaces_transposed(backend, tilt):
    table = table_of(rotating(tilt))
    plan = odd_plan(16, 20)
    time = fall_time(table)
    straight = milled(backend, ground(plan, (0.05, 0.08), STACKS), table, time).height_nm
    across = milled(backend, ground(plan.T, (0.08, 0.05), STACKS), table, time).height_nm
    assert pytest.approx(straight, abs=1e-12) == across.T


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("tilt", [0, 60, 75])
def test_a_symmetric_plug_stays_symmetric(backend, tilt):
    table = table_of(rotating(tilt))
    height = milled(backend, ground(disc_plan(24, 6.0), 0.05, STACKS[:2]), table, fall_time(table)).height_nm
    for changed in (height[::-1], height[:, ::-1], np.rot90(height), height.T):
        assert changed == pytest.approx(height, abs=1e-12)


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize(
    ("light", "mirrored"),
    [
        (rotating(0.0), rotating(0.0)),
        (rotating(60.0), rotating(60.0)),
        (rotating(75.0), rotating(75.0)),
        (swinging(60.0, 60.0), swinging(-60.0, -60.0)),
        (swinging(75.0, 75.0), swinging(-75.0, -75.0)),
        (swinging(-10.0, 65.0), swinging(-65.0, 10.0)),
    ],
)
def test_sections_mirrored_give_surfaces_mirrored(backend, second_order, light, mirrored):
    plan = odd_plan(16, 20)[9]
    table, other = table_of(light), table_of(mirrored)
    time = fall_time(table)
    straight = milled(backend, ground(plan, 0.06, STACKS), table, time, second_order=second_order)
    back = milled(backend, ground(plan[::-1], 0.06, STACKS), other, time, second_order=second_order)
    back.height_nm = back.height_nm[:, ::-1]
    assert off(straight, back) <= 1e-12


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
def test_where_the_cell_begins_does_not_matter(backend):
    """It repeats: ground rolled around gives the surface rolled around."""
    table = table_of(rotating(60.0))
    plan = odd_plan(16, 20)
    time = fall_time(table)
    straight = milled(backend, ground(plan, 0.06, STACKS), table, time).height_nm
    rolled = milled(backend, ground(np.roll(plan, (5, 7), (0, 1)), 0.06, STACKS), table, time).height_nm
    assert np.roll(rolled, (-5, -7), (0, 1)) == pytest.approx(straight, abs=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
def test_a_plan_laid_out_column_by_column_in_memory_mills_alike(backend):
    """A transposed array is the same ground: how it lies in memory is nobody's business."""
    table = table_of(rotating(0.0))
    rows = ground(odd_plan(8, 16).T.copy(), 0.06, STACKS)
    columns = replace(rows, column=np.asfortranarray(rows.column))
    one = milled(backend, rows, table, 0.3)
    other = milled(backend, columns, table, 0.3)
    assert off(one, other) == 0.0


def fluxes(table, material, back, ahead):
    """Godunov's flux of one point of a cell, by the reference and by the kernel; slopes as (y, x)."""
    one = reference.cell_flux(
        table, np.array([material]), [np.array([b]) for b in back], [np.array([a]) for a in ahead]
    )[0]
    tables = (table.speed, table.extremum, table.extreme)
    other = kernel._cell_flux(*tables, material, back[0], ahead[0], back[1], ahead[1])
    return np.array([one, other])


@pytest.mark.closed_form
@pytest.mark.parametrize("tilt", [0, 60, 75])
def test_the_flux_of_a_cell_does_not_jump_where_one_axis_is_straight(tilt):
    """Whether an axis opens up or down is decided by rounding there: it must not matter.

    Where both one-sided slopes of one axis agree, the flux is the other axis' own at that steepness.
    """
    random = np.random.default_rng(1)
    table = table_of(rotating(tilt))
    for _ in range(100):
        straight, one, other = random.normal(scale=(0.1, 0.5, 0.5))
        material = int(random.integers(4))
        exact = fluxes(table, material, (straight, one), (straight, other))
        for hair in (-1e-14, 1e-14):
            found = fluxes(table, material, (straight, one), (straight + hair, other))
            assert found == pytest.approx(exact, rel=1e-6)
            turned = fluxes(table, material, (one, straight), (other, straight + hair))
            assert turned == pytest.approx(exact, rel=1e-6)
