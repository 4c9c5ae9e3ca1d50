"""Scanline integrals over the cell: exact along x, Gauss-Legendre along y between places where curves turn.

Along y the cell is cut into bands at every level edge, end, circle top and bottom, and crossing of curves; in
a band the widths are smooth but for square roots at its ends, which y = middle - half cos(phi) takes away.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache
from itertools import pairwise
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import SIDE_NM, Curves, cut, merged, on_arc
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Key = NDArray[np.int64]
Classify = Callable[[Array, Array], Key]

_NODES = 8
_WITHIN = 6
_HALVINGS = 36
_NOTHING = 1e-9


@frozen
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


class Divided(Protocol):
    """Something that divides the cell into states.

    competing: whether states meet on curves that are neither straight nor round.
    """

    @property
    def competing(self) -> bool:
        """See the class."""

    def state(self, x: Array, y: Array) -> Key:
        """The state at points (any shape) of the cell."""


@frozen
class Survey:
    """The cell cut up: spans of scanlines, and the borders (pieces of curves) at which some state changes."""

    spans: Spans
    borders: Curves


def survey(curves: Curves, cell: tuple[float, float], divided: Sequence[Divided], nodes: int = _NODES) -> Survey:
    """Cut the cell along scanlines wherever a state changes; `curves` hold all borders but competing ones."""
    window = (0.0, cell[0], 0.0, cell[1])
    pieces = cut(curves, window)
    found = pieces.chosen(_changes(pieces, cell, divided))
    borders = cut(merged(found, np.zeros(len(found)))[0], window)
    spans = _scan(borders, cell, nodes)
    for one in divided:
        if one.competing:
            spans = _refined(spans, one.state)
    return Survey(spans, borders)


def _changes(pieces: Curves, cell: tuple[float, float], divided: Sequence[Divided]) -> NDArray[np.bool_]:
    """Whether some state changes across each piece; looked at in several places where states compete."""
    step = SIDE_NM * np.array([[-1.0], [1.0]])
    changes = np.zeros(len(pieces), dtype=bool)
    for one in divided:
        for fraction in (0.5, 0.02, 0.98) if one.competing else (0.5,):
            x, y, nx, ny = pieces.at(fraction)
            left, right = one.state((x + step * nx) % cell[0], (y + step * ny) % cell[1])
            changes |= left != right
    return changes


def _scan(borders: Curves, cell: tuple[float, float], nodes: int) -> Spans:
    y, height = _scanlines(borders, cell, nodes)
    lines = np.arange(len(y))
    ends = [np.zeros(len(y)), np.full(len(y), cell[0])]
    met = [_on_upright(borders.upright, y), *_on_arcs(borders.arcs, y)]
    row = np.concatenate([lines, lines, *(line for line, _ in met)])
    x = np.clip(np.concatenate([*ends, *(x for _, x in met)]), 0.0, cell[0])
    order = np.lexsort((x, row))
    row, x = row[order], x[order]
    wide = (row[1:] == row[:-1]) & (np.diff(x) > _NOTHING * cell[0])
    row, x0, x1 = row[:-1][wide], x[:-1][wide], x[1:][wide]
    return Spans(x0, x1, y[row], (x1 - x0) * height[row] / (cell[0] * cell[1]))


def _scanlines(borders: Curves, cell: tuple[float, float], nodes: int) -> tuple[Array, Array]:
    """Scanlines: their y and the height each stands for; one a band where no border is round."""
    arcs = borders.arcs
    top = np.where(on_arc(arcs, 0.0, 1.0), arcs[:, 1] + arcs[:, 2], -np.inf)
    bottom = np.where(on_arc(arcs, 0.0, -1.0), arcs[:, 1] - arcs[:, 2], np.inf)
    ends = arcs[:, 1:2] + arcs[:, 2:3] * np.sin(arcs[:, 3:])
    turns = [top, bottom, ends.ravel(), borders.upright[:, 1:].ravel(), borders.level[:, 0]]
    edges = _band_edges(np.concatenate(turns), cell[1])
    low, size = edges[:-1], np.diff(edges)
    middle = (low + size / 2)[:, None]
    high_arc, low_arc = np.maximum(top, ends.max(axis=1)), np.minimum(bottom, ends.min(axis=1))
    round_ = np.any((middle > low_arc) & (middle < high_arc), axis=1)
    position, weight = _root_rule(nodes)
    y = (low[round_, None] + size[round_, None] * position).ravel()
    height = (size[round_, None] * weight / weight.sum()).ravel()
    return np.concatenate([y, middle[~round_, 0]]), np.concatenate([height, size[~round_]])


def _band_edges(turns: Array, height: float) -> Array:
    inside = turns[(turns > _NOTHING * height) & (turns < (1.0 - _NOTHING) * height)]
    y = np.unique(inside, return_index=True)[0]  # asking for an index keeps numpy.ma unloaded
    y = y[np.diff(y, prepend=0.0) > _NOTHING * height]
    return np.concatenate([[0.0], y, [height]])


def _on_upright(upright: Array, y: Array) -> tuple[NDArray[np.intp], Array]:
    """Where scanlines (Y,) meet upright borders: numbers of the scanlines, and x."""
    line, k = np.nonzero((y[:, None] >= upright[:, 1]) & (y[:, None] <= upright[:, 2]))
    return line, upright[k, 0]


def _on_arcs(arcs: Array, y: Array) -> list[tuple[NDArray[np.intp], Array]]:
    """Where scanlines (Y,) meet arcs left and right of their centres: numbers of the scanlines, and x."""
    line, k = np.nonzero(np.abs(y[:, None] - arcs[:, 1]) < arcs[:, 2])
    arc, up = arcs[k], y[line] - arcs[k, 1]
    half = np.sqrt(np.clip(arc[:, 2] ** 2 - up**2, 0.0, None))
    found = []
    for side in (-1.0, 1.0):
        on = on_arc(arc, side * half, up)
        found.append((line[on], arc[on, 0] + side * half[on]))
    return found


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
