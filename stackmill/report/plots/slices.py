"""What a line across the cell cuts through: pieces of material with their outlines, before and under the beam."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import RegionColumns
from stackmill.frozen import frozen
from stackmill.relief.gridding import Cut, columns_along, edges_along
from stackmill.relief.terrain import Terrain

Array = NDArray[np.float64]
Key = tuple[int, int, int, int]

_SLOPE_POINTS = 24
_FLAT_NM = 1e-3
_NOTHING_NM = 1e-6
_GAP_NM = 0.01


@frozen
class Slice:
    """A stretch of the line over one column of the region.

    s_nm (P,): along the line; levels_nm (P, K + 1): top of its uppermost segment, then every floor; keys (K): material,
    layer, feature, part of each segment; column: the region's.
    """

    s_nm: Array
    levels_nm: Array
    keys: tuple[Key, ...]
    column: int


@frozen
class Piece:
    """A connected piece of one material, layer, feature and part: s_nm, top_nm, floor_nm (N,), steps included."""

    material: int
    layer: int
    feature: int
    part: int
    s_nm: Array
    top_nm: Array
    floor_nm: Array

    @property
    def area_nm2(self) -> float:
        """Its area in the section."""
        thick = self.top_nm - self.floor_nm
        return float(np.sum(0.5 * (thick[1:] + thick[:-1]) * np.diff(self.s_nm)))

    @property
    def outline_nm(self) -> Array:
        """Its corners (2 N, 2): s and height, around it once."""
        top = np.column_stack([self.s_nm, self.top_nm])
        return np.concatenate([top, np.column_stack([self.s_nm, self.floor_nm])[::-1]])

    @property
    def width_nm(self) -> float:
        """How far it stretches along the line."""
        return float(self.s_nm[-1] - self.s_nm[0])

    @property
    def middle_nm(self) -> tuple[float, float]:
        """A point inside, where there is most room: the middle of its thickest stretch."""
        thick = self.top_nm - self.floor_nm
        fat = np.flatnonzero(thick > 0.6 * thick.max())
        first = int(fat[0])
        runs = np.split(fat, np.flatnonzero(np.diff(fat) > 1) + 1)
        run = max(runs, key=lambda one: float(self.s_nm[one[-1]] - self.s_nm[one[0]]), default=np.array([first]))
        s = 0.5 * float(self.s_nm[run[0]] + self.s_nm[run[-1]])
        return s, 0.5 * float(np.median(self.top_nm[run]) + np.median(self.floor_nm[run]))


def busiest_cut(region: RegionColumns, cell: tuple[float, float], wanted: Iterable[int] = ()) -> Cut:
    """The line through a column's centre that meets a wanted column, the most features, then the most columns."""
    goal = set(wanted)
    lines = [cut for x, y in region.centre_nm.tolist() for cut in (Cut("y", y), Cut("x", x))]

    def worth(cut: Cut) -> tuple[int, int, int, int]:
        met = columns_along(region, cell, cut)
        features = set(region.feature[sorted(met)].ravel().tolist())
        return int(bool(met & goal)), len(features), len(met), -lines.index(cut)

    return max(lines, key=worth)


def region_slices(region: RegionColumns, cell: tuple[float, float], cut: Cut) -> list[Slice]:
    """What a line cuts through before anything is done, from its start to its end."""
    length = cell[0] if cut.along == "x" else cell[1]
    edges = edges_along(region, cell, cut)
    bounds = np.unique(np.concatenate([[0.0], edges[(edges > 0.0) & (edges < length)], [length]]))
    return [_slice(region, cut, float(a), float(b)) for a, b in pairwise(bounds) if b - a > 1e-3]


def _slice(region: RegionColumns, cut: Cut, start: float, end: float) -> Slice:
    middle = np.array([0.5 * (start + end)])
    column = int(_at(region, cut, middle)[0])
    count = int(region.segments[column])
    s = np.linspace(start, end, _SLOPE_POINTS)
    inside = np.clip(s, start + 1e-3 * (end - start), end - 1e-3 * (end - start))
    fixed = np.full_like(inside, cut.at_nm)
    x, y = (inside, fixed) if cut.along == "x" else (fixed, inside)
    off = region.above_mean_nm(x, y, np.full(len(s), column, dtype=np.intp))[:, : count + 1]
    if np.abs(off).max(initial=0.0) < _FLAT_NM:
        s, off = s[[0, -1]], np.zeros((2, count + 1))
    own = np.concatenate([[region.top_nm[column]], region.floor_nm[column, :count]])
    levels = np.minimum.accumulate(own + off, axis=1)
    tables = (region.material, region.layer, region.feature, region.part)
    keys = [tuple(int(table[column, k]) for table in tables) for k in range(count)]
    return Slice(s, levels, tuple(keys), column)  # type: ignore[arg-type]  # four tables, four numbers


def _at(region: RegionColumns, cut: Cut, s: Array) -> NDArray[np.intp]:
    fixed = np.full_like(s, cut.at_nm)
    return region.plan(s, fixed) if cut.along == "x" else region.plan(fixed, s)


def terrain_slices(region: RegionColumns, terrain: Terrain, *, row: int | None = None, column: int = 0) -> list[Slice]:
    """The same of a terrain: along its second axis in a row of it, or (row None) along its first in a column."""
    line = terrain.column[row] if row is not None else terrain.column[:, column]
    step = terrain.step_nm[1] if row is not None else terrain.step_nm[0]
    region_column = terrain.region_column[line]
    starts = np.concatenate([[0], np.flatnonzero(np.diff(region_column)) + 1, [len(line)]])
    found = []
    for a, b in pairwise(starts.tolist()):
        first = int(line[a])
        c, owner = int(terrain.region_column[first]), terrain.owner[first, : terrain.count[first]]
        last = np.flatnonzero(np.append(np.diff(owner) != 0, True))
        floors = terrain.floor_nm[line[a:b]][:, last]
        levels = np.column_stack([terrain.top_nm[line[a:b]], floors])
        levels = np.concatenate([levels[:1], levels, levels[-1:]])
        s = np.concatenate([[a], np.arange(a, b) + 0.5, [b]]) * step
        tables = (region.material, region.layer, region.feature, region.part)
        keys = [tuple(int(table[c, owner[k]]) for table in tables) for k in last]
        found.append(Slice(s, levels, tuple(keys), c))  # type: ignore[arg-type]  # likewise
    return found


def surface_at(s_nm: Array, height_nm: Array, step_nm: float) -> Array:
    """The height of a surface given at the middles of steps, at points along the line; it repeats."""
    at = (np.arange(len(height_nm)) + 0.5) * step_nm
    return np.interp(s_nm, at, height_nm, period=len(height_nm) * step_nm)


def pieces(
    slices: Sequence[Slice], *, bottom_nm: float = -np.inf, surface: tuple[Array, float] | None = None
) -> list[Piece]:
    """The pieces of material along a line, neighbours of the same kind joined.

    bottom_nm: nothing below counts; surface: heights (n,) and their step: nothing above counts.
    """
    open_: dict[tuple[Key, int], list[tuple[Array, Array, Array]]] = {}
    done: list[Piece] = []
    for one in slices:
        roof = np.inf if surface is None else surface_at(one.s_nm, *surface)
        here: dict[tuple[Key, int], tuple[Array, Array, Array]] = {}
        for k, top, floor in _segments(one, roof, bottom_nm):
            key = one.keys[k]
            number = sum(known[0] == key for known in here)
            here[key, number] = (one.s_nm, top, floor)
        for name in [name for name in open_ if name not in here or not _touch(open_[name][-1], here[name])]:
            done.append(_piece(name[0], open_.pop(name)))
        for name, part in here.items():
            open_.setdefault(name, []).append(part)
    return done + [_piece(name[0], parts) for name, parts in open_.items()]


def _segments(one: Slice, roof: Array | float, bottom_nm: float) -> Iterator[tuple[int, Array, Array]]:
    for k in range(len(one.keys)):
        top = np.maximum(np.minimum(one.levels_nm[:, k], roof), bottom_nm)
        floor = np.maximum(np.minimum(one.levels_nm[:, k + 1], roof), bottom_nm)
        if (top - floor).max() > _NOTHING_NM:
            yield k, top, floor


def _touch(one: tuple[Array, Array, Array], other: tuple[Array, Array, Array]) -> bool:
    """Whether one stretch ends where the next starts, and shares some height with it there."""
    return abs(one[0][-1] - other[0][0]) < _GAP_NM and bool(
        min(one[1][-1], other[1][0]) > max(one[2][-1], other[2][0]) + _NOTHING_NM
    )


def _piece(key: Key, parts: Sequence[tuple[Array, Array, Array]]) -> Piece:
    s, top, floor = (np.concatenate(rows) for rows in zip(*parts, strict=True))
    keep = _bends(s, top) | _bends(s, floor)
    return Piece(*key, s[keep], top[keep], floor[keep])


def _bends(s: Array, height: Array) -> NDArray[np.bool_]:
    """Where a line is not straight: its ends, its kinks, its steps."""
    keep = np.ones(len(s), dtype=bool)
    left, right = np.diff(s)[:-1], np.diff(s)[1:]
    rise = np.diff(height)
    keep[1:-1] = (left <= 0.0) | (right <= 0.0) | (np.abs(rise[:-1] * right - rise[1:] * left) > 1e-6 * (left + right))
    return keep
