"""Which levels are asked for in a column, and where they lie among its segments.

A level that falls inside segments (half-way down a layer, 300 nm above a feature's floor) is made a boundary
by cutting the segments there, in every draw at its own height, so that falling never has to interpolate.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from stackmill.timing.fall import Column

Array = NDArray[np.float64]
Index = NDArray[np.intp]


@dataclass
class CutColumn:
    """A column being prepared for falling.

    material [K] and thickness_nm [K] (each (D,)): its segments, top down; boundary (S + 1,): where each
    boundary between the original segments now lies; levels: boundaries (D,) of the cuts made so far.
    """

    material: list[int]
    thickness_nm: list[Array]
    area: float
    boundary: Index = field(init=False)
    levels: list[Index] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.boundary = np.arange(len(self.material) + 1)

    def cut(self, first: int, last: int, height_nm: Array) -> int:
        """Cut original segments first..last (inclusive) at a height (D,) above the floor of `last`.

        Gives the index of the new level in `levels`. Heights beyond the segments' own are kept within them.
        """
        top, floor = int(self.boundary[first]), int(self.boundary[last + 1])
        above, below = _split(self.thickness_nm[top:floor], height_nm)
        material, thickness = [], []
        for m, up, down in zip(self.material[top:floor], above, below, strict=True):
            material += [m, m]
            thickness += [up, down]
        self.material[top:floor] = material
        self.thickness_nm[top:floor] = thickness
        self.boundary = _moved(self.boundary, top, floor)
        self.levels = [_moved(level, top, floor) for level in self.levels]
        self.levels.append(_lowest_piece(above, top))
        return len(self.levels) - 1

    def done(self) -> Column:
        """The column, ready to fall."""
        return Column(tuple(self.material), self.thickness_nm, self.area)


def _moved(boundary: Index, top: int, floor: int) -> Index:
    """Where boundaries lie once each segment between `top` and `floor` has been cut in two."""
    inside = top + 2 * (boundary - top)
    return np.where(boundary <= top, boundary, np.where(boundary >= floor, boundary + floor - top, inside))


def _split(thickness_nm: Sequence[Array], height_nm: Array) -> tuple[list[Array], list[Array]]:
    """Each segment's part above and below a height over the last one's floor."""
    above, below = [], []
    floor = sum(thickness_nm[1:], np.zeros_like(height_nm))
    for k, thick in enumerate(thickness_nm):
        down = np.clip(height_nm - floor, 0.0, thick)
        below.append(down)
        above.append(thick - down)
        floor = floor - thickness_nm[k + 1] if k + 1 < len(thickness_nm) else floor
    return above, below


def _lowest_piece(above: Sequence[Array], top: int) -> Index:
    """The boundary under the lowest piece that lies above the level (D,): `top` where nothing does."""
    level = np.full(above[0].shape, top, dtype=np.intp)
    for k, piece in enumerate(above):
        level[piece > 0.0] = top + 2 * k + 1
    return level
