"""Where a slower wall stands above a faster one: what the beam would hollow out, and a height field cannot show."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.relief.reference import horizon
from stackmill.relief.slope_speed import BINS, SlopeTable
from stackmill.relief.terrain import Surface, Terrain

Array = NDArray[np.float64]
Index = NDArray[np.intp]

_WALL_SLOPE = 3.0  # a step steeper than this (72 degrees) between two points is a wall
_LEAST_NM = 1.0


@frozen
class Undercut:
    """A wall of a faster material walking in under a slower one.

    upper, lower: materials; depth_nm: the difference of the two walls' ways, summed over the time both stood there
    in the light; x, y: the point (as indices) of the wall's upper side where it is deepest.
    """

    upper: int
    lower: int
    depth_nm: float
    x: int
    y: int


@dataclass
class Undercutting:
    """Sums, for each pair of materials and each point, what the wall beside it loses more below than above."""

    depth_nm: dict[tuple[int, int], Array] = field(default_factory=dict)

    def look(self, terrain: Terrain, surface: Surface, table: SlopeTable, span_s: float) -> None:
        """Take in the walls of this moment, as if they had stood for span_s."""
        if not table.wall_nm_per_s.any():
            return
        for axis in (1,) if terrain.is_section else (0, 1):
            for side in (1, -1):
                self._walls(terrain, surface, table, span_s, axis, side)

    def _walls(
        self, terrain: Terrain, surface: Surface, table: SlopeTable, span_s: float, axis: int, side: int
    ) -> None:
        """Walls that face greater (side 1) or smaller (-1) x or y: their foot is at the next point that way."""
        height = surface.height_nm
        foot = np.roll(height, -side, axis=axis)
        steep = np.flatnonzero(((height - foot) > _WALL_SLOPE * terrain.step_nm[axis]).ravel())
        if not len(steep):
            return
        pace = table.wall_nm_per_s[:, 1 if side > 0 else 0]  # a wall that falls towards greater x has slope -inf
        lit = _lit_share(terrain, surface, table, axis, side).ravel()[steep]
        column, low, high = terrain.column.ravel()[steep], foot.ravel()[steep], height.ravel()[steep]
        top = terrain.top_nm[column]
        slowest = np.full(len(steep), np.inf)
        above = np.full(len(steep), -1)
        for s in range(terrain.floor_nm.shape[1]):
            floor, material = terrain.floor_nm[column, s], terrain.material[column, s]
            inside = (material >= 0) & (floor < high) & (top > low) & (top > floor)
            own = np.where(inside, pace[material], np.inf)
            faster = inside & (own > slowest)
            depth = (own[faster] - slowest[faster]) * lit[faster] * span_s
            self._add(terrain, steep[faster], above[faster], material[faster], depth)
            slower = inside & (own < slowest)
            slowest, above, top = np.where(slower, own, slowest), np.where(slower, material, above), floor

    def _add(self, terrain: Terrain, points: Index, upper: Index, lower: Index, depth: Array) -> None:
        for pair in set(zip(upper.tolist(), lower.tolist(), strict=True)):
            if pair not in self.depth_nm:
                self.depth_nm[pair] = np.zeros(terrain.column.size)
            own = (upper == pair[0]) & (lower == pair[1])
            self.depth_nm[pair][points[own]] += depth[own]

    def deepest(self, terrain: Terrain) -> tuple[Undercut, ...]:
        """The deepest place of each pair of materials, deepest pair first."""
        found = []
        for (upper, lower), depth in self.depth_nm.items():
            at = int(np.argmax(depth))
            if depth[at] >= _LEAST_NM:
                y, x = np.unravel_index(at, terrain.column.shape)
                found.append(Undercut(upper, lower, float(depth[at]), int(x), int(y)))
        return tuple(sorted(found, key=lambda u: -u.depth_nm))


def _lit_share(terrain: Terrain, surface: Surface, table: SlopeTable, axis: int, side: int) -> Array:
    """The share (ny, nx) of the light onto a wall at each point that nothing across from it hides.

    In a cell all of it: there, depths are at most what is said.
    """
    if not terrain.is_section or axis == 0:
        return np.ones(terrain.column.shape)
    height = surface.height_nm[0]
    foot = np.roll(height, -side)
    seen = horizon(foot if side > 0 else foot[::-1], terrain.step_nm[1])
    hidden = table.light.hidden_bins(seen if side > 0 else seen[::-1], side) / BINS
    return np.asarray(1.0 - hidden)[None]
