"""Features known only by their share of the area: each column that may have one becomes two.

Where such a feature lies is independent of all else in the plan, so shares multiply. Its cap, base and liner
bottoms are carved as in any feature; the liner's sides, whose area nobody knows, are left out.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import Section, feature_section
from stackmill.columns.columns import FILL
from stackmill.columns.curves import SIDE_NM
from stackmill.columns.neighbours import Neighbourhood
from stackmill.columns.rise import Rising
from stackmill.columns.stacked import Stacked, inside, placed
from stackmill.frozen import frozen

Array = NDArray[np.float64]


@frozen
class Split:
    """Columns after the split: of each its area, the number of the column it was, and whether it has a fill."""

    columns: tuple[Stacked, ...]
    area: Array
    origin: NDArray[np.intp]
    placeless: NDArray[np.bool_]

    def neighbourhood(self, near: Neighbourhood) -> Neighbourhood:
        """Centres and distances, from those of the columns before.

        Columns of one origin may touch anywhere: they are as near as two sides of a border, but not at no
        distance, at which a surface of one speed would count as spoilt.
        """
        distance = near.edge_distance_nm[np.ix_(self.origin, self.origin)]
        distance[self.origin[:, None] == self.origin[None, :]] = SIDE_NM
        np.fill_diagonal(distance, np.inf)
        return Neighbourhood(near.centre_nm[self.origin], distance)


def split(columns: Sequence[Stacked], area: Array, rising: Rising) -> Split:
    """Split every column in two in each layer where a pattern density may add a feature to its fill."""
    found = list(zip(columns, area.tolist(), range(len(columns)), [False] * len(columns), strict=True))
    for level in rising.levels:
        number = level.present.density
        if number is None:
            continue
        feature = level.present.layer.features[number]
        section = feature_section(level.present, inside(level, number), rising.inputs)
        share = feature.pattern_density or 0.0
        halves = []
        for column, size, origin, has_fill in found:
            filled = _filled(column, level.present.index, section, rising)
            if filled is None:
                halves.append((column, size, origin, has_fill))
            else:
                halves += [(column, size * (1.0 - share), origin, has_fill), (filled, size * share, origin, True)]
        found = halves
    order = sorted(range(len(found)), key=lambda k: -found[k][1])
    chosen = [found[k] for k in order]
    return Split(
        tuple(column for column, _, _, _ in chosen),
        np.array([size for _, size, _, _ in chosen]),
        np.array([origin for _, _, origin, _ in chosen]),
        np.array([has_fill for _, _, _, has_fill in chosen]),
    )


def _filled(column: Stacked, layer: int, section: Section, rising: Rising) -> Stacked | None:
    """The column with the feature instead of a layer's fill; None where there is no fill."""
    for k, segment in enumerate(column.segments):
        if segment.layer == layer and segment.part == FILL:
            instead = placed(section, layer, segment.shares, rising.inputs)
            return Stacked((*column.segments[:k], *instead, *column.segments[k + 1 :]), column.top, column.slopes)
    return None
