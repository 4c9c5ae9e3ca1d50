"""Smooth ground that recedes along its normal at one speed: exact by characteristics, and against scikit-fmm.

The isotropic yield is 1/cos(th), so that H(p) = v sqrt(1 + p^2). Every point of the ground moves v t along its normal
until neighbours meet; until then the surface is known in closed form. The wave of the ground is 0.1 high and 1 long:
its crests are sharp after 1/(0.1 (2 pi)^2) = 0.25 s, the runs end at 0.1 s.
"""

from __future__ import annotations

import functools

import numpy as np
import pytest
import skfmm
from relief_cases import BACKENDS, Isotropic, ground, rotating, step_count, table_of
from scipy.ndimage import map_coordinates

from stackmill.relief.terrain import untouched

HIGH, TIME = 0.1, 0.1
ORDERS = [False, True]


@functools.cache
def isotropic():
    return table_of(rotating(0.0), [Isotropic()], np.ones(1))


def wave(x):
    return HIGH * np.cos(2.0 * np.pi * x)


def exact(x, time=TIME):
    """The surface after a time at places (n,) of the unit cell: normals of a fine wave, read off between them."""
    start = np.linspace(-1.0, 2.0, 600_001)
    slope = -2.0 * np.pi * HIGH * np.sin(2.0 * np.pi * start)
    size = np.sqrt(1.0 + slope**2)
    return np.interp(x, start + time * slope / size, wave(start) - time / size)


def smooth(backend, points, second_order, height):
    """Ground of one material, whose start (ny, nx) is set by hand, after TIME."""
    rows = height.shape[0]
    terrain = ground(np.zeros((rows, points), dtype=np.intp), 1.0 / points, [[(0, 10.0)]])
    surface = untouched(terrain)
    surface.height_nm[:] = height
    steps = step_count(terrain, isotropic(), TIME, second_order=second_order)
    BACKENDS[backend](terrain, surface, isotropic(), duration_s=TIME, steps=steps, second_order=second_order)
    return surface.height_nm


def places(points):
    return (np.arange(points) + 0.5) / points


def along_x(backend, points, second_order):
    """Error (n,) of a wave along x."""
    x = places(points)
    return smooth(backend, points, second_order, wave(x)[None])[0] - exact(x)


def diagonal(backend, points, second_order):
    """Error (n, n) of a wave along the diagonal of a square cell: the same wave, sqrt(2) as steep a cell."""
    x = places(points)
    along = (x[None] + x[:, None]) / np.sqrt(2.0)
    length = 1.0 / np.sqrt(2.0)  # of the wave, so that it fits the cell

    def start(s):
        return length * wave(s / length)

    found = smooth(backend, points, second_order, start(along))
    return found - length * exact(along / length % 1.0, TIME / length)


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("second_order", "bound"), [(False, 1e-3), (True, 1e-4)])
def test_a_smooth_wave_recedes_along_its_normals(backend, second_order, bound):
    """The greatest error at 200 points a wave, in wavelengths."""
    assert np.abs(along_x(backend, 200, second_order)).max() <= bound


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("second_order", "bound"), [(False, 6e-3), (True, 1e-3)])
def test_a_wave_across_the_diagonal_of_a_cell_recedes_alike(backend, second_order, bound):
    """Both axes carry the slope here. 60 points across the cell are 42 a wave: bounds go with the grid step."""
    assert np.abs(diagonal(backend, 60, second_order)).max() <= bound


@pytest.mark.closed_form
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("second_order", "order"), [(False, 0.95), (True, 1.9)])
def test_order_of_convergence_where_all_is_smooth(backend, second_order, order):
    """The mean error over three halvings of the grid."""
    grids = np.array([50, 100, 200, 400])
    found = [np.abs(along_x(backend, n, second_order)).mean() for n in grids]
    assert -np.polyfit(np.log(grids), np.log(found), 1)[0] >= order


@pytest.mark.closed_form
@pytest.mark.parametrize(("second_order", "order"), [(False, 0.95), (True, 1.9)])
def test_order_of_convergence_on_a_diagonal(second_order, order):
    grids = np.array([40, 80, 160])
    found = [np.abs(diagonal("kernel", n, second_order)).mean() for n in grids]
    assert -np.polyfit(np.log(grids), np.log(found), 1)[0] >= order


@functools.cache
def arrival(points=400):
    """Arrival times (z, x) of a front that leaves the wave downwards at speed 1, by fast marching (scikit-fmm)."""
    x = places(points)
    depth = np.arange(points // 2) / points - 0.35
    slope = -2.0 * np.pi * HIGH * np.sin(2.0 * np.pi * x)
    distance = (wave(x)[None] - depth[:, None]) / np.sqrt(1.0 + slope**2)  # to the wave, right where it is near
    times = skfmm.travel_time(distance, np.ones_like(distance), dx=1.0 / points, periodic=(False, True), order=2)
    return depth[0], np.asarray(times)


@pytest.mark.independent
@pytest.mark.parametrize("backend", BACKENDS)
@pytest.mark.parametrize(("second_order", "bound"), [(False, 1.5e-3), (True, 1e-3)])
def test_a_smooth_wave_against_fast_marching(backend, second_order, bound):
    """Where the height field is at 0.1 s, fast marching on a grid twice as fine arrives at 0.1 s."""
    x = places(200)
    height = smooth(backend, 200, second_order, wave(x)[None])[0]
    lowest, times = arrival()
    found = map_coordinates(times, [(height - lowest) * 400, x * 400 - 0.5], order=1, mode="grid-wrap")
    assert np.abs(found - TIME).max() <= bound
