"""How long is *Down* to be trusted? Until the facets from a column's edges reach its centre, or a shadow does.

Where neighbours fall at different speeds, a step appears, and from its edge a facet walks into the slower one.
At best values every pair of columns is followed: how fast the facet's kink moves (from the slow material's own
vertical speed on a slope), how far it has come, and whether that is the way to the centre yet.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.timing.fall import NEVER, Column, Fall, StepSpan

Array = NDArray[np.float64]

_SAME_SPEED = 1e-9  # relative: rates closer than this are one rate
_SAME_HEIGHT_NM = 1e-6
_MOST_AT_ONCE = 200_000  # pairs of columns times stretches of time looked at together


@frozen
class SlopeSpeeds:
    """How fast sloped ground comes down in one step, at best values.

    slope (Q,): tangents of slope angles, from 0 up; speed_nm_per_s (M, Q): vertical speed of each material's
    surface at each slope, of the side that falls fastest; shadow_tan: how far a shadow reaches, as a multiple of
    the height that throws it; slowest_nm_per_s (M, Q): of the side that falls slowest, where that differs: then
    no slope is known to be the steepest.
    """

    slope: Array
    speed_nm_per_s: Array
    shadow_tan: float
    slowest_nm_per_s: Array | None = None

    def scaled(self, share: float) -> SlopeSpeeds:
        """The same under a share of the current."""
        slowest = None if self.slowest_nm_per_s is None else share * self.slowest_nm_per_s
        return SlopeSpeeds(self.slope, share * self.speed_nm_per_s, self.shadow_tan, slowest)

    @property
    def flat_nm_per_s(self) -> Array:
        """Speeds (M,) of flat ground."""
        return self.speed_nm_per_s[:, 0]

    @cached_property
    def kink_nm_per_s(self) -> Array:
        """(M, Q): the fastest kink of any slope up to each one, max (H(q) - H(0)) / q; 0 for the flat."""
        return self._chords(self.speed_nm_per_s - self.speed_nm_per_s[:, :1])

    @cached_property
    def foot_nm_per_s(self) -> Array:
        """(M, Q): how fast the foot of a slope up to each one spreads over a floor, max (H(0) - H(q)) / q."""
        slowest = self.speed_nm_per_s if self.slowest_nm_per_s is None else self.slowest_nm_per_s
        return self._chords(self.speed_nm_per_s[:, :1] - slowest)

    def _chords(self, rise: Array) -> Array:
        chords = np.zeros_like(rise)
        chords[:, 1:] = rise[:, 1:] / self.slope[1:]
        return np.maximum.accumulate(np.maximum(chords, 0.0), axis=1)

    @cached_property
    def steepest(self) -> NDArray[np.intp]:
        """(M, M): for a material (row) beside a faster one, the first slope at which it keeps up, else the last.

        0 beside one that is not faster. Under a tilted beam steep slopes fall the faster the steeper they are: a
        slope on that branch grows into a wall once its own foot is slow ground, so it counts as one.
        """
        flat = self.flat_nm_per_s
        keeps_up = self.speed_nm_per_s[:, None, :] >= flat[None, :, None]
        if self.slowest_nm_per_s is not None:
            keeps_up = np.zeros_like(keeps_up)
        index = np.where(keeps_up.any(axis=-1), np.argmax(keeps_up, axis=-1), len(self.slope) - 1)
        index = np.where(index > self._last_lowest[:, None], len(self.slope) - 1, index)
        slower = flat[:, None] < flat[None, :] * (1.0 - _SAME_SPEED)
        return np.where(slower, index, 0)

    @property
    def _last_lowest(self) -> NDArray[np.intp]:
        """(M,): the slope beyond which the speed rises all the way to the wall; the last where it never does."""
        rises = np.diff(self.speed_nm_per_s, axis=1) > 0.0
        falls_last = np.argmax(~rises[:, ::-1], axis=1)  # how many rises there are at the end
        all_rise = rises.all(axis=1)
        return np.where(all_rise, 0, len(self.slope) - 1 - falls_last)


class _Pairs:
    """What has happened so far between each column (rows) and each of its neighbours (columns of the arrays).

    travel_nm: how far kinks have come from the neighbour's edge; slope: index of the steepest slope there has
    been; wall: whether a wall stands or stood; all (C, C). height_nm (C,); until_s (C,): the answer so far.
    """

    def __init__(self, distance_nm: Array, sloped: NDArray[np.bool_]) -> None:
        self.distance_nm = distance_nm
        self.travel_nm = np.zeros_like(distance_nm)
        self.slope = np.zeros(distance_nm.shape, dtype=np.intp)
        self.wall = np.zeros(distance_nm.shape, dtype=bool)
        self.height_nm = np.zeros(len(distance_nm))
        self.until_s = np.where(sloped, 0.0, np.inf)

    def jump(self, height_nm: Array) -> None:
        """Take in new heights (C,): where two columns moved differently without a beam, a wall stands."""
        moved = height_nm - self.height_nm
        self.wall |= np.abs(moved[:, None] - moved[None, :]) > _SAME_HEIGHT_NM
        self.height_nm = height_nm

    def fall(self, speeds: SlopeSpeeds, material: NDArray[np.intp], start_s: Array, span_s: Array) -> None:
        """Let all columns fall through K stretches of time, each in one material (K, C), -1: nothing left.

        start_s, span_s (K,): when each stretch begins on the clock, and how long it lasts.
        """
        speed = np.where(material >= 0, speeds.flat_nm_per_s[material], 0.0)
        fallen = np.cumsum(speed * span_s[:, None], axis=0)
        after = self.height_nm - fallen
        height = np.concatenate([self.height_nm[None], after[:-1]])
        below = height[:, :, None] < height[:, None, :]
        both = (material[:, :, None] >= 0) & (material[:, None, :] >= 0)
        steepest = np.where(both, speeds.steepest[material[:, :, None], material[:, None, :]], 0)
        # A wall's top sends its kink into the side that stands; the side below gets the wall's foot.
        steepest = np.where(self.wall & ~below, len(speeds.slope) - 1, steepest)
        slope = np.maximum.accumulate(np.maximum(steepest, self.slope), axis=0)
        kink = speeds.kink_nm_per_s[material[:, :, None], slope]
        # The lower one's floor is met by the foot of whatever slope there is in its neighbour.
        beside = np.where(self.wall, len(speeds.slope) - 1, np.swapaxes(slope, 1, 2))
        low = below | (after[:, :, None] < after[:, None, :])
        foot = np.where(low, speeds.foot_nm_per_s[material[:, :, None], beside], 0.0)
        pace = np.maximum(kink, foot)
        travel = self.travel_nm + np.cumsum(pace * span_s[:, None, None], axis=0)
        self._meet(self.distance_nm - (travel - pace * span_s[:, None, None]), pace, start_s, span_s)
        if speeds.shadow_tan > 0.0:
            above = (height[:, None, :] - height[:, :, None]) * speeds.shadow_tan
            sinking = (speed[:, :, None] - speed[:, None, :]) * speeds.shadow_tan
            self._meet(self.distance_nm - above, sinking, start_s, span_s)
        self.slope, self.travel_nm = slope[-1], travel[-1]
        self.height_nm = self.height_nm - fallen[-1]

    def _meet(self, way_nm: Array, pace_nm_per_s: Array, start_s: Array, span_s: Array) -> None:
        """Note the first moment at which something moving at this pace has covered its way to a centre."""
        with np.errstate(divide="ignore", invalid="ignore"):
            after = np.where(way_nm <= 0.0, 0.0, np.where(pace_nm_per_s > 0.0, way_nm / pace_nm_per_s, np.inf))
        met = np.where(after < span_s[:, None, None], start_s[:, None, None] + after, np.inf)
        self.until_s = np.minimum(self.until_s, met.min(axis=(0, 2)))


def flat_until(
    *,
    sloped: NDArray[np.bool_],
    distance_nm: Array,
    columns: Sequence[Column],
    best: Fall,
    region: int,
    speeds: Sequence[SlopeSpeeds | None],
) -> Array:
    """The clock (C,) at which each column's centre of one region stops being flat and lit: inf where never.

    sloped (C,): columns on a conformal slope, never flat; distance_nm (C, C): from each column's centre to the
    nearest point of each other; columns: as they were at the start (D = 1); best: their fall, with what was
    left after each step; speeds: for each step of the fall, None where it is no beam.
    """
    pairs = _Pairs(distance_nm, sloped)
    if len(columns) == 1:
        return pairs.until_s
    left = [np.array([row[0] for row in column.thickness_nm]) for column in columns]
    for step, span in enumerate(best.spans):
        pairs.jump(np.array([float(thick.sum()) for thick in left]))
        after = [thick[:, 0] for thick in best.left_nm[step][region]]
        beam = speeds[step]
        if beam is not None and any((a != b).any() for a, b in zip(left, after, strict=True)):
            _fall_through(pairs, beam, columns, left, span)
        left = after
    return pairs.until_s


def _fall_through(
    pairs: _Pairs, speeds: SlopeSpeeds, columns: Sequence[Column], left: Sequence[Array], span: StepSpan
) -> None:
    """One beam step, cut wherever any column passes from one material to the next."""
    with np.errstate(divide="ignore"):
        slowness = np.minimum(1.0 / speeds.flat_nm_per_s, NEVER)
    passed = [np.cumsum(thick * slowness[list(c.material)]) for thick, c in zip(left, columns, strict=True)]
    end_s = min(float(span.length_s[0]), max(float(times[-1]) for times in passed))
    moments = np.array(sorted({0.0, *(time for times in passed for time in times.tolist() if time < end_s)}))
    material = np.full((len(moments), len(columns)), -1, dtype=np.intp)
    for c, (times, column) in enumerate(zip(passed, columns, strict=True)):
        segment = np.searchsorted(times, moments, side="right")
        there = segment < len(column.material)
        material[there, c] = np.array(column.material)[segment[there]]
    start, lasts = float(span.start_s[0]) + moments, np.diff(np.append(moments, end_s))
    chunk = max(1, _MOST_AT_ONCE // len(columns) ** 2)
    for k in range(0, len(moments), chunk):
        part = slice(k, k + chunk)
        pairs.fall(speeds, material[part], start[part], lasts[part])
