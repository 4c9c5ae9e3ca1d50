"""A job as something to fall through: its columns cut at every level asked for, and its steps."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import RegionColumns
from stackmill.documents.job import Goal, Keep
from stackmill.documents.recipe import Beam, Process, Seen, Target
from stackmill.documents.recipe import Cover as CoverStep
from stackmill.documents.recipe import Strip as StripStep
from stackmill.documents.recipe import Uncover as UncoverStep
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.timing.fall import Column, Cover, Lowering, Step, Strip, Until
from stackmill.timing.levels import CutColumn

Array = NDArray[np.float64]
Index = NDArray[np.intp]

DEFAULT_SHARE = 0.95  # of the area that must be down for a `to` step, where no goal says otherwise
LOST_SHARE = 0.01  # the goal is lost when this much of its area has passed its lower level
ANY_SHARE = 1e-9  # a keep is lost where any of it is too thin


@frozen
class Spot:
    """A level in one column: region, column, boundary (one number, or one a draw (D,)), area."""

    region: int
    column: int
    above: int | Index
    area: float


@frozen
class KeepSpots:
    """Where a keep is spoilt: its spots, and in which draws (D,) each is too thin from the start."""

    spots: tuple[Spot, ...]
    too_thin: tuple[NDArray[np.bool_], ...]


@frozen
class Ground:
    """The columns of all regions, ready to fall, and the levels asked for.

    columns[r][c]; boundary[r][c] (S + 1,): where the boundaries of the column map's segments now lie;
    layer_above[r] (C, layers): the boundary above each layer's top (of the next present one below where it is
    absent); goal_upper, goal_lower: the goal's levels in its wanted columns.
    """

    columns: tuple[tuple[Column, ...], ...]
    boundary: tuple[tuple[Index, ...], ...]
    layer_above: tuple[Index, ...]
    goal_upper: tuple[Spot, ...]
    goal_lower: tuple[Spot, ...]
    keeps: tuple[KeepSpots, ...]


def ground(job: Job, deltas_nm: Sequence[Array]) -> Ground:
    """Prepare the columns for draws whose thickness inputs are off by deltas_nm[r] (L, D) in region r."""
    cut = [_cut_columns(region, deltas) for region, deltas in zip(job.column_map.regions, deltas_nm, strict=True)]
    upper, lower = _goal_cuts(job, cut) if job.goal else ([], [])
    keeps = [_keep_cuts(job, keep, cut) for keep in job.keeps]
    return Ground(
        columns=tuple(tuple(c.done() for c in region) for region in cut),
        boundary=tuple(tuple(c.boundary for c in region) for region in cut),
        layer_above=tuple(_layer_above(job, r, region) for r, region in enumerate(cut)),
        goal_upper=tuple(_spot(cut, where) for where in upper),
        goal_lower=tuple(_spot(cut, where) for where in lower),
        keeps=tuple(KeepSpots(tuple(_spot(cut, w) for w in where), thin) for where, thin in keeps),
    )


def _cut_columns(region: RegionColumns, deltas_nm: Array) -> list[CutColumn]:
    cut = []
    known: dict[tuple[float, bytes], Array] = {}
    for c, count in enumerate(region.segments):
        rows = [
            _drawn(known, thick, slope, deltas_nm)
            for thick, slope in zip(region.thickness_nm[c, :count].tolist(), region.dthickness[c, :count], strict=True)
        ]
        if any(float(row.min()) < 0.0 for row in rows):
            rows = list(_standing(np.stack(rows)))
        cut.append(CutColumn(region.material[c, :count].tolist(), rows, float(region.area[c])))
    return cut


def _drawn(known: dict[tuple[float, bytes], Array], thickness_nm: float, slope: Array, deltas_nm: Array) -> Array:
    """A segment's drawn thickness (D,): one row for all segments that are drawn alike."""
    key = (thickness_nm, slope.tobytes())
    if key not in known:
        moved = np.flatnonzero(slope)
        known[key] = thickness_nm + slope[moved] @ deltas_nm[moved]
    return known[key]


def _standing(thickness_nm: Array) -> Array:
    """Thicknesses (S, D), top down, none below zero.

    Where a draw would have a segment thinner than nothing, what lies on it gives way, so that outer sizes hold.
    """
    tops = np.maximum.accumulate(np.maximum(np.cumsum(thickness_nm[::-1], axis=0), 0.0), axis=0)
    return np.diff(tops, axis=0, prepend=0.0)[::-1]


# A place to be turned into a Spot once all cuts are made: region, column, and which of its levels or boundaries.
_Where = tuple[int, int, int, bool]


def _spot(cut: Sequence[Sequence[CutColumn]], where: _Where) -> Spot:
    r, c, index, is_level = where
    column = cut[r][c]
    return Spot(r, c, column.levels[index] if is_level else int(column.boundary[index]), column.area)


def _layer_above(job: Job, r: int, cut: Sequence[CutColumn]) -> Index:
    region = job.column_map.regions[r]
    layers = np.arange(len(job.column_map.layers))
    rows = []
    for c, count in enumerate(region.segments):
        first = np.searchsorted(region.layer[c, :count], layers, side="left")
        rows.append(cut[c].boundary[first])
    return np.stack(rows)


def segments_of(job: Job, r: int, c: int, layer: str, feature: str | None) -> tuple[int, int] | None:
    """The first and last segment of a layer, or of a feature in it, in a column; None where it is not there."""
    region, count = job.column_map.regions[r], int(job.column_map.regions[r].segments[c])
    inside = region.layer[c, :count] == job.column_map.layers.index(layer)
    if feature is not None:
        inside &= region.feature[c, :count] == job.feature_index(layer, feature)
    found = np.flatnonzero(inside)
    return (int(found[0]), int(found[-1])) if found.size else None


def wanted_columns(job: Job, goal: Goal | Keep) -> list[tuple[int, int, int, int]]:
    """The columns of a goal's or keep's wanted area: (region, column, first segment, last segment)."""
    wanted = []
    for r, region in enumerate(job.column_map.regions):
        if goal.in_ and region.name not in goal.in_:
            continue
        for c in range(len(region.area)):
            found = segments_of(job, r, c, goal.layer, goal.feature)
            if found:
                wanted.append((r, c, *found))
    return wanted


def _goal_cuts(job: Job, cut: Sequence[Sequence[CutColumn]]) -> tuple[list[_Where], list[_Where]]:
    assert job.goal is not None
    upper: list[_Where] = []
    lower: list[_Where] = []
    level = job.goal.at
    for r, c, first, last in wanted_columns(job, job.goal):
        if level.top:
            upper.append((r, c, first, False))
            lower.append((r, c, last + 1, False))
            continue
        column = cut[r][c]
        middle = level.fraction * _thickness(column, first, last)
        upper.append((r, c, column.cut(first, last, middle + level.half_width), True))
        lower.append((r, c, column.cut(first, last, middle - level.half_width), True))
    return upper, lower


def _keep_cuts(
    job: Job, keep: Keep, cut: Sequence[Sequence[CutColumn]]
) -> tuple[list[_Where], tuple[NDArray[np.bool_], ...]]:
    where: list[_Where] = []
    thin = []
    for r, c, first, last in wanted_columns(job, keep):
        thickness = _thickness(cut[r][c], first, last)
        thin.append(thickness < keep.at_least)
        where.append((r, c, cut[r][c].cut(first, last, np.full_like(thickness, keep.at_least)), True))
    return where, tuple(thin)


def _thickness(column: CutColumn, first: int, last: int) -> Array:
    top, floor = int(column.boundary[first]), int(column.boundary[last + 1])
    thickness: Array = np.sum(column.thickness_nm[top:floor], axis=0)
    return thickness


RatesOf = Callable[[int], Array]
"""Gives the milling rates (M, D) in nm/s of the column map's materials in a step, by its number."""


def fall_steps(
    job: Job,
    where: Ground,
    rates_of: RatesOf,
    *,
    durations_s: Mapping[int, float],
    late_s: Mapping[int, Array],
    region_share: tuple[Array, ...] | None = None,
) -> list[Step]:
    """The recipe as steps to fall by, and after its end the last beam going on.

    durations_s: the lengths of `to` steps, once known (a `to` that is not there ends by reaching); late_s (D,):
    how much too late each `seen` step is stopped; region_share: what share (D,) of the beam's current reaches
    each region. The extra last step, named "", lets the forecast say what
    happens to someone who stays longer than the recipe.
    """
    draws = where.columns[0][0].draws
    has_beam = any(isinstance(step, Beam) for step in job.recipe.steps)
    regions = [region.name for region in job.column_map.regions]
    steps: list[Step] = []
    for i, step in enumerate(job.recipe.steps):
        if isinstance(step, CoverStep | UncoverStep):
            named = step.cover if isinstance(step, CoverStep) else step.uncover
            # What is covered or bared after the last milling changes no time, and must not while staying on.
            shielded = frozenset(map(regions.index, named)) if i < last_milling(job) else frozenset()
            steps.append(Cover(shielded, isinstance(step, CoverStep), step.name))
        elif isinstance(step, StripStep):
            known = job.column_map.materials
            steps.append(Strip(frozenset(known.index(m) for m in step.strips if m in known), step.name))
        else:
            duration, until = None, None
            if step.for_ is not None:
                duration = np.full(draws, step.for_)
            elif i in durations_s:
                duration = np.full(draws, durations_s[i])
            else:
                until = _until(job, where, step, late_s.get(i, np.zeros(draws)))
            counts = isinstance(step, Beam) or not has_beam
            share = region_share if isinstance(step, Beam) else None
            steps.append(Lowering(rates_of(i), duration, until, counts, step.name, share))
    return steps + _going_on(steps, draws)


def last_milling(job: Job) -> int:
    """The number of the last step that lowers or strips."""
    milling = (i for i, step in enumerate(job.recipe.steps) if not isinstance(step, CoverStep | UncoverStep))
    return max(milling, default=-1)


def _going_on(steps: Sequence[Step], draws: int) -> list[Step]:
    lowering = [step for step in steps if not isinstance(step, Cover)]
    if not lowering or not isinstance(lowering[-1], Lowering) or not lowering[-1].counts:
        return []
    last = lowering[-1]
    return [Lowering(last.rate_nm_per_s, np.full(draws, np.inf), region_share=last.region_share)]


def _until(job: Job, where: Ground, step: Beam | Process, late_s: Array) -> Until:
    target: Target | Seen | None = step.to or step.seen
    assert target is not None
    columns, area = [], []
    wanted = target.in_ or _goal_regions(job)
    for r, region in enumerate(job.column_map.regions):
        if wanted and region.name not in wanted:
            continue
        for c in range(len(region.area)):
            above = _target_above(job, where, r, c, target)
            if above is not None:
                columns.append((r, c, above))
                area.append(float(region.area[c]))
    share = target.area if target.area is not None else (job.goal.clear if job.goal else DEFAULT_SHARE)
    return Until(tuple(columns), np.array(area), share, late_s)


def _goal_regions(job: Job) -> tuple[str, ...]:
    """The regions in which the goal is wanted: those it names, or all that have it; none without a goal."""
    if job.goal is None:
        return ()
    regions = job.column_map.regions
    return tuple(dict.fromkeys(regions[r].name for r, *_ in wanted_columns(job, job.goal)))


def _target_above(job: Job, where: Ground, r: int, c: int, target: Target | Seen) -> int | None:
    if target.feature is None:
        return int(where.layer_above[r][c, job.column_map.layers.index(target.layer)])
    found = segments_of(job, r, c, target.layer, target.feature)
    return None if found is None else int(where.boundary[r][c][found[0]])
