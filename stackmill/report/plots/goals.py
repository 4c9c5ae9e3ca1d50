"""Where the goal lies: its levels in each column, and its words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from stackmill.documents.job import Goal
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.report.plots.canvas import Unit
from stackmill.report.plots.paint import GOAL, halo
from stackmill.report.plots.slices import Slice
from stackmill.timing.plan import Ground, Spot

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_SAME_NM = 0.5


@frozen
class GoalLevel:
    """The goal in one column: its upper and lower level, in nm over the substrate."""

    upper_nm: float
    lower_nm: float


def goal_levels(job: Job, ground: Ground, region: int) -> dict[int, GoalLevel]:
    """The goal's levels in the wanted columns of a region at best values; none without a goal there."""
    upper = {spot.column: _height_nm(job, ground, spot) for spot in ground.goal_upper if spot.region == region}
    lower = {spot.column: _height_nm(job, ground, spot) for spot in ground.goal_lower if spot.region == region}
    return {column: GoalLevel(high, lower.get(column, high)) for column, high in upper.items()}


def _height_nm(job: Job, ground: Ground, spot: Spot) -> float:
    region = job.column_map.regions[spot.region]
    rows = ground.columns[spot.region][spot.column].thickness_nm
    bottom = float(region.floor_nm[spot.column, int(region.segments[spot.column]) - 1])
    above = spot.above if isinstance(spot.above, int) else int(spot.above.flat[0])
    return bottom + sum(float(row[0]) for row in rows[above:])


def goal_in_words(goal: Goal) -> str:
    """`metal 1 / strap, top`."""
    what = goal.layer if goal.feature is None else f"{goal.layer} / {goal.feature}"
    return f"{what}, {goal.at}"


def mark_goal(axes: Axes, job: Job, slices: Sequence[Slice], levels: Mapping[int, GoalLevel], unit: Unit) -> None:
    """A dashed line at the goal's level over every stretch it is wanted on; a band by both its ends."""
    is_band = job.goal is not None and not job.goal.at.top
    for start, end, level in _stretches(slices, levels):
        if is_band:
            axes.fill_between(
                [start / unit.nm, end / unit.nm], level.lower_nm / unit.nm, level.upper_nm / unit.nm,
                color=GOAL, alpha=0.18, lw=0.0, zorder=6.5,
            )  # fmt: skip
        for height in (level.upper_nm, level.lower_nm) if is_band else (level.upper_nm,):
            axes.plot(
                [start / unit.nm, end / unit.nm], [height / unit.nm] * 2, color=GOAL, lw=1.2 if is_band else 1.8,
                ls=(0, (5, 2)), zorder=7, path_effects=halo(2.4 if is_band else 3.4), dash_capstyle="butt",
            )  # fmt: skip


def _stretches(slices: Sequence[Slice], levels: Mapping[int, GoalLevel]) -> list[tuple[float, float, GoalLevel]]:
    """Where the goal is wanted, neighbours at one level joined: start and end (nm), and the level."""
    found: list[tuple[float, float, GoalLevel]] = []
    for one in slices:
        if one.column not in levels:
            continue
        level, start, end = levels[one.column], float(one.s_nm[0]), float(one.s_nm[-1])
        if found and abs(found[-1][1] - start) < _SAME_NM and abs(found[-1][2].upper_nm - level.upper_nm) < _SAME_NM:
            found[-1] = (found[-1][0], end, level)
        else:
            found.append((start, end, level))
    return found
