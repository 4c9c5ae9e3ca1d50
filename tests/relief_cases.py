"""What the tests of the moving surface share: four materials, grounds made by hand, and runs on either backend.

The materials are model materials, in units where flat SiO2 at normal incidence falls 1 in 1 s: the yield over that
at normal incidence is cos^-f(th) exp(-S (1/cos th - 1)) with S = f cos(th_opt), after Yamamura, Itikawa & Itoh,
IPPJ-AM-26 (1983), from memory. Their constants are made up, of the size of real ones, so that a change in the
library moves nothing here.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq, minimize_scalar

from stackmill.rates.facets import Shape
from stackmill.relief import kernel, reference
from stackmill.relief.slope_speed import INTERVALS, ROTATING, SWINGING, Light, SlopeTable, slope_table
from stackmill.relief.terrain import Surface, Terrain, untouched

Array = NDArray[np.float64]

BACKENDS = {"reference": reference.mill, "kernel": kernel.mill}
OX, W, AL, NITRIDE = 0, 1, 2, 3
FLAT = np.array([1.0, 0.9, 1.8, 0.6])


class Yield:
    """cos^-f exp(-S (1/cos - 1)) with its maximum at `best_deg`."""

    def __init__(self, f: float, best_deg: float) -> None:
        self.f, self.s = f, f * np.cos(np.radians(best_deg))

    def ratio(self, incidence_rad: Array) -> Array:
        c = np.maximum(np.cos(incidence_rad), 1e-9)
        return np.exp(-self.f * np.log(c) - self.s * (1.0 / c - 1.0))


class Isotropic:
    """A yield over cos(th): the surface recedes along its normal at one speed, whatever its slope."""

    def ratio(self, incidence_rad: Array) -> Array:
        return 1.0 / np.cos(incidence_rad)


SHAPES = (Yield(2.3, 66.0), Yield(1.5, 62.0), Yield(2.0, 68.0), Yield(2.0, 65.0))
"""SiO2, W, Al, Si3N4, in the order of OX, W, AL, NITRIDE."""


def rotating(tilt_deg: float) -> Light:
    return Light(ROTATING, np.radians(tilt_deg), np.radians(tilt_deg))


def swinging(low_deg: float, high_deg: float) -> Light:
    return Light(SWINGING, np.radians(low_deg), np.radians(high_deg))


def table_of(light: Light, shapes: Sequence[Shape] = SHAPES, flat: Array = FLAT) -> SlopeTable:
    """A table whose flat ground falls at Y(tilt) cos(tilt) times `flat` at the mean tilt of the light."""
    return _table(light, tuple(shapes), tuple(flat.tolist()))


@functools.cache
def _table(light: Light, shapes: tuple[Shape, ...], flat: tuple[float, ...]) -> SlopeTable:
    tilt = 0.5 * (light.low_rad + light.high_rad)
    falls = [v * float(shape.ratio(np.array(tilt))) * np.cos(tilt) for v, shape in zip(flat, shapes, strict=True)]
    return slope_table(light, shapes, np.array(falls))


def flat_speed(table: SlopeTable, material: int) -> float:
    return float(table.speed[material, INTERVALS])


def speed_of(table: SlopeTable, material: int) -> Callable[[float], float]:
    """H(p) of one material, for a root finder."""
    return lambda slope: float(table.speed_at(material, np.array([slope]))[0])


def ground(column: NDArray[np.intp], step: float | tuple[float, float], stacks: Sequence, tops: Sequence = ()):
    """A terrain: which stack lies under each point, the stacks from the top down as (material, thickness) each."""
    steps = step if isinstance(step, tuple) else (step, step)
    most = max(len(stack) for stack in stacks)
    top = np.array(tops or [0.0] * len(stacks), dtype=np.float64)
    material = np.full((len(stacks), most), -1, dtype=np.intp)
    floor = np.full((len(stacks), most), -np.inf)
    for c, stack in enumerate(stacks):
        material[c, : len(stack)] = [m for m, _ in stack]
        floor[c, : len(stack)] = top[c] - np.cumsum([thickness for _, thickness in stack])
    count = np.array([len(stack) for stack in stacks], dtype=np.intp)
    plan = np.ascontiguousarray(np.atleast_2d(column), dtype=np.intp)
    return Terrain(steps, plan, top, material, floor, count)


def line_plan(points: int, inside: int, rows: int = 1) -> NDArray[np.intp]:
    """1 in the `inside` middle points of each row and 0 beside them: the edges lie on faces between points."""
    before = (points - inside) // 2
    row = np.zeros(points, dtype=np.intp)
    row[before : before + inside] = 1
    return np.repeat(row[None], rows, axis=0)


def disc_plan(points: int, radius: float) -> NDArray[np.intp]:
    """1 within `radius` grid steps of the middle of a square."""
    off = np.arange(points) + 0.5 - 0.5 * points
    return (np.hypot(off[None], off[:, None]) < radius).astype(np.intp)


def line_in(fill: int, bar: int, points: int, inside: int, step: float, deep: float = 100.0, rows: int = 1) -> Terrain:
    """A line of one material, upright and deep, in a level field of another."""
    return ground(line_plan(points, inside, rows), step, [[(fill, deep)], [(bar, deep)]])


def step_count(terrain: Terrain, table: SlopeTable, duration: float, *, second_order: bool = False) -> int:
    """As many time steps as a stable run needs: see docs/physics/relief.md."""
    lateral = 1 if terrain.is_section else 2
    courant = 0.5 if second_order else 0.9
    step = terrain.step_nm[1] if terrain.is_section else min(terrain.step_nm)
    return max(1, int(np.ceil(duration * table.fastest_nm_per_s * lateral / (courant * step))))


def milled(
    backend: str,
    terrain: Terrain,
    table: SlopeTable,
    duration: float,
    *,
    steps: int = 0,
    second_order: bool = False,
    shadow: bool = True,
) -> Surface:
    """The surface after a time, in as many steps as it takes unless told."""
    surface = untouched(terrain)
    steps = steps or step_count(terrain, table, duration, second_order=second_order)
    BACKENDS[backend](
        terrain, surface, table, duration_s=duration, steps=steps, second_order=second_order, shadow=shadow
    )
    return surface


def off(one: Surface, other: Surface) -> float:
    """The greatest difference of two surfaces' heights."""
    return float(np.abs(one.height_nm - other.height_nm).max())


def passed_off(one: Surface, other: Surface) -> float:
    """The greatest difference of two surfaces' times, inf where only one has met a floor."""
    here, there = one.passed_s, other.passed_s
    met = np.isfinite(here)
    if (met != np.isfinite(there)).any():
        return np.inf
    return float(np.abs(here[met] - there[met]).max(initial=0.0))


# --- exact solutions ------------------------------------------------------------------------------------------


def peak(speed: Callable[[float], float], steepest: float = 50.0) -> float:
    """The slope (above 0) at which a speed is greatest."""
    tried = np.linspace(0.0, steepest, 2001)
    best = int(np.argmax([speed(p) for p in tried]))
    low, high = tried[max(best - 1, 0)], tried[min(best + 1, 2000)]
    found = minimize_scalar(lambda p: -speed(p), bounds=(low, high), method="bounded", options={"xatol": 1e-10})
    return float(found.x)


def corner(table: SlopeTable, material: int, away: Array, time: float, steepest: float = np.inf) -> Array:
    """Height over the old top (n,) at distances inside the upper edge of an upright wall, after a time.

    Hopf's formula for concave ground (Bardi & Evans, Nonlinear Anal. 8, 1373 (1984), from memory): the least of
    p x - t H(p) over the slopes the edge holds, which is the upper concave envelope of H. `steepest`: of those.
    """
    slopes = _slopes(steepest)
    speed = table.speed_at(material, slopes)
    return np.array([np.min(slopes * x - time * speed) for x in away])


def foot(table: SlopeTable, material: int, away: Array, time: float) -> Array:
    """Height over the old floor (n,) at distances outside the foot of an upright wall: the lower convex hull of H."""
    slopes = _slopes(np.inf)
    speed = table.speed_at(material, slopes)
    return np.array([np.max(-slopes * x - time * speed) for x in away])


def _slopes(steepest: float) -> Array:
    q = np.linspace(0.0, 1.0, 100_001)[:-1]
    slopes = q / (1.0 - q)
    return np.append(slopes[slopes < steepest], steepest) if np.isfinite(steepest) else slopes


def envelope_slope(speed: Callable[[float], float], low: float, high: float) -> float:
    """The slope between two at which the chord from level ground touches H: H'(p) p = H(p) - H(0)."""

    def misses(p: float) -> float:
        h = 1e-3 * p
        return p * (speed(p + h) - speed(p - h)) / (2.0 * h) - (speed(p) - speed(0.0))

    return float(brentq(misses, low, high, xtol=1e-12))
