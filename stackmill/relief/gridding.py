"""From a region of the column map to the terrain of a section or a cell: where the points are, what lies under them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import RegionColumns
from stackmill.frozen import frozen
from stackmill.relief.terrain import Terrain
from stackmill.timing.tree import Column

Array = NDArray[np.float64]
Index = NDArray[np.intp]

CELLS_ACROSS = 10  # points across a feature under which its relief is not to be trusted
_SECTION_ACROSS, _SECTION_POINTS = 24, (200, 960)
_CELL_ACROSS, _CELL_POINTS = 10, (80, 256)
_SCANNED = 4096
_HALVINGS = 30
_ALIKE_NM = 1e-6


@frozen
class Cut:
    """A section's line in plan: x = at_nm (the section runs along y) or y = at_nm (it runs along x)."""

    fixed: Literal["x", "y"]
    at_nm: float

    @property
    def along(self) -> Literal["x", "y"]:
        """The axis the section runs along."""
        return "y" if self.fixed == "x" else "x"

    def __str__(self) -> str:
        return f"{self.fixed} = {self.at_nm / 1000.0:.4g} um"


@frozen
class Grid:
    """Points of a section or cell: x, y (ny, nx) in plan, and their distances (y, x); a section is one point deep."""

    x_nm: Array
    y_nm: Array
    step_nm: tuple[float, float]


def section_grid(region: RegionColumns, cell: tuple[float, float], cut: Cut, points: int | None = None) -> Grid:
    """Evenly spaced points along a line across the cell, whose edges between columns lie between points."""
    length = cell[0] if cut.along == "x" else cell[1]
    edges = edges_along(region, cell, cut)
    n = points or _fitting(edges, length, _wanted(edges, length, _SECTION_ACROSS, _SECTION_POINTS))
    s = np.asarray((np.arange(n) + 0.5) * (length / n), dtype=np.float64)
    fixed = np.full(n, cut.at_nm)
    x, y = (s, fixed) if cut.along == "x" else (fixed, s)
    return Grid(x[None], y[None], (length / n, length / n))


def cell_grid(region: RegionColumns, cell: tuple[float, float], points: int | None = None) -> Grid:
    """Nearly square steps over the whole cell; points: along x."""
    centres = region.centre_nm
    along_x = np.unique(np.concatenate([edges_along(region, cell, Cut("y", y)) for y in centres[:, 1]]))
    along_y = np.unique(np.concatenate([edges_along(region, cell, Cut("x", x)) for x in centres[:, 0]]))
    nx = points or _fitting(along_x, cell[0], _wanted(along_x, cell[0], _CELL_ACROSS, _CELL_POINTS))
    ny = max(4, round(cell[1] * nx / cell[0]))
    ny = ny if points else _fitting(along_y, cell[1], ny, 1.1)
    x = (np.arange(nx) + 0.5) * (cell[0] / nx)
    y = (np.arange(ny) + 0.5) * (cell[1] / ny)
    x_nm, y_nm = np.meshgrid(x, y)
    return Grid(x_nm, y_nm, (cell[1] / ny, cell[0] / nx))


def edges_along(region: RegionColumns, cell: tuple[float, float], cut: Cut) -> Array:
    """Where the column changes along a line across the cell (E,), in nm from its start."""
    length = cell[0] if cut.along == "x" else cell[1]

    def column(s: Array) -> Index:
        fixed = np.full_like(s, cut.at_nm)
        return region.plan(s, fixed) if cut.along == "x" else region.plan(fixed, s)

    s = np.asarray(
        (np.arange(_SCANNED + 1) + 0.377) * (length / _SCANNED), dtype=np.float64
    )  # off round numbers, where edges like to be
    found = column(s)
    at = np.flatnonzero(found[1:] != found[:-1])
    low, high = s[at], s[at + 1]
    for _ in range(_HALVINGS):
        middle = np.asarray(0.5 * (low + high))
        before = column(middle) == found[at]
        low, high = np.where(before, middle, low), np.where(before, high, middle)
    return np.unique(np.round(high % length, 4))


def columns_along(region: RegionColumns, cell: tuple[float, float], cut: Cut) -> set[int]:
    """The columns that a line across the cell meets."""
    grid = section_grid(region, cell, cut, _SCANNED)
    return set(region.plan(grid.x_nm, grid.y_nm).ravel().tolist())


def _wanted(edges: Array, length: float, across: int, limits: tuple[int, int]) -> int:
    """Points so that the narrowest stretch between edges has `across`, as far as the limits let it."""
    if len(edges) < 2:
        return limits[0]
    stretches = np.diff(np.append(edges, edges[0] + length))
    return int(np.clip(np.ceil(across * length / stretches.min()), *limits))


def _fitting(edges: Array, length: float, least: int, most: float = 1.25) -> int:
    """The number of points from `least` on that puts the edges best on faces between points."""
    counts = np.arange(least, int(most * least) + 2)
    if not len(edges):
        return least
    at = edges[:, None] * counts / length
    off = np.round(np.abs(at - np.round(at)).max(axis=0) / counts, 7)  # of the length: finer grids miss by less
    return int(counts[np.argmin(off)])


@frozen
class Layout:
    """Which of the C distinct columns lies under each point of a grid, in any draw.

    which (ny, nx): its number; region_column (C,): the region's column it is; off_nm (C, S + 1): how much higher its
    boundaries lie than that column's: on conformal slopes every point has its own heights.
    """

    step_nm: tuple[float, float]
    which: Index
    region_column: Index
    off_nm: Array


def layout(region: RegionColumns, grid: Grid) -> Layout:
    """What lies where on a grid."""
    x, y = grid.x_nm.ravel(), grid.y_nm.ravel()
    region_column = region.plan(x, y)
    off = np.round(region.above_mean_nm(x, y, region_column) / _ALIKE_NM).astype(np.int64)
    rows, which = np.unique(np.column_stack([region_column, off]), axis=0, return_inverse=True)
    return Layout(grid.step_nm, which.reshape(grid.x_nm.shape), rows[:, 0].astype(np.intp), rows[:, 1:] * _ALIKE_NM)


def terrain_of(region: RegionColumns, columns: Sequence[Column], boundary: Sequence[Index], laid: Layout) -> Terrain:
    """What lies under the points of a grid in one draw.

    columns: the region's, cut at the levels asked for (D = 1); boundary: where the boundaries of the column map's
    segments lie among those cuts (timing.plan.Ground).
    """
    rows, region_column = laid.off_nm, laid.region_column
    most = max(len(columns[c].material) for c in region_column.tolist())
    material = np.full((len(rows), most), -1, dtype=np.intp)
    floor = np.full((len(rows), most), -np.inf)
    owner = np.full((len(rows), most), -1, dtype=np.intp)
    top, count = np.zeros(len(rows)), np.zeros(len(rows), dtype=np.intp)
    for k, (c, off) in enumerate(zip(region_column.tolist(), rows, strict=True)):
        levels = _levels(region, columns[c], boundary[c], c, off)
        count[k] = len(levels) - 1
        material[k, : count[k]] = columns[c].material
        top[k], floor[k, : count[k]] = levels[0], levels[1:]
        owner[k, : count[k]] = np.searchsorted(boundary[c], np.arange(count[k]), side="right") - 1
    return Terrain(
        step_nm=laid.step_nm,
        column=laid.which,
        top_nm=top,
        material=material,
        floor_nm=floor,
        count=count,
        region_column=region_column,
        owner=owner,
    )


def _levels(region: RegionColumns, column: Column, boundary: Index, c: int, off_nm: Array) -> Array:
    """The heights of a column's boundaries (K + 1,), from the top down, none above the one before."""
    thickness = np.array([float(row[0]) for row in column.thickness_nm])
    count = int(region.segments[c])
    bottom = float(region.floor_nm[c, count - 1])
    levels = bottom + np.append(np.cumsum(thickness[::-1])[::-1], 0.0)
    if off_nm.any():
        own = levels[boundary][::-1]
        levels = levels + np.interp(levels, own, off_nm[: count + 1][::-1])
    return np.minimum.accumulate(levels)
