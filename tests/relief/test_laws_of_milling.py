"""What holds for any ground: proportions of time and current, facts of the trade, and nothing that cannot be."""

from __future__ import annotations

import functools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from relief_cases import (
    AL,
    BACKENDS,
    FLAT,
    NITRIDE,
    OX,
    SHAPES,
    W,
    disc_plan,
    flat_speed,
    ground,
    line_plan,
    milled,
    off,
    passed_off,
    rotating,
    step_count,
    swinging,
    table_of,
)

from stackmill.materials.library import Library
from stackmill.rates.yields import angular_shape, rate_nm_per_s
from stackmill.relief.reference import one_sided
from stackmill.relief.slope_speed import slope_table
from stackmill.relief.terrain import untouched

LIBRARY = Library.load()
STACKS = [[(OX, 0.3), (NITRIDE, 0.05), (OX, 50.0)], [(W, 0.4), (AL, 50.0)]]


# --- proportions ----------------------------------------------------------------------------------------------


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("second_order", [False, True])
@pytest.mark.parametrize("light", [rotating(0.0), rotating(60.0), swinging(45.0, 45.0), swinging(-20.0, 60.0)])
@pytest.mark.parametrize("whole", ["scaled", "built anew"])
def test_twice_the_current_in_half_the_time_mills_the_same(backend, second_order, light, whole):
    plan = line_plan(40, 12) if light.kind else np.repeat(line_plan(16, 6), 6, axis=0)
    terrain = ground(plan, 0.05, STACKS)
    table = table_of(light)
    twice = table.scaled(np.full(4, 2.0)) if whole == "scaled" else table_of(light, flat=2.0 * FLAT)
    time = 0.5 / flat_speed(table, OX)
    steps = step_count(terrain, table, time, second_order=second_order)
    assert twice.fastest_nm_per_s == pytest.approx(2.0 * table.fastest_nm_per_s, rel=1e-12)
    slow = milled(backend, terrain, table, time, steps=steps, second_order=second_order)
    fast = milled(backend, terrain, twice, 0.5 * time, steps=steps, second_order=second_order)
    assert off(slow, fast) <= 1e-12
    fast.passed_s *= 2.0
    assert passed_off(slow, fast) <= 1e-12 * time


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
def test_ground_of_another_size_mills_to_the_same_picture(backend):
    """No length is special: a thousand times as large in a thousand times the time, over the same steps."""
    table = table_of(rotating(60.0))
    time = 0.5 / flat_speed(table, OX)
    large = [[(m, 1000.0 * d) for m, d in stack] for stack in STACKS]
    plan = disc_plan(14, 4.0)
    one = milled(backend, ground(plan, 0.05, STACKS), table, time, steps=60)
    other = milled(backend, ground(plan, 50.0, large), table, 1000.0 * time, steps=60)
    assert other.height_nm / 1000.0 == pytest.approx(one.height_nm, abs=1e-9)


# --- facts of the trade ---------------------------------------------------------------------------------------


@functools.cache
def library_table(names, tilt):
    """Materials of the library at 1 keV and 0.5 mA/cm2, rotating."""
    materials = [LIBRARY.get(name) for name in names]
    beam = {"energy_ev": 1000.0, "incidence_rad": np.radians(tilt), "current_density_ma_per_cm2": 0.5}
    flat = np.array([float(rate_nm_per_s(m, **beam)) for m in materials])
    return slope_table(rotating(tilt), [angular_shape(m, energy_ev=1000.0) for m in materials], flat)


def plug_under_aluminium(points, radius, rows):
    """A plug of W, 400 nm deep, in oxide under 300 nm of aluminium; points of 25 nm."""
    plan = disc_plan(points, radius) if rows > 1 else line_plan(points, int(2 * radius))
    return ground(plan, 25.0, [[(0, 300.0), (1, 5000.0)], [(0, 300.0), (2, 400.0), (1, 5000.0)]])


@pytest.mark.common_practice
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize("tilt", [0, 60])
@pytest.mark.parametrize("rows", [1, 2], ids=["section", "cell"])
def test_a_tungsten_plug_under_aluminium_leaves_a_spike_with_a_tungsten_tip(backend, tilt, rows):
    """Delayering aluminium metal by ion mill leaves the tungsten plugs standing out of the oxide."""
    table = library_table(("Al", "SiO2", "W"), tilt)
    terrain = plug_under_aluminium(24, 4.0, rows)
    time = 300.0 / flat_speed(table, 0) + 200.0 / flat_speed(table, 1)
    surface = milled(backend, terrain, table, time)
    height = surface.height_nm
    tip = np.unravel_index(np.argmax(height), height.shape)
    assert terrain.material[terrain.column[tip], surface.segment[tip]] == 2
    assert terrain.column[tip] == 1
    beside = height[terrain.column == 0]
    assert height.max() > height[terrain.column == 0].max()
    assert height.max() - np.median(beside) > 40.0
    middle = height[height.shape[0] // 2]
    right = np.diff(middle[len(middle) // 2 :])
    assert (right <= 1e-9).all()


def standing(tilt, second_order):
    """Height of a bar of W over oxide, 1 um wide, when the oxide beside it has come down 200 nm."""
    table = library_table(("SiO2", "W"), tilt)
    terrain = ground(line_plan(160, 40), 25.0, [[(0, 5000.0)], [(1, 5000.0)]])
    surface = milled("kernel", terrain, table, 200.0 / flat_speed(table, 0), second_order=second_order)
    return float(surface.height_nm[0, 80] - surface.height_nm[0, 0])


@pytest.mark.common_practice
@pytest.mark.parametrize("second_order", [False, True])
def test_tilting_with_rotation_raises_tungsten_against_oxide(second_order):
    """Oxide gains more by tilt than tungsten, whose yield peaks at less tilt: bars stand higher at 60 degrees."""
    heights = [standing(tilt, second_order) for tilt in (0, 30, 45, 60)]
    assert heights[0] > 0.0
    assert np.all(np.diff(heights) > 0.0)


# --- nothing that cannot be -----------------------------------------------------------------------------------

LIGHTS = (
    *(rotating(tilt) for tilt in (0.0, 20.0, 45.0, 60.0, 75.0, 80.0)),
    *(swinging(tilt, tilt) for tilt in (-80.0, -45.0, 0.0, 30.0, 70.0)),
    *(swinging(low, high) for low, high in ((-60.0, 20.0), (-10.0, 10.0), (30.0, 80.0), (-80.0, -50.0))),
)
MASK = 4  # a material that does not mill at all
MATERIALS = (OX, W, AL, NITRIDE, MASK)


@functools.cache
def any_table(number):
    return table_of(LIGHTS[number], (*SHAPES, SHAPES[0]), np.append(FLAT, 0.0))


thickness = st.one_of(st.integers(0, 1000).map(lambda n: 0.001 * n), st.sampled_from([0.0, 0.005, 0.1]))
segment = st.tuples(st.sampled_from(MATERIALS), thickness)
stacks = st.lists(st.lists(segment, min_size=1, max_size=5), min_size=1, max_size=4)
tops_of = st.integers(-500, 500).map(lambda n: 0.001 * n)


@st.composite
def grounds(draw):
    """Small stacks under lines and discs or under any plan at all, with a start that may be stepped."""
    columns = draw(stacks)
    rows = draw(st.sampled_from([1, 1, 5, 8]))
    points = draw(st.integers(5, 24) if rows == 1 else st.integers(5, 10))
    kind = draw(st.sampled_from(["line", "disc", "any"]))
    if kind == "any":
        seed = draw(st.integers(0, 2**31))
        plan = np.random.default_rng(seed).integers(0, len(columns), (rows, points))
    elif kind == "disc" and rows > 1:
        plan = disc_plan(points, 0.3 * points) * (len(columns) - 1)
    else:
        plan = line_plan(points, points // 3, rows) * (len(columns) - 1)
    tops = draw(st.lists(tops_of, min_size=len(columns), max_size=len(columns)))
    step = draw(st.sampled_from([0.01, 0.05, 0.3]))
    return ground(plan, step if rows == 1 else (step, draw(st.sampled_from([1.0, 1.7])) * step), columns, tops)


def greatest_fall(terrain, table, height, span):
    """No point can fall farther: the fastest slope of the fastest material up to twice the steepest there is.

    Twice, as second order draws lines through three points; sqrt(2) for two axes.
    """
    steepest = max(float(np.abs(s).max()) for s in one_sided(height, terrain.step_nm))
    steepest = 2.0 * np.sqrt(2.0) * steepest + 1.0
    q = np.linspace(-1.0, 1.0, 4001) * steepest / (1.0 + steepest)
    slopes = q / (1.0 - np.abs(q))
    return span * max(float(table.speed_at(m, slopes).max()) for m in terrain.materials) * (1.0 + 1e-5)


@pytest.mark.closed_form
@settings(max_examples=120, deadline=None, derandomize=True)
@given(
    terrain=grounds(),
    number=st.integers(0, len(LIGHTS) - 1),
    second_order=st.booleans(),
    shadow=st.booleans(),
    backend=st.sampled_from(["kernel", "kernel", "reference"]),
    depth=st.floats(0.01, 3.0),
)
def test_a_beam_only_takes_away_and_never_more_than_its_fastest_speed(
    terrain, number, second_order, shadow, backend, depth
):
    """Any ground under any light: finite, falling, above its last floor, times in order; all to rounding."""
    number = number if terrain.is_section else number % 6  # cells turn
    table = any_table(number)
    surface = untouched(terrain)
    lasting = depth / max(flat_speed(table, AL), 0.05)
    span = lasting / step_count(terrain, table, lasting, second_order=second_order)
    bottom = np.array([terrain.floor_nm[c, n - 1] for c, n in enumerate(terrain.count)])[terrain.column]
    for _ in range(12):
        before = surface.copy()
        BACKENDS[backend](terrain, surface, table, duration_s=span, steps=1, second_order=second_order, shadow=shadow)
        assert np.isfinite(surface.height_nm).all()
        assert (surface.height_nm <= before.height_nm + 1e-12).all()
        assert (surface.height_nm >= bottom - 1e-12).all()
        fall = before.height_nm - surface.height_nm
        assert fall.max() <= greatest_fall(terrain, table, before.height_nm, span) + 1e-12
        check_segments(terrain, before, surface)


def check_segments(terrain, before, surface):
    """The surface is where its segment is, and floors are met one after the other, none before its time."""
    assert (surface.segment >= before.segment).all()
    assert (surface.segment <= terrain.count[terrain.column]).all()
    number = np.arange(terrain.floor_nm.shape[1])
    met = number < surface.segment[..., None]
    assert np.array_equal(np.isfinite(surface.passed_s), met)
    floor = terrain.floor_nm[terrain.column]
    assert (surface.height_nm[..., None] <= floor + 1e-12)[met].all()
    left = ~met & (number < terrain.count[terrain.column][..., None])
    assert (surface.height_nm[..., None] >= floor - 1e-12)[left].all()
    times = np.where(met, surface.passed_s, np.inf)
    with np.errstate(invalid="ignore"):
        assert not (np.diff(times, axis=-1) < -1e-12).any()
    assert (surface.passed_s[met] <= surface.clock_s * (1.0 + 1e-9) + 1e-12).all()


@pytest.mark.independent
@settings(max_examples=40, deadline=None, derandomize=True)
@given(terrain=grounds(), number=st.integers(0, len(LIGHTS) - 1), second_order=st.booleans())
def test_both_backends_agree_on_any_ground(terrain, number, second_order):
    """Without shadow, to rounding: see test_twins.py for what shadow may flip."""
    number = number if terrain.is_section else number % 6
    table = any_table(number)
    time = 0.2 / max(flat_speed(table, AL), 0.05)
    steps = min(12, step_count(terrain, table, time, second_order=second_order))
    surfaces = [untouched(terrain) for _ in BACKENDS]
    for backend, surface in zip(BACKENDS.values(), surfaces, strict=True):
        span = time * steps / step_count(terrain, table, time, second_order=second_order)
        backend(terrain, surface, table, duration_s=span, steps=steps, second_order=second_order, shadow=False)
    assert off(*surfaces) <= 1e-12
    assert passed_off(*surfaces) <= 1e-9
