"""How long is *Down* to be trusted? Until the facets from a column's edges reach its centre, or a shadow does.

Where neighbours fall at different speeds, a step appears, and from its edge a facet walks into the slower one.
At best values every pair of columns is followed: how fast the facet's kink moves (from the slow material's own
vertical speed on a slope), how far it has come, and whether that is the way to the centre yet.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from stackmill.timing.fall import NEVER, Column, Fall

Array = NDArray[np.float64]

_SAME_SPEED = 1e-9  # relative: rates closer than this are one rate
_SAME_HEIGHT_NM = 1e-6


@dataclass(frozen=True)
class SlopeSpeeds:
    """How fast sloped ground comes down in one step, at best values.

    slope (Q,): tangents of slope angles, from 0 up; speed_nm_per_s (M, Q): vertical speed of each material's
    surface at each slope; shadow_tan: how far a shadow reaches, as a multiple of the height that throws it;
    any_slope: the speeds differ with the side a slope faces, so that no slope is known to be the steepest.
    """

    slope: Array
    speed_nm_per_s: Array
    shadow_tan: float
    any_slope: bool = False

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
        """(M,): how fast the foot of a standing wall spreads over a floor, max (H(0) - H(q)) / q."""
        return np.asarray(self._chords(self.speed_nm_per_s[:, :1] - self.speed_nm_per_s)[:, -1])

    def _chords(self, rise: Array) -> Array:
        chords = np.zeros_like(rise)
        chords[:, 1:] = rise[:, 1:] / self.slope[1:]
        return np.maximum.accumulate(np.maximum(chords, 0.0), axis=1)

    def slope_index(self, slow: NDArray[np.intp], fast_nm_per_s: Array) -> NDArray[np.intp]:
        """For pairs: the first slope at which `slow` material falls as fast as its neighbour, else the last."""
        keeps_up = self.speed_nm_per_s[slow] >= fast_nm_per_s[..., None]
        if self.any_slope:
            keeps_up = np.zeros_like(keeps_up)
        index = np.argmax(keeps_up, axis=-1)
        return np.where(keeps_up.any(axis=-1), index, len(self.slope) - 1)


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

    def fall(
        self, speeds: SlopeSpeeds, material: NDArray[np.intp], speed: Array, start_s: float, span_s: float
    ) -> None:
        """Let all columns fall for span_s, each in one material and at one speed (C,), from start_s on the clock."""
        other = np.broadcast_to(speed[None, :], self.slope.shape)
        slower = other > speed[:, None] * (1.0 + _SAME_SPEED)
        own = np.broadcast_to(material[:, None], self.slope.shape)
        steepest = np.where(slower, speeds.slope_index(own, other), 0)
        last = len(speeds.slope) - 1
        below = self.height_nm[:, None] < self.height_nm[None, :]
        # A wall's top sends its kink into the side that stands; the side below gets the wall's foot.
        self.slope = np.maximum(self.slope, np.where(self.wall & ~below, last, steepest))
        kink = speeds.kink_nm_per_s[own, self.slope]
        foot = np.where(self.wall & below, speeds.foot_nm_per_s[own], 0.0)
        pace = np.maximum(kink, foot)
        drop = speed * span_s
        self._meet(self.distance_nm - self.travel_nm, pace, start_s, span_s)
        if speeds.shadow_tan > 0.0:
            above = (self.height_nm[None, :] - self.height_nm[:, None]) * speeds.shadow_tan
            self._meet(self.distance_nm - above, (speed[:, None] - other) * speeds.shadow_tan, start_s, span_s)
        self.travel_nm += pace * span_s
        self.height_nm = self.height_nm - drop

    def _meet(self, way_nm: Array, pace_nm_per_s: Array, start_s: float, span_s: float) -> None:
        """Note the first moment at which something moving at this pace has covered its way to a centre."""
        with np.errstate(divide="ignore", invalid="ignore"):
            after = np.where(way_nm <= 0.0, 0.0, np.where(pace_nm_per_s > 0.0, way_nm / pace_nm_per_s, np.inf))
        met = np.min(np.where(after < span_s, start_s + after, np.inf), axis=1)
        self.until_s = np.minimum(self.until_s, met)


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
    left = [column.thickness_nm[:, 0] for column in columns]
    for step, span in enumerate(best.spans):
        pairs.jump(np.array([float(thick.sum()) for thick in left]))
        after = [thick[:, 0] for thick in best.left_nm[step][region]]
        beam = speeds[step]
        if beam is not None and any((a != b).any() for a, b in zip(left, after, strict=True)):
            _fall_through(pairs, beam, columns, left, float(span.start_s[0]), float(span.length_s[0]))
        left = after
    return pairs.until_s


def _fall_through(
    pairs: _Pairs,
    speeds: SlopeSpeeds,
    columns: Sequence[Column],
    left: Sequence[Array],
    start_s: float,
    span_s: float,
) -> None:
    """One beam step, cut wherever any column passes from one material to the next."""
    with np.errstate(divide="ignore"):
        slowness = np.minimum(1.0 / speeds.flat_nm_per_s, NEVER)
    passed = [np.cumsum(thick * slowness[list(c.material)]) for thick, c in zip(left, columns, strict=True)]
    moments = np.array(sorted({0.0, *(float(time) for times in passed for time in times)}))
    moments = moments[moments < min(span_s, NEVER)]
    ends = np.append(moments[1:], min(span_s, float(max(p[-1] for p in passed))))
    for begin, end in zip(moments.tolist(), ends.tolist(), strict=True):
        segment = [int(np.searchsorted(p, begin, side="right")) for p in passed]
        gone = np.array([k >= len(c.material) for k, c in zip(segment, columns, strict=True)])
        material = np.array([c.material[min(k, len(c.material) - 1)] for k, c in zip(segment, columns, strict=True)])
        speed = np.where(gone, 0.0, speeds.flat_nm_per_s[material])
        pairs.fall(speeds, material, speed, start_s + begin, end - begin)
