"""What stands up and what sinks: every feature of a region measured on a frame of its surface."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import CORE, RegionColumns
from stackmill.frozen import frozen
from stackmill.relief.evolve import Frame, Run
from stackmill.relief.terrain import Terrain

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Mask = NDArray[np.bool_]

FLUSH_NM = 5.0  # what is less high is called flush: about what a tilted electron image still shows
_SPIKE = 0.5  # of a feature's depth: what stands so high on a sunken one is what it is told by
_TOLD = 0.7  # of a gone feature's height: a showing one on its ground that is as high tells of both
_TOP, _BASE = 0.9, 0.1  # of the height: where a top's and a base's width are read


@frozen
class Footprint:
    """Where a feature is drawn: feature (its number), layer, points (ny, nx); across: points over its narrowest."""

    feature: int
    layer: int
    points: Mask
    across: int


@frozen
class Standing:
    """One feature at one moment.

    kind: pillar, recess or flush; height_nm over the floor beside it, below 0 in a recess; width_nm, base_width_nm:
    at 90 and 10 % of the height, along the section or the feature's narrower way, None where flush;
    side_slope_deg: mean of its sides between those, None where flush; top_layer: number of the layer its top (a
    recess' bottom) is in, -1 below all; state: buried, showing or gone; vanishes_s: when the last of it is milled
    away, None if that lies beyond the run; cells_across: grid points over its narrowest width; overshadowed: it is
    gone, and what stands on its ground belongs to a feature that still shows.
    """

    feature: int
    layer: int
    kind: str
    height_nm: float
    width_nm: float | None
    base_width_nm: float | None
    side_slope_deg: float | None
    top_layer: int
    state: str
    vanishes_s: float | None
    cells_across: int
    overshadowed: bool = False


def footprints(region: RegionColumns, terrain: Terrain, features: Sequence[tuple[int, str]]) -> list[Footprint]:
    """The features that the points of a terrain meet and leave, from the top down.

    One that is under every point has nothing beside it to stand above.
    """
    found = []
    for number, (layer, _) in enumerate(features):
        mine = region.feature == number
        has = (mine & (region.part == CORE)).any(axis=1)  # its liners are not it: they stand or go by themselves
        has = has if has.any() else mine.any(axis=1)
        points = has[terrain.region_column][terrain.column]
        if points.any() and not points.all():
            found.append(Footprint(number, layer, points, _across(points)))
    return found


def _across(points: Mask) -> int:
    """How many points a feature has across: its longest stretch along the axis in which that is shorter.

    Rows that it fills from end to end do not count: along them it runs on for ever.
    """
    across = int(max(points.shape))
    for rows in (points, points.T):
        stretches = [len(run) for row in rows if row.any() and not row.all() for run in _runs(row)]
        if len(rows[0]) > 1 and stretches:
            across = min(across, max(stretches))
    return across


def _runs(row: Mask) -> list[Index]:
    """Stretches of True in a row that wraps, as indices."""
    if row.all():
        return [np.arange(len(row))]
    start = int(np.argmin(row))
    order = (np.arange(len(row)) + start) % len(row)
    turned = row[order]
    edges = np.flatnonzero(np.diff(np.concatenate([[False], turned, [False]]).astype(int)))
    return [order[a:b] for a, b in zip(edges[::2], edges[1::2], strict=True)]


def measured(region: RegionColumns, run: Run, frame: Frame, prints: Sequence[Footprint]) -> list[Standing]:
    """All features on one frame."""
    found = [_standing(region, run, frame, one) for one in prints]
    showing = [(own, one) for own, one in zip(prints, found, strict=True) if one.state == "showing"]
    return [
        replace(one, overshadowed=one.state == "gone" and any(_stands_for(other, own, one) for other in showing))
        for own, one in zip(prints, found, strict=True)
    ]


def _stands_for(other: tuple[Footprint, Standing], own: Footprint, one: Standing) -> bool:
    """Whether what stands on a gone feature's ground is told by one that shows there."""
    where, standing = other
    return bool((own.points & where.points).any()) and abs(standing.height_nm) >= _TOLD * abs(one.height_nm)


def _standing(region: RegionColumns, run: Run, frame: Frame, own: Footprint) -> Standing:
    terrain, height = run.terrain, frame.height_nm
    first, last = _spans(region, terrain, own)
    segment = frame.segment[own.points]
    state = "gone" if (segment > last).all() else "buried" if (segment < first).all() else "showing"
    floor = _floor(own, height)
    inside = height - floor
    pillar = _stands_up(inside[own.points])
    sign = 1.0 if pillar else -1.0
    raised = np.where(own.points, sign * inside, -np.inf)
    at = np.unravel_index(int(np.argmax(raised)), raised.shape)
    high = float(raised[at])
    kind = "flush" if high < FLUSH_NM else "pillar" if pillar else "recess"
    top, base = (None, None) if kind == "flush" else _widths(sign * inside, at, terrain, own, high)
    slope = None if top is None or base is None else _side_slope_deg(high, top, base)
    c = terrain.column[at]
    depth = int(frame.segment[at])
    layer = _layer_of(region, terrain, int(c), depth)
    passed = np.take_along_axis(run.passed_s[own.points], last[:, None], axis=1)
    gone_s = float(passed.max())
    return Standing(
        feature=own.feature,
        layer=own.layer,
        kind=kind,
        height_nm=sign * high,
        width_nm=top,
        base_width_nm=base,
        side_slope_deg=slope,
        top_layer=layer,
        state=state,
        vanishes_s=gone_s if np.isfinite(gone_s) else None,
        cells_across=own.across,
    )


def _stands_up(inside: Array) -> bool:
    """Whether a feature stands up over the ground beside it (P,): most of it does, or a spike on it."""
    return float(np.median(inside)) >= 0.0 or float(inside.max()) > _SPIKE * -float(inside.min())


def _spans(region: RegionColumns, terrain: Terrain, own: Footprint) -> tuple[Index, Index]:
    """The first and last segment (P,) of a feature at each of its points, counted in the terrain's own segments."""
    columns = terrain.column[own.points]
    first, last = np.zeros(len(terrain.top_nm), dtype=np.intp), np.zeros(len(terrain.top_nm), dtype=np.intp)
    for c in np.unique(columns):
        r = int(terrain.region_column[c])
        inside = np.flatnonzero(region.feature[r] == own.feature)
        owner = terrain.owner[c, : terrain.count[c]]
        mine = np.flatnonzero((owner >= inside[0]) & (owner <= inside[-1]))
        first[c], last[c] = mine[0], mine[-1]
    return first[columns], last[columns]


def _layer_of(region: RegionColumns, terrain: Terrain, column: int, segment: int) -> int:
    if segment >= terrain.count[column]:
        return -1
    return int(region.layer[terrain.region_column[column], terrain.owner[column, segment]])


def _floor(own: Footprint, height: Array) -> float:
    """The height of the ground beside a feature: the median as far from it as it is wide."""
    near = own.points.copy()
    for _ in range(max(own.across, 3)):
        for axis in (0, 1) if min(near.shape) > 1 else (1,):
            near = near | np.roll(near, 1, axis=axis) | np.roll(near, -1, axis=axis)
    beside = near & ~own.points
    outside = beside if beside.any() else ~own.points
    return float(np.median(height[outside])) if outside.any() else float(np.median(height))


def _widths(
    raised: Array, at: tuple[np.intp, ...], terrain: Terrain, own: Footprint, high: float
) -> tuple[float | None, float | None]:
    """The widths at 90 and 10 % of the height, through the highest point; None where it does not end nearby."""
    y, x = int(at[0]), int(at[1])
    lines = [(raised[y], x, terrain.step_nm[1], own.points[y])]
    if not terrain.is_section:
        lines.append((raised[:, x], y, terrain.step_nm[0], own.points[:, x]))
    row, middle, step, inside = min(lines, key=lambda line: int(line[3].sum()) * line[2])
    reach = int(inside.sum()) + own.across
    return _width(row, middle, _TOP * high, step, reach), _width(row, middle, _BASE * high, step, reach)


def _width(row: Array, middle: int, level: float, step: float, reach: int) -> float | None:
    """How wide a row stands over a level around a point, between points linearly; looked for within `reach` points."""
    n, width = len(row), 0.0
    for way in (1, -1):
        for k in range(1, min(reach, n)):
            here, before = float(row[(middle + way * k) % n]), float(row[(middle + way * (k - 1)) % n])
            if here < level:
                width += step * (k - 1 + (before - level) / (before - here))
                break
        else:
            return None
    return min(width, n * step)


def _side_slope_deg(high: float, top: float, base: float) -> float:
    across = 0.5 * (base - top)
    return float(np.degrees(np.arctan2((_TOP - _BASE) * high, max(across, 0.0))))


def relief_nm(frame: Frame) -> float:
    """Highest minus lowest point of a frame."""
    return float(np.ptp(frame.height_nm))
