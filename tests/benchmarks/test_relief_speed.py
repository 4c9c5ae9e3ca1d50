"""How fast the surface moves, against fast marching of a front through the same depth (scikit-fmm) and plain numpy.

A line or plug in ground 2.5 um wide goes 5 um down, as a section of 600 points and as a cell of 200 x 200. Fast
marching takes 600 x 800 and 200 x 200 x 400 points for one flat front, once, with no material and no shadow in it.
"""

from __future__ import annotations

import functools
import time
from itertools import pairwise

import numpy as np
import pytest
import skfmm
from relief_cases import FLAT, OX, SHAPES, W, disc_plan, flat_speed, ground, line_plan, rotating, step_count, table_of

from stackmill.relief import kernel, reference
from stackmill.relief.terrain import untouched

WIDE, DEEP, RADIUS = 2.5, 5.0, 0.25  # um; a line or plug of tungsten, 1 um deep, in oxide
PLUG = [[(OX, 2.0 * DEEP)], [(W, 1.0), (OX, 2.0 * DEEP - 1.0)]]


@functools.cache
def table(tilt):
    return table_of(rotating(tilt), SHAPES[:2], FLAT[:2])


def section(points):
    inside = 2 * round(RADIUS / WIDE * points)
    return ground(line_plan(points, inside), WIDE / points, PLUG)


def cell(points):
    return ground(disc_plan(points, RADIUS / WIDE * points), WIDE / points, PLUG)


def milling(terrain, tilt, mill=kernel.mill):
    """The whole depth of level oxide, in as many steps as are stable."""
    duration = DEEP / flat_speed(table(tilt), OX)
    steps = step_count(terrain, table(tilt), duration)

    def work() -> None:
        mill(terrain, untouched(terrain), table(tilt), duration_s=duration, steps=steps)

    return work


def marching(*shape):
    """One flat front through a grid whose last axis is the depth."""
    depth = np.broadcast_to(np.arange(shape[-1]) - 3.5, shape).copy()
    speed = np.ones(shape)

    def work() -> None:
        skfmm.travel_time(depth, speed, dx=1.0)

    return work


@pytest.mark.parametrize(("tilt", "target"), [(0, 0.25), (60, 1.0)])
def test_a_section_against_fast_marching(against, tilt, target):
    against(
        f"a section of 600 points through 5 um at {tilt} deg against fast marching on 600 x 800",
        milling(section(600), tilt),
        marching(600, 800),
        target=target,
    )


@pytest.mark.parametrize(("tilt", "target"), [(0, 0.25), (60, 0.6)])
def test_a_cell_against_fast_marching(against, tilt, target):
    against(
        f"a cell of 200 x 200 points through 5 um at {tilt} deg against fast marching on 200 x 200 x 400",
        milling(cell(200), tilt),
        marching(200, 200, 400),
        target=target,
        rounds=3,
    )


def test_a_section_against_plain_numpy(against):
    terrain = section(600)
    against(
        "the compiled section of 600 points through 5 um against the same in plain numpy",
        milling(terrain, 0),
        milling(terrain, 0, reference.mill),
        target=0.2,
        rounds=3,
    )


def _seconds(work) -> float:
    """The least of three."""
    found = []
    for _ in range(3):
        start = time.perf_counter()
        work()
        found.append(time.perf_counter() - start)
    return min(found)


@pytest.mark.parametrize("tilt", [0, 60])
@pytest.mark.parametrize(("make", "points", "law"), [(section, (300, 600, 1200), 4.0), (cell, (50, 100, 200), 8.0)])
def test_how_time_grows_with_points(benchmark, tilt, make, points, law):
    """Twice the points: twice the steps over twice (section) or four times (cell) the points. Reported, not judged."""
    milling(make(points[0]), tilt)()  # compile
    taken = [_seconds(milling(make(n), tilt)) for n in points]
    growth = [later / earlier for earlier, later in pairwise(taken)]
    benchmark.extra_info.update(points=points, seconds=taken, growth=growth, law=law)
    benchmark.pedantic(milling(make(points[0]), tilt), rounds=1, warmup_rounds=0)
    print(f"{make.__name__} at {tilt} deg, {points} points: times {[f'{g:.2f}' for g in growth]} (law: {law:g})")
