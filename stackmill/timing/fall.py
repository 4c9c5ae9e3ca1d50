"""Down: when does the surface of each column get to each level? Thickness over rate, segment after segment.

No time step: within a step a column falls through its segments at the rates of that step, so every moment is a
sum of thickness/rate. Many draws fall at once; a draw is one set of thicknesses and rates that may be true.
Exact while the column stays flat and lit (flatness.py says how long that is).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]

NEVER = 1e290  # times beyond this mean that the level is not reached
_STANDSTILL = 1e300  # seconds per nm where nothing mills: finite, so that 0 nm still take 0 s


@frozen
class Column:
    """One column to fall through, in all draws at once.

    material (K,): index of each segment's material, top down; thickness_nm (K, D), or K rows of
    (D,); area: share of its region.
    """

    material: tuple[int, ...]
    thickness_nm: Array | Sequence[Array]
    area: float = 1.0

    @property
    def draws(self) -> int:
        """How many draws fall at once."""
        return len(self.thickness_nm[0])


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


@dataclass
class _Falling:
    """A column on its way down. left_nm (K, D): what is there still; passed_s (K + 1, D): when boundaries were met."""

    material: tuple[int, ...]
    left_nm: list[Array]
    passed_s: Array
    first: int = 0
    covered: bool = False

    def time_to(self, above: int, slowness: Array) -> Array:
        """Seconds (D,) from now until `above` segments are gone, at this slowness (M, D)."""
        cost = np.zeros(len(self.left_nm[0]))
        for k in range(self.first, above):
            cost += self.left_nm[k] * slowness[self.material[k]]
        return cost

    def lower(self, slowness: Array, duration_s: Array, clock_s: Array, counts: bool) -> None:
        """Fall for duration_s (D,), noting when each boundary is met."""
        spent = np.zeros_like(duration_s)
        for k in range(self.first, len(self.material)):
            left, pace = self.left_nm[k], slowness[self.material[k]]
            spent = spent + left * pace
            through = spent <= duration_s
            first_time = through & (self.passed_s[k + 1] >= NEVER)
            self.passed_s[k + 1][first_time] = (clock_s + spent if counts else clock_s)[first_time]
            if through.all():
                left[:] = 0.0
                if k == self.first:
                    self.first += 1
                continue
            np.clip((spent - duration_s) / pace, 0.0, left, out=left)
            if not through.any():
                break

    def strip(self, materials: frozenset[int], clock_s: Array) -> None:
        """Lose the leading segments of these materials, draw by draw."""
        bare = np.ones(len(self.left_nm[0]), dtype=bool)
        for k in range(self.first, len(self.material)):
            if self.material[k] in materials:
                self.left_nm[k][bare] = 0.0
            bare &= self.left_nm[k] <= 0.0
            met = bare & (self.passed_s[k + 1] >= NEVER)
            self.passed_s[k + 1][met] = clock_s[met]
            if not bare.any():
                break


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

    passed_s[r][c] (K + 1, D): the clock when each boundary of column c of region r was met, NEVER where not;
    spans: one for each step of the recipe, in order; left_nm[step][r][c] (K, D): what was still there after
    each step, kept only when asked for.
    """

    passed_s: tuple[tuple[Array, ...], ...]
    spans: tuple[StepSpan, ...]
    left_nm: tuple[tuple[tuple[Array, ...], ...], ...] = ()

    def reach(self, region: int, column: int, above: int | NDArray[np.intp]) -> Array:
        """When the level with `above` segments (one number, or one a draw) over it is reached (D,), inf if never."""
        passed = self.passed_s[region][column]
        times = passed[above, np.arange(passed.shape[1])] if isinstance(above, np.ndarray) else passed[above]
        return np.where(times >= NEVER, np.inf, times)


def fall(regions: Sequence[Sequence[Column]], steps: Sequence[Step], *, keep_left: bool = False) -> Fall:
    """Run a recipe over the columns of all regions. Shapes: see Column and Lowering; D draws throughout.

    A step that ends on reaching a level which is never reached runs for ever, and later steps are never begun.
    """
    draws = regions[0][0].draws
    columns = [[_begin(column, draws) for column in region] for region in regions]
    clock = np.zeros(draws)
    spans: list[StepSpan] = []
    left: list[tuple[tuple[Array, ...], ...]] = []
    for step in steps:
        start, duration = clock, np.zeros(draws)
        if isinstance(step, Lowering):
            slowness = [step.slowness(r) for r in range(len(columns))]
            duration = _duration(step, columns, slowness)
            for pace, falling in zip(slowness, columns, strict=True):
                for column in falling:
                    if not column.covered:
                        column.lower(pace, duration, clock, step.counts)
            if step.counts:
                clock = clock + duration
        elif isinstance(step, Strip):
            for column in _bare(columns):
                column.strip(step.materials, clock)
        else:
            for region in step.regions:
                for column in columns[region]:
                    column.covered = step.covered
        spans.append(StepSpan(step.name, start, clock, duration))
        if keep_left:
            left.append(tuple(tuple(np.stack(c.left_nm) for c in region) for region in columns))
    return Fall(tuple(tuple(c.passed_s for c in region) for region in columns), tuple(spans), tuple(left))


def _begin(column: Column, draws: int) -> _Falling:
    passed = np.full((len(column.material) + 1, draws), 2 * NEVER)
    passed[0] = 0.0
    return _Falling(column.material, [row.copy() for row in column.thickness_nm], passed)


def _bare(columns: Sequence[Sequence[_Falling]]) -> list[_Falling]:
    return [column for region in columns for column in region if not column.covered]


def _duration(step: Lowering, columns: Sequence[Sequence[_Falling]], slowness: Sequence[Array]) -> Array:
    if step.duration_s is not None:
        return step.duration_s
    assert step.until is not None
    until = step.until
    times = np.stack([_time_to_end(columns[r][c], above, slowness[r]) for r, c, above in until.columns])
    reached = area_quantile(times, until.area, until.share)
    return np.maximum(reached + until.error_s, 0.0)


def _time_to_end(column: _Falling, above: int, slowness: Array) -> Array:
    if column.covered:
        return np.full(slowness.shape[1], 2 * NEVER)
    return column.time_to(above, slowness)


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
