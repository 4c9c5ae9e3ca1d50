"""The window in words: when to stop, how sure that is, what ends it, and when to look."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from stackmill.documents.recipe import Beam, Process, Strip
from stackmill.planning.stops import StopTable, deciding
from stackmill.planning.windows import FIRST_LOOK_RISK, Window
from stackmill.report.words import percent
from stackmill.units import clock, format_time

if TYPE_CHECKING:
    from stackmill.planning.carrying import SurfaceTimes

_UNRESOLVED = 0.01  # of a region's area: a cell that misses more of it says so
_SAME_S, _SAME_SHARE, _SAME_CHANCE = 10.0, 0.005, 0.02  # moves smaller than these change no plan at the mill


def window_in_words(table: StopTable, window: Window) -> list[str]:
    """The window, line by line."""
    lines = [f"Goal: {goal_name(table)} in {', '.join(goal_regions(table))}, {_goal_level(table)}."]
    lines += _no_window(table, window) if window.exposed_s is None else _safe_window(table, window)
    lines += _look(table, window)
    if window.best_chance > 0.0:
        lines.append(f"  Left standing at the stop: {percent(window.left_standing)} of the goal's area.")
    if window.stop_s is not None:
        lines += _planned_end(table, window.stop_s, window.lost_s)
    return lines + surface_in_words(table, window)


def surface_in_words(table: StopTable, window: Window) -> list[str]:
    """What surfaces made of the window: confirmed, corrected, or why it stays provisional."""
    if table.correction is None:
        if not table.provisional:
            return []
        return [
            "  PROVISIONAL: facets or shadows reach into a column that decides before it does. Leave out --flat"
            " to have a surface put it right."
        ]
    lines = []
    if table.correction.surfaces:
        run = ", ".join(map(_one_surface(table), table.correction.surfaces))
        lines.append(f"  {_moved(table, window)} BY THE SURFACE: {run}.")
        runs = max(surface.runs for surface in table.correction.surfaces)
        lines.append(
            f"  The surface's times at best values are carried to all draws by {runs} draws run on it, good to ±"
            f" {format_time(table.correction.error_s)} (1 sd, held in the chances)."
        )
        lines += _caveats(table, table.correction.surfaces)
    for where, why in table.correction.unsaid:
        if where in deciding(window):
            lines.append(f"  PROVISIONAL: {column_name(table, *where)} decides, and by its own column only: {why}.")
        else:
            lines.append(f"  By its own column only: {column_name(table, *where)}: {why}.")
    return lines


def _caveats(table: StopTable, surfaces: Sequence[SurfaceTimes]) -> list[str]:
    """What the surfaces that were run cannot know."""
    from stackmill.planning.correction import crosses_a_via

    job = table.ensemble.inputs.job
    lines = []
    cells = {s.region for s in surfaces if s.cut is None}
    lines_only = [s for s in surfaces if s.cut is not None and s.region not in cells]
    walls = [s for s in lines_only if s.cut is not None and crosses_a_via(job, s.region, s.cut)]
    tilted = any(isinstance(step, Beam) and step.incidence > 0.0 for step in job.recipe.steps)
    if walls and tilted:
        lines.append("  A section takes a via for a wall, whose shadow is longer: --cell takes it as it is.")
    if lines_only and job.goal and job.goal.clear < 1.0:
        lines.append("  A section speaks for the area by one line across it: --cell weighs all of it.")
    for surface in surfaces:
        if surface.unresolved > _UNRESOLVED:
            name = job.column_map.regions[surface.region].name
            lines.append(
                f"  TOO COARSE: {percent(surface.unresolved)} of {name} lies in films narrower than the cell's grid."
            )
    if any(getattr(step, "seen", None) for step in job.recipe.steps):
        lines.append("  The moments at which the eye stops a step are by columns: where pillars stand, it sees sooner.")
    return lines


def _moved(table: StopTable, window: Window) -> str:
    """Confirmed, or corrected from what."""
    flat = table.flat_window
    assert flat is not None
    if (flat.exposed_s is None) != (window.exposed_s is None):
        was = "no window" if flat.exposed_s is None else "a window"
        return f"CORRECTED (by columns alone there was {was})"
    moves = [abs(window.best_stop_s - flat.best_stop_s)]
    moves += [abs(a - b) for a, b in ((window.exposed_s, flat.exposed_s), (window.lost_s, flat.lost_s)) if a and b]
    small = max(moves) <= max(_SAME_S, _SAME_SHARE * window.best_stop_s)
    if small and abs(window.best_stop_chance - flat.best_stop_chance) <= _SAME_CHANCE:
        return "CONFIRMED"
    return (
        f"CORRECTED (by columns alone: {_at(table, flat, flat.best_stop_s)}, chance"
        f" {chance_text(flat.best_stop_chance)})"
    )


def _one_surface(table: StopTable) -> Callable[[SurfaceTimes], str]:
    regions = table.ensemble.inputs.job.column_map.regions

    def words(surface: SurfaceTimes) -> str:
        name = regions[surface.region].name
        if surface.cut is None:
            once = ", at best values" if surface.runs == 1 else ""
            return f"the cell of {name}, {surface.points} points along x{once}"
        return f"section {surface.cut} of {name}, {surface.points} points"

    return words


def _no_window(table: StopTable, window: Window) -> list[str]:
    if window.exposed_by is None:
        return ["THE GOAL IS NEVER EXPOSED: it stays covered, or the recipe ends before."]
    verdict = "NO STOP SUCCEEDS in any draw: by the time the goal is exposed, something is lost."
    if window.best_chance > 0.0:
        stop = _at(table, window, window.best_stop_s)
        verdict = f"NO SAFE WINDOW at {percent(window.confidence)}: the best stop, {stop}, has a chance of"
        verdict += f" {chance_text(window.best_stop_chance)}."
    return [
        verdict,
        f"  In conflict: {column_name(table, *window.exposed_by)} is exposed last,"
        f" {lost_by(table, window) or 'nothing'} is lost first.",
    ]


def _safe_window(table: StopTable, window: Window) -> list[str]:
    assert window.exposed_s is not None
    assert window.stop_s is not None
    assert window.chance is not None
    assert window.exposed_by is not None
    sure = percent(window.confidence)
    start = _at(table, window, window.exposed_s)
    stop = _at(table, window, window.stop_s) + _after(table, window.stop_s)
    lines = [f"STOP AT {stop}: chance {chance_text(window.chance)}."]
    if window.lost_s is not None:
        wide = format_time(window.lost_s - window.exposed_s)
        lines.append(f"  Window at {sure}: from {start} on, for {wide}.")
        lines.append(f"  LATEST STOP {_at(table, window, window.lost_s)}.")
    elif window.by_eye:
        eye = leg_name(table, window.leg + 1)
        lines.append(f"  Window at {sure}: from {start} until the eye stops {eye!r}; stop there, start no later step.")
    else:
        lines.append(f"  Window at {sure}: from {start} on.")
    lines.append(f"  Exposed last: {column_name(table, *window.exposed_by)}.")
    if window.lost_s is not None:
        lines.append(f"  Lost first: {lost_by(table, window) or 'nothing'}.")
    return lines


def _after(table: StopTable, stop_s: float) -> str:
    """Which strips and processes stand at the very moment of a stop, and come before it."""
    recipe = table.ensemble.inputs.job.recipe
    if not any(isinstance(step, Beam) for step in recipe.steps):
        return ""
    spans = zip(table.ensemble.best.spans, recipe.steps, strict=False)
    names = [repr(s.name) for s, step in spans if isinstance(step, Process | Strip) and s.start_s[0] == stop_s]
    return f", after {' and '.join(names)}" if names and stop_s > 0.0 else ""


def _look(table: StopTable, window: Window) -> list[str]:
    """When to look: in this leg if that is in time, before it if not."""
    lines = []
    if window.lost_before >= FIRST_LOOK_RISK:
        chance = chance_text(window.lost_before)
        if window.leg:
            lines.append(
                f"  LOST BEFORE {leg_name(table, window.leg)!r} is stopped with a chance of {chance}: look earlier."
            )
        else:
            lines.append(f"  LOST FROM THE START with a chance of {chance}: what is to be kept is thinner than that.")
    if window.first_look_s is None:
        return lines
    moment = _at(table, window, window.first_look_s, window.first_look_leg)
    if window.first_look_leg == window.leg and window.first_look_s >= window.best_stop_s:
        return [*lines, f"  Look at the stop. The chance of loss stays under 5 % until {moment}."]
    which = "Next look" if window.first_look_leg else "First look"
    return [*lines, f"  {which} no later than {moment}: until then the chance of loss is under 5 %."]


def _at(table: StopTable, window: Window, time_s: float, leg: int | None = None) -> str:
    """A moment on the clock, and from the last stop by eye where there is one before it."""
    leg = window.leg if leg is None else leg
    if not leg:
        return clock(time_s)
    since = clock(max(time_s - float(table.ensemble.best_outcome.leg_start_s[leg][0]), 0.0))
    return f"{clock(time_s)} ({since} after {leg_name(table, leg)!r} is stopped)"


def chance_text(chance: float) -> str:
    """A chance with two decimals, and never as certain as it is not."""
    if chance >= 0.995:
        return "over 0.99"
    return "under 0.01" if 0.0 < chance < 0.005 else f"{chance:.2f}"


def _planned_end(table: StopTable, stop_s: float, lost_s: float | None) -> list[str]:
    """What the stop means for the recipe: steps left unused, or staying beyond its end."""
    recipe = table.ensemble.inputs.job.recipe
    spans = table.ensemble.best.spans[: len(recipe.steps)]
    # A strip or a process at the very moment of the stop belongs to it: the clock stands while it runs.
    milling = [span for span, step in zip(spans, recipe.steps, strict=True) if isinstance(step, Beam)]
    others = [span for span, step in zip(spans, recipe.steps, strict=True) if isinstance(step, Process | Strip)]
    unused = [span.name for span in milling if span.start_s[0] >= stop_s]
    unused += [span.name for span in others if milling and span.start_s[0] > stop_s]
    if unused:
        return [f"  The stop leaves unused: {', '.join(unused)}."]
    end = float(spans[-1].end_s[0])
    beyond = [
        what for what, time in (("the stop", stop_s), ("the latest stop", lost_s or 0.0)) if time > end * (1 + 1e-9)
    ]
    if not beyond:
        return []
    last = next(span.name for span in reversed(spans) if span.length_s[0] > 0.0)
    lies = "lie" if len(beyond) > 1 else "lies"
    staying = f"staying on means more of {last!r}, with what is covered still covered"
    return [f"  The recipe ends at {clock(end)}; {' and '.join(beyond)} {lies} beyond it: {staying}."]


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
