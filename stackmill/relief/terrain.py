"""The ground a surface moves over: what lies under every grid point of a section or a cell, and the surface on it.

A section is a cell one point deep: all that is said of points here has the shape (ny, nx), and a section (1, n)
runs along its second axis. Both wrap: the cell repeats.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]
Index = NDArray[np.intp]


@frozen
class Terrain:
    """What lies under each point of a grid.

    step_nm: distances (y, x) between points; column (ny, nx): what lies there, an index into the rest;
    top_nm (C,): where each column starts; material, floor_nm (C, S): its segments from the top down, material -1
    and floor -inf below the last; count (C,): how many there are.
    """

    step_nm: tuple[float, float]
    column: Index
    top_nm: Array
    material: Index
    floor_nm: Array
    count: Index

    @property
    def is_section(self) -> bool:
        """Whether this is a section: one point deep."""
        return self.column.shape[0] == 1

    @property
    def materials(self) -> frozenset[int]:
        """Every material that lies under some point."""
        return frozenset(self.material[np.unique(self.column)].ravel().tolist()) - {-1}


@dataclass
class Surface:
    """A surface on its way down over a terrain.

    height_nm, segment (ny, nx): how high it is and which segment of its column it is in; passed_s (C-free: ny, nx,
    S): when each segment's floor was met, inf until then; clock_s; steps: how many time steps there have been.
    """

    height_nm: Array
    segment: Index
    passed_s: Array
    clock_s: float = 0.0
    steps: int = 0

    def copy(self) -> Surface:
        """An independent copy."""
        return Surface(
            self.height_nm.copy(), self.segment.copy(), self.passed_s.copy(), self.clock_s, self.steps
        )


def untouched(terrain: Terrain) -> Surface:
    """The surface before anything is done to it."""
    segments = terrain.floor_nm.shape[1]
    return Surface(
        terrain.top_nm[terrain.column].astype(np.float64),
        np.zeros(terrain.column.shape, dtype=np.intp),
        np.full((*terrain.column.shape, segments), np.inf),
    )


def skip_empty(terrain: Terrain, surface: Surface) -> None:
    """Move on past segments of no thickness, and past those a strip has taken."""
    points = np.arange(surface.segment.size)
    column, segment = terrain.column.ravel(), surface.segment.ravel()
    height, passed = surface.height_nm.ravel(), surface.passed_s.reshape(segment.size, -1)
    while True:
        inside = segment < terrain.count[column]
        floor = terrain.floor_nm[column, np.minimum(segment, terrain.floor_nm.shape[1] - 1)]
        through = points[inside & (height <= floor)]
        if not len(through):
            return
        passed[through, segment[through]] = surface.clock_s
        segment[through] += 1
