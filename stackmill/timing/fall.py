"""Down: when does the surface of each column get to each level? Thickness over rate, segment after segment.

No time step: within a step a column falls through its segments at the rates of that step, so every moment is a
sum of thickness/rate. Many draws fall at once; a draw is one set of thicknesses and rates that may be true.
Exact while the column stays flat and lit (flatness.py says how long that is).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.timing.tree import NEVER, Column, SegmentTree

Array = NDArray[np.float64]

__all__ = [
    "NEVER",
    "Column",
    "Cover",
    "Fall",
    "Lowering",
    "Step",
    "StepSpan",
    "Strip",
    "Until",
    "area_quantile",
    "fall",
]

_STANDSTILL = 1e300  # seconds per nm where nothing mills: finite, so that 0 nm still take 0 s


@frozen
class Lowering:
    """A step that lowers: rate_nm_per_s (M, D). Its length is a time, or the reaching of a level.

    duration_s (D,) or None; until: columns and level whose `share` of area ends the step; error_s (D,): how
    much too late the eye stops it. counts: whether it runs the clock; name: for messages; region_share: for each
    region, the share (D,) of the rates that acts there; None: the whole everywhere.
    """

    rate_nm_per_s: Array
    duration_s: Array | None = None
    until: Until | None = None
    counts: bool = True
    name: str = ""
    region_share: tuple[Array, ...] | None = None

    def slowness(self, region: int) -> Array:
        """Seconds per nm (M, D) in a region."""
        share = 1.0 if self.region_share is None else self.region_share[region]
        with np.errstate(divide="ignore"):
            slowness: Array = np.minimum(1.0 / (self.rate_nm_per_s * share), _STANDSTILL)
        return slowness


@frozen
class Until:
    """The end of a step by reaching: `share` of the area of these (region, column, segments above) is down."""

    columns: tuple[tuple[int, int, int], ...]
    area: Array
    share: float
    error_s: Array | float = 0.0


@frozen
class Strip:
    """A step that takes off the leading segments of some materials, in no time of the clock."""

    materials: frozenset[int]
    name: str = ""


@frozen
class Cover:
    """A step that protects regions (covered=True) or bares them again."""

    regions: frozenset[int]
    covered: bool
    name: str = ""


Step = Lowering | Strip | Cover


@frozen
class StepSpan:
    """When a step began and ended on the clock, and how long it took in itself, per draw (D,)."""

    name: str
    start_s: Array
    end_s: Array
    length_s: Array


@frozen
class Fall:
    """A recipe run down to its end.

    trees: one for each region; spans: one for each step of the recipe, in order; left_nm[step][r][c] (K, D): what
    was still there after each step, kept only when asked for.
    """

    trees: tuple[SegmentTree, ...]
    spans: tuple[StepSpan, ...]
    left_nm: tuple[tuple[tuple[Array, ...], ...], ...] = ()

    def reach(self, region: int, column: int, above: int | NDArray[np.intp]) -> Array:
        """When the level with `above` segments (one number, or one a draw) over it is reached (D,), inf if never."""
        return self.trees[region].reach(column, above)


def fall(regions: Sequence[Sequence[Column]], steps: Sequence[Step], *, keep_left: bool = False) -> Fall:
    """Run a recipe over the columns of all regions. Shapes: see Column and Lowering; D draws throughout.

    A step that ends on reaching a level which is never reached runs for ever, and later steps are never begun.
    """
    trees = [SegmentTree(columns) for columns in regions]
    clock = np.zeros(trees[0].draws)
    spans: list[StepSpan] = []
    left: list[tuple[tuple[Array, ...], ...]] = []
    for step in steps:
        start, duration = clock, np.zeros_like(clock)
        if isinstance(step, Lowering):
            slowness = [step.slowness(r) for r in range(len(trees))]
            duration = _duration(step, trees, slowness)
            for pace, tree in zip(slowness, trees, strict=True):
                if not tree.covered:
                    tree.lower(pace, duration, clock, step.counts)
            if step.counts:
                clock = clock + duration
        elif isinstance(step, Strip):
            for tree in trees:
                if not tree.covered:
                    tree.strip(step.materials, clock)
        else:
            for region in step.regions:
                trees[region].covered = step.covered
        spans.append(StepSpan(step.name, start, clock, duration))
        if keep_left:
            left.append(tuple(tuple(tree.left_nm(c) for c in range(len(tree.paths))) for tree in trees))
    return Fall(tuple(trees), tuple(spans), tuple(left))


def _duration(step: Lowering, trees: Sequence[SegmentTree], slowness: Sequence[Array]) -> Array:
    if step.duration_s is not None:
        return step.duration_s
    assert step.until is not None
    until = step.until
    times = np.stack([trees[r].time_to(c, above, slowness[r]) for r, c, above in until.columns])
    reached = area_quantile(times, until.area, until.share)
    return np.maximum(reached + until.error_s, 0.0)


def area_quantile(times: Array, area: Array, share: float) -> Array:
    """The moment (D,) when `share` of the area is down: times (W, D) of W columns with areas (W,)."""
    if len(times) == 1:
        only: Array = times[0]
        return only
    order = np.argsort(times, axis=0)
    covered = np.cumsum(area[order], axis=0)
    need = share * float(area.sum()) * (1.0 - 1e-12)
    first = np.argmax(covered >= need, axis=0)
    met: Array = np.take_along_axis(np.take_along_axis(times, order, axis=0), first[None], axis=0)[0]
    return met
