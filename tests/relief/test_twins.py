"""kernel.py must equal reference.py: every light, either order, sections and cells, with and without shadow.

Without shadow to 1e-12. With shadow, whether a point of a cell lies under a shadow's edge can flip by rounding,
where a summation in another order decides: a point then gains or loses an eighth of its light for one time step.
There 1e-3 of the relief is allowed at any point; sections, whose horizons hide smoothly, must keep to 1e-12 of it
but for a still beam, which is hidden all or not at all.
"""

from __future__ import annotations

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
    line_plan,
    milled,
    off,
    passed_off,
    rotating,
    swinging,
    table_of,
)

ORDERS = [False, True]
STACKS = [[(OX, 0.2), (NITRIDE, 0.01), (OX, 0.3), (AL, 0.3), (OX, 9.0)], [(W, 0.3), (AL, 0.2), (OX, 0.31), (OX, 9.0)]]
LIGHTS = {
    "0": rotating(0.0),
    "45": rotating(45.0),
    "60": rotating(60.0),
    "75": rotating(75.0),
    "45 still": swinging(45.0, 45.0),
    "-60 still": swinging(-60.0, -60.0),
    "75 still": swinging(75.0, 75.0),
    "60 rocking": swinging(40.0, 80.0),
    "10 rocking": swinging(-20.0, 40.0),
    "-75 rocking": swinging(-80.0, -70.0),
}
IN_CELLS = ["0", "45", "60", "75"]


def both(terrain, light, *, fall=0.45, second_order, shadow):
    table = table_of(LIGHTS[light])
    settings = {"second_order": second_order, "shadow": shadow}
    time = fall / flat_speed(table, OX)
    return [milled(backend, terrain, table, time, **settings) for backend in BACKENDS]


def check(surfaces, within):
    one, other = surfaces
    relief = float(np.ptp(one.height_nm))
    assert relief > 0.02
    assert off(one, other) <= within * relief
    assert passed_off(one, other) <= within * one.clock_s
    assert other.clock_s == one.clock_s
    assert other.steps == one.steps
    if within <= 1e-12:
        assert (other.segment == one.segment).all()


@pytest.mark.independent
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("light", LIGHTS)
def test_sections_without_shadow(light, second_order):
    terrain = ground(line_plan(42, 14), 0.03, STACKS)
    check(both(terrain, light, second_order=second_order, shadow=False), 1e-12)


@pytest.mark.independent
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("light", LIGHTS)
def test_sections_in_shadow(light, second_order):
    terrain = ground(line_plan(42, 14), 0.03, STACKS)
    within = 1e-3 if "still" in light else 1e-11
    check(both(terrain, light, second_order=second_order, shadow=True), within)


@pytest.mark.independent
@pytest.mark.parametrize("second_order", ORDERS)
@pytest.mark.parametrize("light", IN_CELLS)
@pytest.mark.parametrize("shadow", [False, True])
def test_cells(light, second_order, shadow):
    terrain = ground(disc_plan(18, 5.0), (0.05, 0.045), STACKS)
    surfaces = both(terrain, light, fall=0.45, second_order=second_order, shadow=shadow)
    check(surfaces, 1e-3 if shadow and light != "0" else 1e-12)


@pytest.mark.independent
@pytest.mark.parametrize("light", LIGHTS)
def test_sections_whose_walls_are_upright_from_the_start(light):
    terrain = ground(line_plan(42, 14), 0.03, STACKS, [0.0, 0.4])
    check(both(terrain, light, second_order=False, shadow=True), 1e-3 if "still" in light else 1e-11)


@pytest.mark.independent
@pytest.mark.parametrize("rows", [1, 6])
def test_a_clock_that_does_not_run(rows):
    """Steps that take no beam-on time pass floors at the clock of their start."""
    table = table_of(rotating(45.0))
    terrain = ground(line_plan(24, 8, rows), 0.06, STACKS)
    found = []
    for backend in BACKENDS:
        surface = milled(backend, terrain, table, 0.1)
        BACKENDS[backend](terrain, surface, table, duration_s=0.2, steps=9, counts=False)
        assert surface.clock_s == pytest.approx(0.1, rel=1e-12)
        met = surface.passed_s[np.isfinite(surface.passed_s)]
        assert len(met)
        assert met.max() <= 0.1 * (1.0 + 1e-12)
        found.append(surface)
    assert off(*found) <= 1e-12
    assert passed_off(*found) <= 1e-12
