"""How far columns are from each other in plan: each one's centre, and from there to all others.

Distances are exact to rounding but where slopes from several heights meet: there borders are known by points, and
distances to about a hundredth of the cell.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import SIDE_NM, Curves, chopped, periodic_distances
from stackmill.columns.plan import RegionPlan
from stackmill.columns.scan import Spans
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Mask = NDArray[np.bool_]

_STARTS = 5  # places of each kind in a column from which its centre is looked for
_ROUNDS = 12
_PIECES = 100  # pieces along the cell, where borders may end at places that are not known exactly
_AT_ONCE = 1_000_000  # distances held in memory together
_POINTS = np.pi / 4 * np.arange(8)
_COMPASS = np.stack([np.cos(_POINTS), np.sin(_POINTS)], axis=1)
_FAR_LINE = np.array([0.0, 1e12, -1e12])  # from everywhere: less than nothing of a line is far away
_FAR_ARC = np.array([0.0, 0.0, 1e12, 0.0, 1.0])


@frozen
class Neighbourhood:
    """See RegionColumns: centre_nm (C, 2), edge_distance_nm (C, C)."""

    centre_nm: Array
    edge_distance_nm: Array


@frozen
class _Starts:
    """Points x, y (N,) that lie in a column (N,), sorted by column."""

    x: Array
    y: Array
    column: Index


def neighbourhood(plan: RegionPlan, pieces: Curves, spans: Spans, of_span: Index, columns: int) -> Neighbourhood:
    """Find each column's centre and its distances.

    pieces: the borders in the cell; spans (N,): scanlines cut at all borders; of_span (N,): their columns.
    """
    if columns == 1:
        middle = np.array([[plan.cell[0] / 2, plan.cell[1] / 2]])
        return Neighbourhood(middle, np.full((1, 1), np.inf))
    if plan.competing:
        pieces = chopped(pieces, max(plan.cell) / _PIECES)
    sides = _sides(pieces, plan)
    real = sides[:, 0] != sides[:, 1]
    borders, sides = pieces.chosen(real), sides[real]
    if plan.competing:
        borders, sides = _with_meetings(borders, sides, spans, of_span, plan.cell)
    touching = np.zeros((columns, len(sides)), dtype=bool)
    touching[sides.T, np.arange(len(sides))] = True
    centres = _centres(_padded(borders, touching), _starts(plan, borders, spans, of_span), plan)
    return Neighbourhood(centres, _distances(centres, borders, touching, plan.cell))


def _sides(pieces: Curves, plan: RegionPlan) -> Index:
    """The columns (P, 2) at both sides of each piece."""
    x, y, nx, ny = pieces.at()
    step = SIDE_NM * np.array([[-1.0], [1.0]])
    return plan.column(x + step * nx, y + step * ny).T


def _with_meetings(
    borders: Curves, sides: Index, spans: Spans, of_span: Index, cell: tuple[float, float]
) -> tuple[Curves, Index]:
    """Add the points where scanlines cross borders that are neither straight nor round."""
    order = np.lexsort((spans.x0, spans.y))
    left, right = order[:-1], order[1:]
    between = (spans.y[left] == spans.y[right]) & (of_span[left] != of_span[right])
    left, right = left[between], right[between]
    x, y = spans.x1[left], spans.y[left]
    added = np.column_stack([of_span[left], of_span[right]])
    on_border = np.concatenate(
        [
            periodic_distances(borders, x[part], y[part], cell).min(axis=-1, initial=np.inf) <= SIDE_NM
            for part in np.array_split(np.arange(len(x)), 1 + len(x) * len(borders) // _AT_ONCE)
        ]
    )
    points, added = np.column_stack([x, y, y])[~on_border], added[~on_border]
    count = len(borders.upright)
    merged = Curves(np.concatenate([borders.upright, points]), borders.level, borders.arcs)
    return merged, np.concatenate([sides[:count], added, sides[count:]])


def _padded(borders: Curves, touching: Mask) -> Curves:
    """For each column (C, 1, ...) its own borders, filled up with far-away ones."""
    v, h = len(borders.upright), len(borders.upright) + len(borders.level)
    return Curves(
        _own(borders.upright, touching[:, :v], _FAR_LINE)[:, None],
        _own(borders.level, touching[:, v:h], _FAR_LINE)[:, None],
        _own(borders.arcs, touching[:, h:], _FAR_ARC)[:, None],
    )


def _own(rows: Array, mask: Mask, far: Array) -> Array:
    most = int(mask.sum(axis=1).max(initial=0))
    first = np.argsort(~mask, axis=1, kind="stable")[:, :most]
    return np.where(np.take_along_axis(mask, first, axis=1)[..., None], rows[first], far)


def _starts(plan: RegionPlan, borders: Curves, spans: Spans, of_span: Index) -> _Starts:
    """Where to look for centres: middles of spans, the widest and some others, and centres of arcs."""
    picked = []
    order = np.lexsort((spans.x0 - spans.x1, of_span))
    for own in np.split(order, np.flatnonzero(np.diff(of_span[order])) + 1):
        picked += [own[:_STARTS], own[_STARTS :: max(1, len(own) // _STARTS)]]
    spots = np.concatenate(picked)
    rounded = np.round(borders.arcs[:, :2] % np.array(plan.cell), 6)
    middles = np.unique(rounded, return_index=True, axis=0)[0]
    x = np.concatenate([spans.middle[spots], middles[:, 0]])
    y = np.concatenate([spans.y[spots], middles[:, 1]])
    column = np.concatenate([of_span[spots], plan.column(middles[:, 0], middles[:, 1])])
    by_column = np.argsort(column, kind="stable")
    return _Starts(x[by_column], y[by_column], column[by_column])


def _centres(own: Curves, starts: _Starts, plan: RegionPlan) -> Array:
    """The point (C, 2) of each column's area farthest from its borders, to a thousandth of that distance."""
    c = starts.column
    of_start = Curves(own.upright[c, 0], own.level[c, 0], own.arcs[c, 0])
    away = _nearest(of_start, starts.x, starts.y, plan.cell)
    last = np.flatnonzero(np.diff(c[np.lexsort((away, c))], append=-1))
    chosen = np.lexsort((away, c))[last]
    best, reach = np.stack([starts.x[chosen], starts.y[chosen]], axis=1), away[chosen]
    step, rows = reach.copy(), np.arange(len(best))
    for _ in range(_ROUNDS):
        tries = best[:, None] + step[:, None, None] * _COMPASS
        away = _nearest(own, tries[..., 0], tries[..., 1], plan.cell)
        away[plan.column(tries[..., 0], tries[..., 1]) != rows[:, None]] = 0.0
        k = np.argmax(away, axis=1)
        better = away[rows, k] > reach * (1.0 + 1e-9)
        best = np.where(better[:, None], tries[rows, k], best)
        reach = np.where(better, away[rows, k], reach)
        step = np.where(better, step, step / 2)
    centres: Array = best % np.array(plan.cell)
    return centres


def _nearest(curves: Curves, x: Array, y: Array, cell: tuple[float, float]) -> Array:
    nearest: Array = periodic_distances(curves, x, y, cell).min(axis=-1)
    return nearest


def _distances(centres: Array, borders: Curves, touching: Mask, cell: tuple[float, float]) -> Array:
    away = periodic_distances(borders, centres[:, 0], centres[:, 1], cell)
    found = np.stack([np.min(away, axis=1, where=touches, initial=np.inf) for touches in touching], axis=1)
    np.fill_diagonal(found, np.inf)
    return found
