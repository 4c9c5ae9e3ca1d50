"""The window in words: when to stop, how sure that is, what ends it, and when to look."""

from __future__ import annotations

from stackmill.planning.stops import StopTable
from stackmill.planning.windows import Window
from stackmill.report.words import percent
from stackmill.units import clock, format_time


def window_in_words(table: StopTable, window: Window) -> list[str]:
    """The window, line by line."""
    lines = [f"Goal: {goal_name(table)} in {', '.join(goal_regions(table))}, {_goal_level(table)}."]
    lines += _no_window(table, window) if window.exposed_s is None else _safe_window(table, window)
    if window.first_look_s is not None:
        which = "Next look" if window.leg else "First look"
        lines.append(f"  {which} no later than {_at(table, window, window.first_look_s)}:")
        lines[-1] += " until then the chance of loss is under 5 %."
    if window.best_chance > 0.0:
        lines.append(f"  Left standing at the stop: {percent(window.left_standing)} of the goal's area.")
    if window.stop_s is not None:
        lines += _planned_end(table, window.stop_s)
    if table.provisional:
        lines.append("  PROVISIONAL: a facet or a shadow gets to the centre of a deciding column before; see *.")
    return lines


def _no_window(table: StopTable, window: Window) -> list[str]:
    verdict = "NO STOP SUCCEEDS in any draw: by the time the goal is exposed, something is lost."
    if window.best_chance > 0.0:
        stop = _at(table, window, window.best_stop_s)
        verdict = f"NO SAFE WINDOW at {percent(window.confidence)}: the best stop, {stop}, has a chance of"
        verdict += f" {window.best_chance:.2f}."
    return [
        verdict,
        f"  In conflict: {column_name(table, *window.exposed_by)} is exposed last,"
        f" {lost_by(table, window) or 'nothing'} is lost first.",
    ]


def _safe_window(table: StopTable, window: Window) -> list[str]:
    assert window.exposed_s is not None
    assert window.stop_s is not None
    sure = percent(window.confidence)
    lines = [f"STOP AT {_at(table, window, window.stop_s)}: chance {window.chance:.2f}."]
    if window.lost_s is None:
        lines.append(f"  Window at {sure}: from {clock(window.exposed_s)} on; nothing is lost after it.")
    else:
        wide = format_time(window.lost_s - window.exposed_s)
        lines.append(f"  Window at {sure}: {clock(window.exposed_s)} to {clock(window.lost_s)} ({wide}).")
        lines.append(f"  LATEST STOP {_at(table, window, window.lost_s)}.")
    lines.append(f"  Exposed last: {column_name(table, *window.exposed_by)}.")
    lines.append(f"  Lost first: {lost_by(table, window) or 'nothing'}.")
    return lines


def _at(table: StopTable, window: Window, time_s: float) -> str:
    """A moment on the clock, and from the last stop by eye where there is one before it."""
    if not window.leg:
        return clock(time_s)
    since = clock(max(time_s - window.leg_start_s, 0.0))
    return f"{clock(time_s)} ({since} after {leg_name(table, window.leg)!r} is stopped)"


def _planned_end(table: StopTable, stop_s: float) -> list[str]:
    """What the stop means for the recipe: steps left unused, or staying beyond its end."""
    recipe = table.ensemble.inputs.job.recipe
    spans = table.ensemble.best.spans[: len(recipe.steps)]
    unused = [span.name for span in spans if span.start_s[0] >= stop_s and span.length_s[0] > 0.0]
    if unused:
        return [f"  The stop leaves unused: {', '.join(unused)}."]
    end = float(spans[-1].end_s[0])
    if stop_s > end * (1 + 1e-9):
        return [f"  The recipe itself ends at {clock(end)}: stay on in its last step."]
    return []


def leg_name(table: StopTable, leg: int) -> str:
    """What the stopwatch counts from in a leg: `start`, or the step that the eye stopped."""
    if not leg:
        return "start"
    by_eye = [step.name for step in table.ensemble.inputs.job.recipe.steps if getattr(step, "seen", None)]
    return by_eye[leg - 1]


def goal_name(table: StopTable) -> str:
    """LAYER or LAYER / FEATURE."""
    goal = table.ensemble.inputs.job.goal
    assert goal is not None
    return goal.layer if goal.feature is None else f"{goal.layer} / {goal.feature}"


def goal_regions(table: StopTable) -> list[str]:
    """The regions in which the goal is wanted."""
    regions = table.ensemble.inputs.job.column_map.regions
    return list(dict.fromkeys(regions[r].name for r, _ in table.ensemble.best_outcome.wanted))


def _goal_level(table: StopTable) -> str:
    goal = table.ensemble.inputs.job.goal
    assert goal is not None
    where = "its top" if goal.at.top else f"at {100 * goal.at.fraction:.3g} % ± {goal.at.half_width:.3g} nm"
    return f"{where} clear over {100 * goal.clear:.3g} % of its area"


def column_name(table: StopTable, region: int, column: int) -> str:
    """REGION: SEQUENCE."""
    found = table.ensemble.inputs.job.column_map.regions[region]
    return f"{found.name}: {found.label(column)}"


def lost_by(table: StopTable, window: Window) -> str | None:
    """The column, or the keep in it, that is most often lost first; None where nothing ever is."""
    if window.lost_by is None:
        return None
    name = column_name(table, *window.lost_by)
    if window.lost_keep < 0:
        return name
    keep = table.ensemble.inputs.job.keeps[window.lost_keep]
    what = keep.layer if keep.feature is None else f"{keep.layer} / {keep.feature}"
    return f"{what} to keep at {name}"
