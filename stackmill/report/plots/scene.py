"""What all panels of a section through time share: what it cuts, which moments, and how much of the height is shown."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.planning.relief import Relief
from stackmill.report.plots.goals import GoalLevel, goal_levels
from stackmill.report.plots.slices import Piece, Slice, pieces, terrain_slices

MOST = 4
"""Panels in one picture."""

_UNDER_SURFACE, _SUBSTRATE = 0.3, 0.09


@frozen
class Scene:
    """What all panels share.

    relief; slices and pieces before milling; step_nm between points; goal: its levels; window (F, 2): lowest and
    highest height shown by each panel (nm); common: whether all show the same.
    """

    relief: Relief
    slices: tuple[Slice, ...]
    pieces: tuple[Piece, ...]
    step_nm: float
    goal: dict[int, GoalLevel]
    window: NDArray[np.float64]
    common: bool

    @property
    def across_nm(self) -> float:
        """The length of the section."""
        return float(self.slices[-1].s_nm[-1])


def chosen_of(count: int) -> list[int]:
    """Which of the frames are drawn: all, or MOST of them from the first to the last."""
    if count <= MOST:
        return list(range(count))
    return sorted({round(k * (count - 1) / (MOST - 1)) for k in range(MOST)})


def scene_of(relief: Relief, chosen: Sequence[int]) -> Scene:
    """The scene of a run at its chosen moments: one window for all where it fits, else one about each surface."""
    terrain = relief.run.terrain
    slices = terrain_slices(relief.job.column_map.regions[relief.region], terrain, row=0)
    across, top = float(slices[-1].s_nm[-1]), float(terrain.top_nm.max())
    floor = -_SUBSTRATE * max(top, 0.25 * across)
    surfaces = [relief.run.frames[k].height_nm[0] for k in chosen]
    lowest = np.array([float(one.min()) for one in surfaces])
    floor = min(floor, float(lowest.min()) - 0.1 * (top - float(lowest.min()))) if lowest.min() < 0.5 * floor else floor
    low = max(lowest.min() - _UNDER_SURFACE * max(top - lowest.min(), 0.4 * across), floor)
    low = floor if low < -0.8 * floor else low
    common = top - low <= 2.4 * across
    if common:
        window = np.tile([low, top], (len(chosen), 1))
    else:
        tall = max(1.2 * across, 1.8 * max(float(np.ptp(one)) for one in surfaces))
        start = np.maximum(lowest - _UNDER_SURFACE * tall, floor)
        window = np.column_stack([start, start + tall])
    goal = goal_levels(relief.job, relief.ensemble.best_ground, relief.region)
    found = pieces(slices, bottom_nm=min(float(window.min()), 0.0))
    return Scene(relief, tuple(slices), tuple(found), terrain.step_nm[1], goal, window, common)
