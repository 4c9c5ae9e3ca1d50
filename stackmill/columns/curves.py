"""Plan curves of three kinds (upright and level pieces, arcs of circles): crossing, cutting, distance.

Every boundary in the plan of a die is made of these: edges of lines, blocks and vias, and the curves at a
fixed distance from such edges.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

TURN = 2.0 * np.pi
SIDE_NM = 1e-4  # how far beside a curve the two sides are looked at
SHORTEST_NM = 1e-3  # shorter pieces are nothing but rounding
_TOUCHING = 1e-9
_ANGLE = 1e-9


@frozen
class Curves:
    """Curves of the plan (nm, rad).

    upright (V, 3): x, and y from and to; level (H, 3): y, and x from and to; arcs (A, 5): centre x and y,
    radius, angle from and to (at most one turn further).
    """

    upright: Array
    level: Array
    arcs: Array

    def __len__(self) -> int:
        return len(self.upright) + len(self.level) + len(self.arcs)

    def chosen(self, mask: Mask) -> Curves:
        """The curves where the mask (V + H + A,) holds."""
        v, h = len(self.upright), len(self.upright) + len(self.level)
        return Curves(self.upright[mask[:v]], self.level[mask[v:h]], self.arcs[mask[h:]])

    def distance(self, x: Array, y: Array) -> Array:
        """From points (N,) to the nearest curve (N,); inf without curves."""
        nearest: Array = self.distances(x, y).min(axis=-1, initial=np.inf)
        return nearest

    def distances(self, x: Array, y: Array) -> Array:
        """From points (...) to each curve (..., V + H + A); curves may be stacked to go with the points."""
        x, y = x[..., None], y[..., None]
        v, h = self.upright, self.level
        upright = np.hypot(x - v[..., 0], y - np.clip(y, v[..., 1], v[..., 2]))
        level = np.hypot(y - h[..., 0], x - np.clip(x, h[..., 1], h[..., 2]))
        return np.concatenate([upright, level, _to_arcs(self.arcs, x, y)], axis=-1)

    def at(self, fraction: float = 0.5) -> tuple[Array, Array, Array, Array]:
        """A point on each curve, and the unit normal there (+x, +y, outward): x, y, nx, ny."""
        v, h, a = self.upright, self.level, self.arcs
        angle = a[:, 3] + fraction * (a[:, 4] - a[:, 3])
        along_v, along_h = (s[:, 1] + fraction * (s[:, 2] - s[:, 1]) for s in (v, h))
        x = np.concatenate([v[:, 0], along_h, a[:, 0] + a[:, 2] * np.cos(angle)])
        y = np.concatenate([along_v, h[:, 0], a[:, 1] + a[:, 2] * np.sin(angle)])
        nx = np.concatenate([np.ones(len(v)), np.zeros(len(h)), np.cos(angle)])
        ny = np.concatenate([np.zeros(len(v)), np.ones(len(h)), np.sin(angle)])
        return x, y, nx, ny

    def ends(self) -> Array:
        """Both ends of every curve (2 (V + H + A), 2), but none of full circles."""
        v, h = self.upright, self.level
        a = self.arcs[self.arcs[:, 4] - self.arcs[:, 3] < TURN - 1e-9]
        parts = [v[:, [0, 1]], v[:, [0, 2]], h[:, [1, 0]], h[:, [2, 0]]]
        for k in (3, 4):
            parts.append(a[:, :2] + a[:, 2:3] * np.stack([np.cos(a[:, k]), np.sin(a[:, k])], axis=1))
        return np.concatenate(parts)


def periodic_distances(curves: Curves, x: Array, y: Array, cell: tuple[float, float]) -> Array:
    """From points (...) to each curve of the cell (..., V + H + A) or its nearest copy in other cells.

    Curves may be stacked to go with the points.
    """
    x, y = x[..., None], y[..., None]
    v, h = curves.upright, curves.level
    upright = np.hypot(_wrapped(x - v[..., 0], 0.0, cell[0]), _to_span(y, v, cell[1]))
    level = np.hypot(_wrapped(y - h[..., 0], 0.0, cell[1]), _to_span(x, h, cell[0]))
    if not curves.arcs.shape[-2]:
        return np.concatenate([upright, level], axis=-1)
    dx, dy = (cell[k] * np.array([-1.0, 0.0, 1.0]) for k in (0, 1))
    moved_x, moved_y = (
        (x[..., None] + dx).repeat(3, axis=-1),
        np.concatenate([y[..., None] + dy] * 3, axis=-1),
    )
    arcs = _to_arcs(curves.arcs[..., None, :], moved_x, moved_y).min(axis=-1)
    return np.concatenate([upright, level, arcs], axis=-1)


def _to_span(at: Array, straight: Array, period: float) -> Array:
    """Along a line: from points to a piece from [1] to [2] of it, or its nearest copy."""
    low, high = straight[..., 1], straight[..., 2]
    return _wrapped(at - (low + high) / 2, (high - low) / 2, period)


def _wrapped(difference: Array, half: Array | float, period: float) -> Array:
    away = np.abs(difference - period * np.round(difference / period))
    return np.maximum(away - half, 0.0)


NOTHING = Curves(np.empty((0, 3)), np.empty((0, 3)), np.empty((0, 5)))


def joined(parts: list[Curves]) -> Curves:
    """All curves of several sets, equal ones once."""
    if not parts:
        return NOTHING
    return Curves(
        _distinct(np.concatenate([p.upright for p in parts])),
        _distinct(np.concatenate([p.level for p in parts])),
        _distinct(np.concatenate([p.arcs for p in parts])),
    )


def circles(centres: Array, radius: float) -> Curves:
    """Full circles around points (N, 2)."""
    full = np.broadcast_to([radius, 0.0, TURN], (len(centres), 3))
    return Curves(NOTHING.upright, NOTHING.level, np.concatenate([centres.reshape(-1, 2), full], axis=1))


def cut(curves: Curves, window: tuple[float, float, float, float]) -> Curves:
    """Cut every curve wherever it meets another, and keep what lies in the window (x0, x1, y0, y1).

    Curves that only touch are cut where one of them ends.
    """
    x0, x1, y0, y1 = window
    v = _clipped(curves.upright, x0, x1, y0, y1)
    h = _clipped(curves.level, y0, y1, x0, x1)
    a = curves.arcs
    ends = Curves(v, h, a).ends()
    upright = _cut_straight(v, h, _upright_meets_arcs(v[:, 0], a), ends)
    level = _cut_straight(h, v, _level_meets_arcs(h[:, 0], a), ends[:, ::-1])
    arcs = _cut_arcs(a, v, h, ends, window)
    cx, cy, r, start, stop = arcs.T
    middle = (start + stop) / 2
    x, y = cx + r * np.cos(middle), cy + r * np.sin(middle)
    return Curves(upright, level, arcs[(x >= x0) & (x <= x1) & (y >= y0) & (y <= y1)])


def chopped(curves: Curves, longest: float) -> Curves:
    """The curves in pieces that are no longer than that."""
    lengths = curves.arcs[:, 2] * (curves.arcs[:, 4] - curves.arcs[:, 3])
    return Curves(
        _chop(curves.upright, curves.upright[:, 2] - curves.upright[:, 1], longest),
        _chop(curves.level, curves.level[:, 2] - curves.level[:, 1], longest),
        _chop(curves.arcs, lengths, longest),
    )


def _chop(rows: Array, lengths: Array, longest: float) -> Array:
    counts = np.maximum(np.ceil(lengths / longest), 1).astype(np.intp)
    which = np.repeat(np.arange(len(rows)), counts)
    nth = np.arange(len(which)) - np.repeat(np.cumsum(counts) - counts, counts)
    chopped_rows = rows[which]
    start, size = chopped_rows[:, -2].copy(), (chopped_rows[:, -1] - chopped_rows[:, -2]) / counts[which]
    chopped_rows[:, -2], chopped_rows[:, -1] = start + nth * size, start + (nth + 1) * size
    return chopped_rows


def merged(pieces: Curves, sides: Array) -> tuple[Curves, Array]:
    """Pieces of one curve that follow on each other become one again, where their `sides` (N,) agree too."""
    v, h = len(pieces.upright), len(pieces.upright) + len(pieces.level)
    upright, of_upright = _runs(pieces.upright, sides[:v])
    level, of_level = _runs(pieces.level, sides[v:h])
    arcs, of_arcs = _runs(pieces.arcs, sides[h:])
    return Curves(upright, level, arcs), np.concatenate([of_upright, of_level, of_arcs])


def _runs(rows: Array, sides: Array) -> tuple[Array, Array]:
    """See merged; rows end with where a piece starts and stops, pieces of a curve are sorted."""
    if len(rows) < 2:
        return rows, sides
    same_curve = np.all(rows[1:, :-2] == rows[:-1, :-2], axis=1) & (sides[1:] == sides[:-1])
    first = np.concatenate([[True], ~(same_curve & (np.abs(rows[1:, -2] - rows[:-1, -1]) < _TOUCHING))])
    last = np.concatenate([first[1:], [True]])
    return np.column_stack([rows[first, :-1], rows[last, -1]]), sides[first]


def on_arc(arcs: Array, dx: Array | float, dy: Array | float) -> Mask:
    """Whether directions (dx, dy) from the centres of arcs (..., 5) point at the arcs."""
    angle = (np.arctan2(dy, dx) - arcs[..., 3]) % TURN
    on: Mask = (angle <= arcs[..., 4] - arcs[..., 3] + _ANGLE) | (angle >= TURN - _ANGLE)
    return on


def _upright_meets_arcs(at: Array, arcs: Array) -> Array:
    """Where upright lines x = at (V,) meet arcs (A, 5): y (V, A, 2), nan where they do not."""
    dx = (at[:, None] - arcs[:, 0])[..., None]
    dy = _other_leg(dx, arcs)
    return np.where(on_arc(arcs[:, None], dx, dy), arcs[:, 1:2] + dy, np.nan)


def _level_meets_arcs(at: Array, arcs: Array) -> Array:
    """Where level lines y = at (H,) meet arcs (A, 5): x (H, A, 2), nan where they do not."""
    dy = (at[:, None] - arcs[:, 1])[..., None]
    dx = _other_leg(dy, arcs)
    return np.where(on_arc(arcs[:, None], dx, dy), arcs[:, 0:1] + dx, np.nan)


def _other_leg(leg: Array, arcs: Array) -> Array:
    """Other legs (..., A, 2) of right triangles in the circles of arcs; nan for legs (..., A, 1) too long."""
    other2 = arcs[:, 2:3] ** 2 - leg**2
    legs: Array = np.sqrt(np.where(other2 > 0.0, other2, np.nan)) * np.array([-1.0, 1.0])
    return legs


def _arcs_meet(arcs: Array) -> Array:
    """Where arcs (A, 5) meet each other: points (A, A, 2, 2), nan for none."""
    between = arcs[None, :, :2] - arcs[:, None, :2]
    d2 = np.sum(between**2, axis=-1)
    r1, r2 = arcs[:, None, 2], arcs[None, :, 2]
    d2 = np.where(d2 > 0.0, d2, np.nan)
    along = (d2 + r1**2 - r2**2) / (2.0 * d2)
    across2 = r1**2 / d2 - along**2
    across = np.sqrt(np.where(across2 > 0.0, across2, np.nan))
    sideways = np.stack([-between[..., 1], between[..., 0]], axis=-1) * across[..., None]
    middle = arcs[:, None, :2] + along[..., None] * between
    points = np.stack([middle - sideways, middle + sideways], axis=2)
    away = points - arcs[None, :, None, :2]
    return np.where(on_arc(arcs[None, :, None], away[..., 0], away[..., 1])[..., None], points, np.nan)


def _distinct(rows: Array) -> Array:
    if len(rows) < 2:
        return rows
    return np.array(list({tuple(row): None for row in np.round(rows, 7).tolist()}))


def _to_arcs(arcs: Array, x: Array, y: Array) -> Array:
    cx, cy, r, start, stop = np.moveaxis(arcs, -1, 0)
    dx, dy = x - cx, y - cy
    along = on_arc(arcs, dx, dy)
    to_circle: Array = np.abs(np.hypot(dx, dy) - r)
    if bool(np.all(along)):
        return to_circle
    ends = [np.hypot(dx - r * np.cos(angle), dy - r * np.sin(angle)) for angle in (start, stop)]
    nearest: Array = np.where(along, to_circle, np.minimum(ends[0], ends[1]))
    return nearest


def _clipped(straight: Array, low: float, high: float, start: float, stop: float) -> Array:
    inside = straight[(straight[:, 0] >= low) & (straight[:, 0] <= high)]
    ends = np.clip(inside[:, 1:], start, stop)
    return np.column_stack([inside[:, 0], ends])[ends[:, 1] - ends[:, 0] > SHORTEST_NM]


def _cut_straight(lines: Array, crossing: Array, on_arcs: Array, ends: Array) -> Array:
    """Cut upright lines at level ones, where they meet arcs, and at ends (N, 2) of curves that lie on them."""
    if not len(lines):
        return lines
    meets = (lines[:, :1] > crossing[:, 1] - SIDE_NM) & (lines[:, :1] < crossing[:, 2] + SIDE_NM)
    stops = np.where(meets, crossing[:, 0], np.nan)
    touches = np.where(np.abs(ends[:, 0] - lines[:, :1]) < SIDE_NM, ends[:, 1], np.nan)
    stops = np.concatenate([stops, on_arcs.reshape(len(lines), -1), touches], axis=1)
    which, start, stop = _pieces(stops, lines[:, 1], lines[:, 2], np.full(len(lines), SHORTEST_NM))
    return np.column_stack([lines[which, 0], start, stop])


def _cut_arcs(
    arcs: Array, upright: Array, level: Array, ends: Array, window: tuple[float, float, float, float]
) -> Array:
    if not len(arcs):
        return arcs
    x0, x1, y0, y1 = window
    upright = np.concatenate([upright, [[x, y0, y1] for x in (x0, x1)]])
    level = np.concatenate([level, [[y, x0, x1] for y in (y0, y1)]])
    y = _within(_upright_meets_arcs(upright[:, 0], arcs), upright)
    x = _within(_level_meets_arcs(level[:, 0], arcs), level)
    points = [
        np.stack([np.broadcast_to(upright[:, 0, None, None], y.shape), y], axis=-1).swapaxes(0, 1),
        np.stack([x, np.broadcast_to(level[:, 0, None, None], x.shape)], axis=-1).swapaxes(0, 1),
        _arcs_meet(arcs),
        _touching(arcs, ends),
    ]
    away = np.concatenate([p.reshape(len(arcs), -1, 2) for p in points], axis=1) - arcs[:, None, :2]
    angle = (np.arctan2(away[..., 1], away[..., 0]) - arcs[:, 3:4]) % TURN
    span = arcs[:, 4] - arcs[:, 3]
    which, start, stop = _pieces(angle, np.zeros(len(arcs)), span, SHORTEST_NM / arcs[:, 2])
    first = arcs[which, 3]
    return np.column_stack([arcs[which, :3], first + start, first + stop])


def _touching(arcs: Array, ends: Array) -> Array:
    """Those of the ends (N, 2) of curves that lie on the circle of each arc (A, N, 2), else nan."""
    away = np.hypot(ends[:, 0] - arcs[:, :1], ends[:, 1] - arcs[:, 1:2])
    return np.where(np.abs(away - arcs[:, 2:3])[..., None] < SIDE_NM, ends, np.nan)


def _within(stops: Array, lines: Array) -> Array:
    """Stops (N, A, 2) on lines (N, 3), nan beyond their ends."""
    low, high = lines[:, 1, None, None] - SIDE_NM, lines[:, 2, None, None] + SIDE_NM
    return np.where((stops >= low) & (stops <= high), stops, np.nan)


def _pieces(stops: Array, low: Array, high: Array, shortest: Array) -> tuple[NDArray[np.intp], Array, Array]:
    """Cut intervals low..high (N,) at stops (N, M; nan for none): number, start and stop of each piece."""
    inside = np.where(np.isnan(stops), low[:, None], np.clip(stops, low[:, None], high[:, None]))
    edges = np.sort(np.concatenate([low[:, None], inside, high[:, None]], axis=1), axis=1)
    which, k = np.nonzero(np.diff(edges, axis=1) > shortest[:, None])
    return which, edges[which, k], edges[which, k + 1]
