"""A region's columns as a tree: columns that are alike from the top share their segments until they part.

Most columns of a die have their upper layers in common. Each shared segment falls once, for all of them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]
Index = NDArray[np.intp]

NEVER = 1e290  # times beyond this mean that the level is not reached


@frozen
class Column:
    """One column to fall through, in all draws at once.

    material (K,): index of each segment's material, top down; thickness_nm (K, D), or K rows of (D,): columns of a
    region that hold the very same rows share them; area: share of its region.
    """

    material: tuple[int, ...]
    thickness_nm: Array | Sequence[Array]
    area: float = 1.0

    @property
    def draws(self) -> int:
        """How many draws fall at once."""
        return len(self.thickness_nm[0])

    def of_draw(self, draw: int) -> Column:
        """One draw's column (D = 1)."""
        return Column(self.material, [row[draw : draw + 1] for row in self.thickness_nm], self.area)


@dataclass(slots=True)
class _Segment:
    """One shared segment. left_nm (D,): what is still there; passed_s (D,): when its floor was met.

    above: the number of the segment on top of it, -1 at the surface; gone: nothing is left in any draw.
    """

    material: int
    left_nm: Array
    passed_s: Array
    above: int
    gone: bool = False


class SegmentTree:
    """The columns of one region on their way down."""

    def __init__(self, columns: Sequence[Column]) -> None:
        self.draws = columns[0].draws
        self.covered = False
        self.segments: list[_Segment] = []
        rows = [list(column.thickness_nm) for column in columns]  # all alive at once, so that each has its own id
        known: dict[tuple[int, int, int], int] = {}
        self.paths = [self._path(c.material, own, known) for c, own in zip(columns, rows, strict=True)]

    def _path(
        self, materials: Sequence[int], rows: Sequence[Array], known: dict[tuple[int, int, int], int]
    ) -> list[int]:
        """The numbers of a column's segments, top down, new ones made where it parts from those before."""
        path: list[int] = []
        above = -1
        for material, row in zip(materials, rows, strict=True):
            key = (above, material, id(row))
            if key not in known:
                known[key] = len(self.segments)
                self.segments.append(_Segment(material, row.copy(), np.full(len(row), 2 * NEVER), above))
            above = known[key]
            path.append(above)
        return path

    def time_to(self, column: int, above: int, slowness: Array) -> Array:
        """Seconds (D,) from now until `above` segments of a column are gone, at this slowness (M, D)."""
        if self.covered:
            return np.full(self.draws, 2 * NEVER)
        cost = np.zeros(self.draws)
        for number in self.paths[column][:above]:
            segment = self.segments[number]
            if not segment.gone:
                cost += segment.left_nm * slowness[segment.material]
        return cost

    def lower(self, slowness: Array, duration_s: Array, clock_s: Array, counts: bool) -> None:
        """Fall for duration_s (D,) at this slowness (M, D), noting when each floor is met."""
        spent: list[Array | None] = []  # by the floor of each segment; None where no draw gets through it
        for segment in self.segments:
            before = spent[segment.above] if segment.above >= 0 else np.zeros(self.draws)
            if before is None or segment.gone:
                spent.append(before)
                continue
            left, pace = segment.left_nm, slowness[segment.material]
            after = before + left * pace
            through = after <= duration_s
            first_time = through & (segment.passed_s >= NEVER)
            segment.passed_s[first_time] = (clock_s + after if counts else clock_s)[first_time]
            if through.all():
                left[:] = 0.0
                segment.gone = True
            else:
                np.clip((after - duration_s) / pace, 0.0, left, out=left)
            spent.append(after if through.any() else None)

    def strip(self, materials: frozenset[int], clock_s: Array) -> None:
        """Lose the leading segments of these materials, draw by draw."""
        bare: list[NDArray[np.bool_]] = []
        for segment in self.segments:
            open_above = bare[segment.above] if segment.above >= 0 else np.ones(self.draws, dtype=bool)
            if segment.material in materials:
                segment.left_nm[open_above] = 0.0
            through = open_above & (segment.left_nm <= 0.0)
            met = through & (segment.passed_s >= NEVER)
            segment.passed_s[met] = clock_s[met]
            segment.gone = bool(through.all())
            bare.append(through)

    def reach(self, column: int, above: int | Index) -> Array:
        """When the level with `above` segments (one number, or one a draw) over it was reached (D,), inf if never."""
        if isinstance(above, np.ndarray):
            times = np.zeros(self.draws)
            for count in set(above.tolist()):
                times[above == count] = self.reach(column, count)[above == count]
            return times
        if above == 0:
            return np.zeros(self.draws)
        times = self.segments[self.paths[column][above - 1]].passed_s
        return np.where(times >= NEVER, np.inf, times)

    def left_nm(self, column: int) -> Array:
        """What is left of each segment of a column now (K, D), a copy."""
        return np.stack([self.segments[number].left_nm for number in self.paths[column]])
