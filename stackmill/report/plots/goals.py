"""Where the goal lies: its levels in each column, and its words."""

from __future__ import annotations

from stackmill.documents.job import Goal
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.timing.plan import Ground, Spot


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
