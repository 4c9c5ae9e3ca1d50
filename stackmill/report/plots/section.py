"""The section through time: what is left under the surface at each moment, and what was there before."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from stackmill.errors import NoAnswerError, UsageError
from stackmill.planning.relief import Relief
from stackmill.relief.evolve import Frame
from stackmill.report.plots.beam import ROOM_PX, beam_in_words, draw_beam, step_at
from stackmill.report.plots.canvas import (
    WIDTH_PX,
    Scale,
    Unit,
    blank,
    fitted,
    look,
    panel,
    text_px,
    unit_for,
    write,
    write_within,
)
from stackmill.report.plots.goals import goal_in_words, mark_goal
from stackmill.report.plots.names import (
    View,
    feature_places,
    layer_names,
    side_width,
    write_features,
    write_layers,
)
from stackmill.report.plots.paint import break_off, frame, haunt, job_styles, legend, legend_height, paint
from stackmill.report.plots.palette import Style
from stackmill.report.plots.scene import Scene, chosen_of, scene_of
from stackmill.report.plots.slices import Piece, pieces
from stackmill.report.plots.standing import head_px, label_standing
from stackmill.report.words import percent
from stackmill.units import format_time

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_LEFT, _TITLE, _UNDER, _MARGIN, _HEADING, _GAP = 58.0, 62.0, 52.0, 18.0, 56.0, 16.0
_TALLEST, _LEAST, _NARROW = 1240.0, 210.0, 0.27
_HEAD_PX = ROOM_PX + 40.0
_ONE_ROW, _TITLE_PX, _NARROWEST_PX = 1.35, 300.0, 860.0
_EARLIER = 8


def draw_section(relief: Relief) -> Figure:
    """The section at up to four of its moments: what is left, what has gone, the beam, and what stands up.

    Raises UsageError for a cell, and NoAnswerError for a run that was stopped before its first moment.
    """
    if relief.cut is None:
        raise UsageError("the whole cell was run: it has no section to draw", cure="draw the cell, or run a section")
    if not relief.run.frames:
        raise NoAnswerError("the run was stopped before the first moment asked for: there is nothing to draw")
    chosen = chosen_of(len(relief.run.frames))
    with look():
        return _drawn(scene_of(relief, chosen), chosen)


def _drawn(scene: Scene, chosen: Sequence[int]) -> Figure:
    relief, n = scene.relief, len(chosen)
    up = float(np.max(scene.window[:, 1] - scene.window[:, 0]))
    side = side_width(
        layer_names(scene.relief.job, _seen(scene), beside=_all_beside(scene), sizes=False, goal=_goal_layer(scene))
    )
    plans = [_plan(scene, n, abreast, up, side) for abreast in sorted({n, -(-n // 2), 1}, reverse=True)]
    abreast, scale = _best(plans)
    wide = scale.px_per_nm * scene.across_nm
    tall = scale.up_px_per_nm * up + head_px(scene, chosen, scale, up)
    lines, styles = -(-n // abreast), _styles_met(scene)
    earlier = ["earlier surfaces"] if chosen[-1] > 0 else []
    extra = ["the surface", *earlier, "milled or stripped off", *(["goal"] if _goal_met(scene) else [])]
    caption = _caption(scene, scale, chosen)
    slot = _LEFT + max(wide, _TITLE_PX - 40.0) + _GAP + (0.0 if scene.common else side)
    aside = side if scene.common else 0.0
    slot = min(slot + 10.0, (WIDTH_PX - 2.0 * _MARGIN - aside) / abreast)
    words = max(text_px(relief.job.title, 12.0, True)[0], text_px(caption, 9.0)[0], _NARROWEST_PX)
    across = min(max(abreast * slot + aside, words) + 2.0 * _MARGIN, WIDTH_PX)
    row = _TITLE + tall + _UNDER
    under = legend_height([*styles, *extra], _MARGIN, across - _MARGIN)
    figure = blank(across, _MARGIN + _HEADING + lines * row + under)
    write_within(figure, _MARGIN, _MARGIN + 10.0, relief.job.title, 12.0, across - 2.0 * _MARGIN, bold=True)
    write_within(figure, _MARGIN, _MARGIN + 31.0, caption, 9.0, across - 2.0 * _MARGIN, color="#333333")
    unit = unit_for(max(scene.across_nm, float(scene.window.max())))
    for k, number in enumerate(chosen):
        left = _MARGIN + (k % abreast) * slot + _LEFT
        top = _MARGIN + _HEADING + (k // abreast) * row + _TITLE
        low = float(scene.window[k, 0])
        view = View(scene.across_nm, low, low + tall / scale.up_px_per_nm, wide, tall)
        named = not scene.common or k % abreast == abreast - 1 or k == n - 1
        _panel(figure, scene, number, view, (left, top), unit, first=k % abreast == 0, named=named, room=slot - 14.0)
    legend(figure, _MARGIN + _HEADING + lines * row, _MARGIN, across - _MARGIN, styles, extra)
    return figure


def _plan(scene: Scene, n: int, abreast: int, up: float, side: float) -> tuple[int, Scale]:
    """How large panels get with so many abreast."""
    lines = -(-n // abreast)
    aside = side if scene.common else abreast * side
    room = (WIDTH_PX - 2.0 * _MARGIN - aside) / abreast - _LEFT - _GAP
    high = _TALLEST / lines - _HEAD_PX - _TITLE - _UNDER
    return abreast, fitted(scene.across_nm, up, room, max(high, 60.0), min(_LEAST, _NARROW * room))


def _best(plans: Sequence[tuple[int, Scale]]) -> tuple[int, Scale]:
    """The plan that is truest to shape, then the largest; one with more panels abreast if it is nearly as large."""
    least = min(scale.times for _, scale in plans)
    true = [plan for plan in plans if plan[1].times == least]
    largest = max(scale.px_per_nm for _, scale in true)
    return next(plan for plan in true if plan[1].px_per_nm * _ONE_ROW >= largest)


def _seen(scene: Scene) -> list[Piece]:
    low, high = float(scene.window[:, 0].min()), float(scene.window[:, 1].max())
    return [piece for piece in scene.pieces if piece.top_nm.max() > low and piece.floor_nm.min() < high]


def _all_beside(scene: Scene) -> dict[int, str]:
    beside: dict[int, str] = {}
    for number, (layer, name) in enumerate(scene.relief.job.column_map.features):
        own = [piece for piece in _seen(scene) if piece.feature == number]
        if own and max(piece.width_nm for piece in own) < 0.3 * scene.across_nm:
            beside[layer] = f"{beside[layer]}, {name}" if layer in beside else name
    return beside


def _styles_met(scene: Scene) -> dict[str, Style]:
    job = scene.relief.job
    met, every = {piece.material for piece in _seen(scene)}, job_styles(job)
    return {name: every[name] for k, name in enumerate(job.column_map.materials) if k in met}


def _goal_met(scene: Scene) -> bool:
    return any(one.column in scene.goal for one in scene.slices)


def _goal_layer(scene: Scene) -> int | None:
    job = scene.relief.job
    return job.column_map.layers.index(job.goal.layer) if job.goal and _goal_met(scene) else None


def _caption(scene: Scene, scale: Scale, chosen: Sequence[int]) -> str:
    relief = scene.relief
    assert relief.cut is not None
    region = relief.job.column_map.regions[relief.region].name
    shape = scale.in_words() if scale.times == 1.0 else f"heights, and the beam with them, drawn {scale.times:g} x"
    parts = [f"{region}, section along {relief.cut.along} at {relief.cut}", shape]
    if relief.job.goal and _goal_met(scene):
        parts.append(f"goal: {goal_in_words(relief.job.goal)}")
    if len(chosen) < len(relief.run.frames):
        parts.append(f"{len(chosen)} of {len(relief.run.frames)} moments")
    return "; ".join(parts)


def _panel(
    figure: Figure,
    scene: Scene,
    number: int,
    view: View,
    place: tuple[float, float],
    unit: Unit,
    *,
    first: bool,
    named: bool,
    room: float,
) -> None:
    job, at = scene.relief.job, scene.relief.run.frames[number]
    names, every = job.column_map.materials, job_styles(job)
    axes = panel(figure, *place, view.width_px, view.height_px)
    axes.set_xlim(0.0, view.across_nm / unit.nm)
    axes.set_ylim(view.low_nm / unit.nm, view.high_nm / unit.nm)
    frame(axes, unit, heights=first)
    assert scene.relief.cut is not None
    axes.set_xlabel(f"{scene.relief.cut.along} ({unit.name})", fontsize=9, labelpad=2)
    haunt(axes, scene.pieces, names, every, unit)
    surface = (at.height_nm[0], scene.step_nm)
    left = pieces(scene.slices, bottom_nm=view.low_nm, surface=surface)
    paint(axes, left, names, every, unit)
    _surfaces(axes, scene, number, unit)
    if view.low_nm < 0.0:
        break_off(axes, view.across_nm, view.low_nm, 6.0 / view.up_px_per_nm, unit)
    inside, beside = feature_places(job, view, left)
    write_features(axes, inside, names, every, unit)
    mark_goal(axes, job, scene.slices, scene.goal, unit)
    if named:
        goal = _goal_layer(scene)
        beside_it = layer_names(job, scene.pieces, beside=beside, sizes=False, goal=goal)
        write_layers(axes, _without_head(scene, view), scene.pieces, beside_it, goal, unit)
    step = step_at(scene.relief, at.time_s)
    if step is not None:
        draw_beam(axes, view, step, scene.relief, unit)
    label_standing(axes, scene, at, view, unit)
    moment = scene.relief.moments[number]
    x, y = place[0] - 40.0, place[1]
    write(
        figure, x, y - 50.0, f"after {format_time(at.time_s)}" if at.time_s > 0.0 else "at the start", 11.0, bold=True
    )
    write_within(figure, x, y - 32.0, beam_in_words(step), 8.5, room, color="#333333")
    clear = "" if moment.clear_share is None else f", goal {percent(moment.clear_share)} clear"
    write(figure, x, y - 16.0, f"relief {moment.relief_nm:.0f} nm{clear}", 8.5, color="#333333")


def _without_head(scene: Scene, view: View) -> View:
    """The part of a panel under its head room, where all panels show the same."""
    if not scene.common:
        return view
    high = float(scene.window[0, 1])
    return View(view.across_nm, view.low_nm, high, view.width_px, (high - view.low_nm) * view.up_px_per_nm)


def _surfaces(axes: Axes, scene: Scene, number: int, unit: Unit) -> None:
    """The surface at a moment, and thinner those of the moments before."""
    frames = scene.relief.run.frames
    before = frames[:number]
    if len(before) > _EARLIER:
        before = tuple(before[round(k * (len(before) - 1) / (_EARLIER - 1))] for k in range(_EARLIER))
    for one in before:
        axes.plot(*_line(scene, one, unit), color="#55595e", lw=0.8, zorder=4)
    axes.plot(*_line(scene, frames[number], unit), color="black", lw=1.6, zorder=5, solid_joinstyle="round")


def _line(scene: Scene, one: Frame, unit: Unit) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    height, step = one.height_nm[0], scene.step_nm
    ends = 0.5 * (height[0] + height[-1])
    s = np.concatenate([[0.0], (np.arange(len(height)) + 0.5) * step, [len(height) * step]])
    return s / unit.nm, np.concatenate([[ends], height, [ends]]) / unit.nm
