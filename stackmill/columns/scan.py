"""Scanline integrals over the cell: exact along x, Gauss-Legendre along y between places where curves turn.

Along y the cell is cut into bands at every level edge, end, circle top and bottom, and crossing of curves; in
a band the widths are smooth but for square roots at its ends, which y = middle - half cos(phi) takes away.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import Curves, circles_meet, straight_meets_circle

Array = NDArray[np.float64]
Key = NDArray[np.int64]
Classify = Callable[[Array, Array], Key]

_NODES = 8
_WITHIN = 6
_HALVINGS = 36
_NOTHING = 1e-9


@dataclass(frozen=True)
class Spans:
    """Pieces of scanlines between neighbouring curves: x0, x1, y (N,) in nm; share (N,) of the cell."""

    x0: Array
    x1: Array
    y: Array
    share: Array

    @property
    def middle(self) -> Array:
        """Where the middle of each span is along x (N,)."""
        return (self.x0 + self.x1) / 2

    def of(self, mask: NDArray[np.bool_]) -> Spans:
        """Some of the spans."""
        return Spans(self.x0[mask], self.x1[mask], self.y[mask], self.share[mask])

    def points(self) -> tuple[Array, Array, Array]:
        """Points for sums over area, good for square roots at the spans' ends: x, y, share (N, 6)."""
        position, weight = _within_span()
        x = self.x0[:, None] + (self.x1 - self.x0)[:, None] * position
        return x, np.broadcast_to(self.y[:, None], x.shape), self.share[:, None] * weight


@cache
def _gauss(nodes: int) -> tuple[Array, Array]:
    return np.polynomial.legendre.leggauss(nodes)


def _root_rule(nodes: int) -> tuple[Array, Array]:
    """Positions and weights on 0..1 by u = (1 - cos(phi)) / 2, Gauss-Legendre in phi."""
    node, weight = _gauss(nodes)
    phi = np.pi * (node + 1.0) / 2.0
    return (1.0 - np.cos(phi)) / 2.0, weight * np.pi / 4.0 * np.sin(phi)


@cache
def _within_span() -> tuple[Array, Array]:
    position, weight = _root_rule(_WITHIN)
    return position, weight / weight.sum()


def scan(curves: Curves, cell: tuple[float, float], classify: Sequence[Classify] = ()) -> Spans:
    """Cut the cell along scanlines at all curves, and also wherever one of `classify` changes in between."""
    y, height = _scanlines(curves, cell)
    breaks = [np.zeros((len(y), 1)), np.full((len(y), 1), cell[0]), *_crossings(curves, y)]
    x = np.sort(np.clip(np.concatenate(breaks, axis=1), 0.0, cell[0]), axis=1)
    width = np.diff(x, axis=1)
    row, k = np.nonzero(width > _NOTHING * cell[0])
    spans = Spans(x[row, k], x[row, k + 1], y[row], width[row, k] * height[row])
    spans = Spans(spans.x0, spans.x1, spans.y, spans.share / (cell[0] * cell[1]))
    for one in classify:
        spans = _refined(spans, one)
    return spans


def _scanlines(curves: Curves, cell: tuple[float, float]) -> tuple[Array, Array]:
    """Scanlines: their y and the height each stands for."""
    edges = _band_edges(curves, cell)
    low, high = edges[:-1], edges[1:]
    bottom, top = curves.arcs[:, 1] - curves.arcs[:, 2], curves.arcs[:, 1] + curves.arcs[:, 2]
    middle = (low + high)[:, None] / 2
    round_ = np.any((middle > bottom) & (middle < top), axis=1)
    position, weight = _root_rule(_NODES)
    size = high - low
    y = (low[round_, None] + size[round_, None] * position).ravel()
    height = (size[round_, None] * weight / weight.sum()).ravel()
    return np.concatenate([y, middle[~round_, 0]]), np.concatenate([height, size[~round_]])


def _band_edges(curves: Curves, cell: tuple[float, float]) -> Array:
    v, h, arcs = curves.upright, curves.level, curves.arcs
    v = v[(v[:, 0] >= 0.0) & (v[:, 0] <= cell[0])]
    h = h[(h[:, 2] >= 0.0) & (h[:, 1] <= cell[0])]
    meet_y = straight_meets_circle(v[:, 0], arcs)
    meet_y[(meet_y < v[:, 1, None, None]) | (meet_y > v[:, 2, None, None])] = np.nan
    points = circles_meet(arcs, arcs)[np.triu_indices(len(arcs), 1)].reshape(-1, 2)
    points = points[(points[:, 0] >= 0.0) & (points[:, 0] <= cell[0])]
    turns = [arcs[:, 1] - arcs[:, 2], arcs[:, 1] + arcs[:, 2]]
    y = np.concatenate([[0.0, cell[1]], v[:, 1], v[:, 2], h[:, 0], meet_y.ravel(), points[:, 1], *turns])
    y = np.unique(y[(y >= 0.0) & (y <= cell[1])])
    y = y[np.concatenate([[True], np.diff(y) > _NOTHING * cell[1]])]
    y[-1] = cell[1]
    edges: Array = y
    return edges


def _crossings(curves: Curves, y: Array) -> list[Array]:
    """Where scanlines (Y,) meet the curves: x (Y, ...), 0 for none."""
    v, arcs = curves.upright, curves.arcs
    meets = (y[:, None] >= v[:, 1]) & (y[:, None] <= v[:, 2])
    on_lines = np.where(meets, v[:, 0], 0.0)
    on_arcs = straight_meets_circle(y, arcs[:, [1, 0, 2, 3, 4]]).reshape(len(y), -1)
    return [on_lines, np.nan_to_num(on_arcs, nan=0.0)]


def _refined(spans: Spans, classify: Classify) -> Spans:
    """Cut spans in two where the key changes within; only curves that are no circles or lines need it."""
    inset = 1e-6 * (spans.x1 - spans.x0)
    at = [spans.x0 + inset, spans.middle, spans.x1 - inset]
    keys = [classify(x, spans.y) for x in at]
    split = (keys[0] != keys[1]) | (keys[1] != keys[2])
    if not split.any():
        return spans
    parts = [spans.of(~split)]
    whole = spans.of(split)
    cuts = [whole.x0]
    for k in (0, 1):
        cuts.append(_where_it_changes(at[k][split], at[k + 1][split], keys[k][split], whole.y, classify))
    cuts.append(whole.x1)
    for x0, x1 in pairwise(cuts):
        share = whole.share * (x1 - x0) / (whole.x1 - whole.x0)
        parts.append(Spans(x0, x1, whole.y, share).of(x1 - x0 > _NOTHING * (whole.x1 - whole.x0)))
    return _together(parts)


def _where_it_changes(low: Array, high: Array, key: Key, y: Array, classify: Classify) -> Array:
    """By halving: the largest x up to which the key at `low` holds; `high` where it never changes."""
    low, high = low.copy(), high.copy()
    same_at_end = classify(high, y) == key
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        same = classify(middle, y) == key
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return np.where(same_at_end, high, low)


def _together(parts: list[Spans]) -> Spans:
    return Spans(
        np.concatenate([p.x0 for p in parts]),
        np.concatenate([p.x1 for p in parts]),
        np.concatenate([p.y for p in parts]),
        np.concatenate([p.share for p in parts]),
    )
