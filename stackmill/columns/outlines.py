"""Outlines of features on the plan, which repeats with the cell: what is inside, how far the walls are."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import NOTHING, SIDE_NM, TURN, Curves, circles, cut, joined, merged
from stackmill.documents.stack import Block, Line, Shape, Via
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Inside = Callable[[Array, Array], Mask]

_CORNER_POINTS = 64


@frozen
class Rectangle:
    """Edges x0, x1, y0, y1 (nm), infinite where it spans the cell."""

    x0: float
    x1: float
    y0: float
    y1: float

    def inside(self, x: Array, y: Array) -> Mask:
        """Whether points lie inside or on an edge."""
        return (x >= self.x0) & (x <= self.x1) & (y >= self.y0) & (y <= self.y1)

    def edges(self) -> Curves:
        """The edges that really are there."""
        upright = [[x, self.y0, self.y1] for x in (self.x0, self.x1) if np.isfinite(x)]
        level = [[y, self.x0, self.x1] for y in (self.y0, self.y1) if np.isfinite(y)]
        return Curves(np.array(upright).reshape(-1, 3), np.array(level).reshape(-1, 3), NOTHING.arcs)

    def box(self) -> tuple[float, float, float, float]:
        """The smallest rectangle around it: x0, x1, y0, y1."""
        return self.x0, self.x1, self.y0, self.y1

    def moved(self, dx: float, dy: float) -> Rectangle:
        """The same, elsewhere."""
        return Rectangle(self.x0 + dx, self.x1 + dx, self.y0 + dy, self.y1 + dy)


@frozen
class Disc:
    """Centre and radius (nm)."""

    x: float
    y: float
    radius: float

    def inside(self, x: Array, y: Array) -> Mask:
        """Whether points lie inside or on an edge."""
        return (x - self.x) ** 2 + (y - self.y) ** 2 <= self.radius**2

    def edges(self) -> Curves:
        """Its circle."""
        return Curves(NOTHING.upright, NOTHING.level, np.array([[self.x, self.y, self.radius, 0.0, TURN]]))

    def box(self) -> tuple[float, float, float, float]:
        """The smallest rectangle around it: x0, x1, y0, y1."""
        return self.x - self.radius, self.x + self.radius, self.y - self.radius, self.y + self.radius

    def moved(self, dx: float, dy: float) -> Disc:
        """The same, elsewhere."""
        return Disc(self.x + dx, self.y + dy, self.radius)


Primitive = Rectangle | Disc


def primitive(shape: Shape, cell: tuple[float, float]) -> Primitive:
    """A drawn shape as a plain figure; where it is as wide as the cell or wider it has no edges."""
    if isinstance(shape, Via):
        return Disc(shape.x, shape.y, shape.diameter / 2)
    if isinstance(shape, Line):
        across = (shape.centre - shape.width / 2, shape.centre + shape.width / 2)
        x, y = (across, (-np.inf, np.inf)) if shape.along == "y" else ((-np.inf, np.inf), across)
    else:
        assert isinstance(shape, Block)
        x, y = shape.x, shape.y
    return Rectangle(*_endless(x, cell[0]), *_endless(y, cell[1]))


def _endless(span: tuple[float, float], period: float) -> tuple[float, float]:
    return (-np.inf, np.inf) if span[1] - span[0] >= period - SIDE_NM else span


def overlap(one: Primitive, other: Primitive) -> bool:
    """Whether two figures share more than an edge or a point."""
    if isinstance(one, Disc):
        one, other = other, one
    if isinstance(one, Disc) and isinstance(other, Disc):
        return float(np.hypot(one.x - other.x, one.y - other.y)) < one.radius + other.radius - SIDE_NM
    x0, x1, y0, y1 = one.box()
    if isinstance(other, Disc):
        away = np.hypot(max(x0 - other.x, 0.0, other.x - x1), max(y0 - other.y, 0.0, other.y - y1))
        return float(away) < other.radius - SIDE_NM
    u0, u1, v0, v1 = other.box()
    return min(x1, u1) - max(x0, u0) > SIDE_NM and min(y1, v1) - max(y0, v0) > SIDE_NM


def copies(figure: Primitive, cell: tuple[float, float], reach_nm: float) -> list[Primitive]:
    """The figure in every neighbouring cell from where it comes within reach of this one."""
    x0, x1, y0, y1 = figure.box()
    return [
        figure.moved(i * cell[0], j * cell[1])
        for i in _shifts(x0, x1, cell[0], reach_nm)
        for j in _shifts(y0, y1, cell[1], reach_nm)
    ]


def _shifts(low: float, high: float, period: float, reach_nm: float) -> range:
    if not np.isfinite(low):
        return range(1)
    first = int(np.floor((-reach_nm - high) / period)) + 1
    last = int(np.ceil((period + reach_nm - low) / period)) - 1
    return range(first, last + 1)


@frozen
class Outline:
    """An area of the plan with its walls.

    inside: whether points (N,) of the cell lie in it; walls: its true edges, correct within reach_nm of the
    cell; outward (V + H + A,): +1 where the walls' own normal points out of the area, else -1.
    """

    inside: Inside
    walls: Curves
    outward: Array
    window: tuple[float, float, float, float]

    def depth(self, x: Array, y: Array) -> Array:
        """Distance to the nearest wall from points (N,), counted inside the area; 0 outside it."""
        return np.where(self.inside(x, y), self.walls.distance(x, y), 0.0)

    def distance(self, x: Array, y: Array) -> Array:
        """Distance to the area from points (N,); 0 within it."""
        return np.where(self.inside(x, y), 0.0, self.walls.distance(x, y))

    def offset(self, distance_nm: float) -> Curves:
        """Curves that hold all points at a distance from the walls: outside, or inside where it is negative.

        They may be longer than that.
        """
        v, h = len(self.walls.upright), len(self.walls.upright) + len(self.walls.level)
        step = self.outward * distance_nm
        upright, level, arcs = self.walls.upright.copy(), self.walls.level.copy(), self.walls.arcs.copy()
        upright[:, 0] += step[:v]
        level[:, 0] += step[v:h]
        arcs[:, 2] += step[h:]
        corners = circles(self._corners(distance_nm < 0.0), abs(distance_nm))
        return joined([Curves(upright, level, arcs[arcs[:, 2] > 0.0]), corners])

    def _corners(self, reflex: bool) -> Array:
        ends = self.walls.ends()
        x0, x1, y0, y1 = self.window
        within = (ends[:, 0] > x0) & (ends[:, 0] < x1) & (ends[:, 1] > y0) & (ends[:, 1] < y1)
        ends = np.unique(np.round(ends[within], 6), return_index=True, axis=0)[0]
        angle = TURN * (np.arange(_CORNER_POINTS) + 0.5) / _CORNER_POINTS
        around = ends[:, :, None] + 10 * SIDE_NM * np.stack([np.cos(angle), np.sin(angle)])
        full = self.inside(around[:, 0], around[:, 1]).sum(axis=1) - _CORNER_POINTS // 2
        corners: Array = ends[full >= -1 if reflex else full <= 1]
        return corners


def outline(edges: Sequence[Curves], inside: Inside, cell: tuple[float, float], reach_nm: float) -> Outline:
    """The area where `inside` holds; its walls are those parts of the edges that have it on one side only."""
    window = (-reach_nm, cell[0] + reach_nm, -reach_nm, cell[1] + reach_nm)
    pieces = cut(joined(list(edges)), window)
    x, y, nx, ny = pieces.at()
    minus = inside(x - SIDE_NM * nx, y - SIDE_NM * ny)
    plus = inside(x + SIDE_NM * nx, y + SIDE_NM * ny)
    wall = minus != plus
    walls, outward = merged(pieces.chosen(wall), np.where(minus[wall], 1.0, -1.0))
    return Outline(inside, walls, outward, window)


def union(figures: Sequence[Primitive], cell: tuple[float, float], reach_nm: float) -> Outline:
    """The area that figures cover together, repeated with the cell; inner walls are gone."""
    reach = reach_nm + 10 * SIDE_NM
    near = tuple(copy for figure in figures for copy in copies(figure, cell, reach))
    return outline([copy.edges() for copy in near], Union(near), cell, reach)


@frozen
class Union:
    """Whether points lie in any of several figures."""

    figures: tuple[Primitive, ...]

    def __call__(self, x: Array, y: Array) -> Mask:
        """Any shape of points in, the same out."""
        found = np.zeros(np.broadcast(x, y).shape, dtype=bool)
        for figure in self.figures:
            found |= figure.inside(x, y)
        return found


@frozen
class Overlap:
    """Whether points lie in all of several areas."""

    areas: tuple[Inside, ...]

    def __call__(self, x: Array, y: Array) -> Mask:
        """Any shape of points in, the same out."""
        found = np.ones(np.broadcast(x, y).shape, dtype=bool)
        for area in self.areas:
            found &= area(x, y)
        return found
