"""The ground a surface moves over: what lies under every grid point of a section or a cell, and the surface on it.

A section is a cell one point deep: all that is said of points here has the shape (ny, nx), and a section (1, n)
runs along its second axis. Both wrap: the cell repeats.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]
Index = NDArray[np.intp]


@frozen
class Terrain:
    """What lies under each point of a grid.

    step_nm: distances (y, x) between points; column (ny, nx): what lies there, an index into the rest; top_nm (C,):
    where each column starts; material, floor_nm (C, S): its segments from the top down, material -1 and floor -inf
    below the last; count (C,): how many there are; region_column (C,): the region's column each is; owner (C, S): the
    segment of that column each one is a piece of.
    """

    step_nm: tuple[float, float]
    column: Index
    top_nm: Array
    material: Index
    floor_nm: Array
    count: Index
    region_column: Index = field(default_factory=lambda: np.zeros(0, dtype=np.intp))
    owner: Index = field(default_factory=lambda: np.zeros((0, 0), dtype=np.intp))

    @property
    def is_section(self) -> bool:
        """Whether this is a section: one point deep."""
        return bool(self.column.shape[0] == 1)

    @property
    def materials(self) -> frozenset[int]:
        """Every material that lies under some point."""
        return frozenset(self.material[np.unique(self.column)].ravel().tolist()) - {-1}


@dataclass
class Surface:
    """A surface on its way down over a terrain.

    height_nm, segment (ny, nx): how high it is, and in which segment of its column; passed_s (ny, nx, S): when
    each segment's floor was met, inf until then; clock_s: beam-on time; steps: time steps taken so far.
    """

    height_nm: Array
    segment: Index
    passed_s: Array
    clock_s: float = 0.0
    steps: int = 0

    def copy(self) -> Surface:
        """An independent copy."""
        return Surface(self.height_nm.copy(), self.segment.copy(), self.passed_s.copy(), self.clock_s, self.steps)


def untouched(terrain: Terrain) -> Surface:
    """The surface before anything is done to it."""
    segments = terrain.floor_nm.shape[1]
    return Surface(
        np.ascontiguousarray(terrain.top_nm[terrain.column], dtype=np.float64),
        np.zeros(terrain.column.shape, dtype=np.intp),
        np.full((*terrain.column.shape, segments), np.inf),
    )


def passed_above(passed_s: Array, above: Index) -> Array:
    """When the last of the `above` (...) segments over a level was gone, from passed_s (..., S); 0 for none."""
    times = np.take_along_axis(passed_s, np.maximum(above - 1, 0)[..., None], axis=-1)[..., 0]
    return np.where(above > 0, times, 0.0)


def etch(terrain: Terrain, surface: Surface, rate_nm_per_s: Array, duration_s: float, *, counts: bool) -> None:
    """Lower a surface straight down for a time at rates (M,) that know no slope, in place."""
    for point in _points(terrain, surface):
        left = duration_s
        while point.inside:
            rate = float(rate_nm_per_s[point.material])
            need = point.left_nm / rate if rate > 0.0 else (0.0 if point.left_nm <= 0.0 else np.inf)
            if need > left:
                point.height -= rate * left
                break
            left -= need
            point.pass_floor(surface.clock_s + (duration_s - left if counts else 0.0))
        point.put_back(surface)
    surface.clock_s += duration_s if counts else 0.0


def strip(terrain: Terrain, surface: Surface, materials: frozenset[int]) -> None:
    """Take the leading segments of some materials off every point, in place and in no time."""
    for point in _points(terrain, surface):
        while point.inside and (point.material in materials or point.left_nm <= 0.0):
            point.pass_floor(surface.clock_s)
        point.put_back(surface)


@dataclass(slots=True)
class _Point:
    """One point of a surface on its way down its column."""

    number: int
    terrain: Terrain
    column: int
    height: float
    segment: int
    passed_s: Array

    @property
    def inside(self) -> bool:
        return self.segment < int(self.terrain.count[self.column])

    @property
    def material(self) -> int:
        return int(self.terrain.material[self.column, self.segment])

    @property
    def left_nm(self) -> float:
        return self.height - float(self.terrain.floor_nm[self.column, self.segment])

    def pass_floor(self, clock_s: float) -> None:
        self.height = min(self.height, float(self.terrain.floor_nm[self.column, self.segment]))
        self.passed_s[self.segment] = clock_s
        self.segment += 1

    def put_back(self, surface: Surface) -> None:
        surface.height_nm.flat[self.number] = self.height
        surface.segment.flat[self.number] = self.segment


def _points(terrain: Terrain, surface: Surface) -> Iterator[_Point]:
    passed = surface.passed_s.reshape(surface.height_nm.size, -1)
    column, height, segment = terrain.column.ravel(), surface.height_nm.ravel(), surface.segment.ravel()
    for i in range(len(passed)):
        yield _Point(i, terrain, int(column[i]), float(height[i]), int(segment[i]), passed[i])
