"""The section through time: what is left under the surface at each moment, and what was there before."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from stackmill.errors import NoAnswerError, UsageError
from stackmill.frozen import frozen
from stackmill.planning.relief import Relief
from stackmill.relief.evolve import Frame
from stackmill.relief.measure import FLUSH_NM, Standing, footprints
from stackmill.report.plots.beam import ROOM_PX, beam_in_words, draw_beam, step_at
from stackmill.report.plots.canvas import WIDTH_PX, Scale, Unit, blank, fitted, look, panel, text_px, unit_for, write
from stackmill.report.plots.goals import GoalLevel, goal_in_words, goal_levels, mark_goal
from stackmill.report.plots.labels import rows
from stackmill.report.plots.names import (
    SIZE,
    View,
    feature_places,
    layer_names,
    side_width,
    write_features,
    write_layers,
)
from stackmill.report.plots.paint import break_off, frame, halo, haunt, job_styles, legend, legend_height, paint
from stackmill.report.plots.palette import Style
from stackmill.report.plots.slices import Piece, Slice, pieces, terrain_slices
from stackmill.report.words import percent
from stackmill.units import format_time

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST = 4
"""Panels in one picture."""

_LEFT, _TITLE, _UNDER, _MARGIN, _HEADING, _GAP = 58.0, 62.0, 52.0, 18.0, 56.0, 16.0
_TALLEST, _LEAST, _NARROW = 1240.0, 210.0, 0.27
_LABEL_PX, _LEADER_PX = 13.0, 14.0
_HEAD_PX = ROOM_PX + _LEADER_PX + 2.0 * _LABEL_PX
_UNDER_SURFACE, _SUBSTRATE = 0.3, 0.09
_ONE_ROW, _TITLE_PX, _NARROWEST_PX = 1.35, 300.0, 860.0
_EARLIER = 8
_SAME_PX = 25.0


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


def draw_section(relief: Relief) -> Figure:
    """The section at up to four of its moments: what is left, what has gone, the beam, and what stands up.

    Raises UsageError for a cell, and NoAnswerError for a run that was stopped before its first moment.
    """
    if relief.cut is None:
        raise UsageError("the whole cell was run: it has no section to draw", cure="draw the cell, or run a section")
    if not relief.run.frames:
        raise NoAnswerError("the run was stopped before the first moment asked for: there is nothing to draw")
    chosen = _chosen(len(relief.run.frames))
    with look():
        return _drawn(_scene(relief, chosen), chosen)


def _chosen(count: int) -> list[int]:
    """Which of the frames are drawn: all, or MOST of them from the first to the last."""
    if count <= MOST:
        return list(range(count))
    return sorted({round(k * (count - 1) / (MOST - 1)) for k in range(MOST)})


def _scene(relief: Relief, chosen: Sequence[int]) -> Scene:
    terrain = relief.run.terrain
    slices = terrain_slices(relief.job.column_map.regions[relief.region], terrain, row=0)
    across, top = float(slices[-1].s_nm[-1]), float(terrain.top_nm.max())
    floor = -_SUBSTRATE * max(top, 0.25 * across)
    surfaces = [relief.run.frames[k].height_nm[0] for k in chosen]
    lowest = np.array([float(one.min()) for one in surfaces])
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


def _drawn(scene: Scene, chosen: Sequence[int]) -> Figure:
    relief, n = scene.relief, len(chosen)
    up = float(np.max(scene.window[:, 1] - scene.window[:, 0]))
    side = side_width(layer_names(scene.relief.job, _seen(scene), beside=_all_beside(scene), sizes=False))
    plans = [_plan(scene, n, abreast, up, side) for abreast in sorted({n, -(-n // 2), 1}, reverse=True)]
    abreast, scale = _best(plans)
    wide = scale.px_per_nm * scene.across_nm
    tall = scale.up_px_per_nm * up + _head_px(scene, chosen, scale, up)
    lines, styles = -(-n // abreast), _styles_met(scene)
    extra = ["the surface", "earlier surfaces", "milled or stripped off", *(["goal"] if _goal_met(scene) else [])]
    caption = _caption(scene, scale, chosen)
    slot = _LEFT + max(wide, _TITLE_PX - 40.0) + _GAP + (0.0 if scene.common else side)
    aside = side if scene.common else 0.0
    slot = min(slot + 10.0, (WIDTH_PX - 2.0 * _MARGIN - aside) / abreast)
    words = max(text_px(relief.job.title, 12.0, True)[0], text_px(caption, 9.0)[0], _NARROWEST_PX)
    across = min(max(abreast * slot + aside, words) + 2.0 * _MARGIN, WIDTH_PX)
    row = _TITLE + tall + _UNDER
    under = legend_height([*styles, *extra], _MARGIN, across - _MARGIN)
    figure = blank(across, _MARGIN + _HEADING + lines * row + under)
    write(figure, _MARGIN, _MARGIN + 10.0, relief.job.title, 12.0, bold=True)
    write(figure, _MARGIN, _MARGIN + 31.0, caption, 9.0, color="#333333")
    unit = unit_for(max(scene.across_nm, float(scene.window.max())))
    for k, number in enumerate(chosen):
        left = _MARGIN + (k % abreast) * slot + _LEFT
        top = _MARGIN + _HEADING + (k // abreast) * row + _TITLE
        low = float(scene.window[k, 0])
        view = View(scene.across_nm, low, low + tall / scale.up_px_per_nm, wide, tall)
        named = not scene.common or k % abreast == abreast - 1 or k == n - 1
        _panel(figure, scene, number, view, (left, top), unit, first=k % abreast == 0, named=named)
    legend(figure, _MARGIN + _HEADING + lines * row, _MARGIN, across - _MARGIN, styles, extra)
    return figure


def _plan(scene: Scene, n: int, abreast: int, up: float, side: float) -> tuple[int, Scale]:
    """How large panels get with so many abreast."""
    lines = -(-n // abreast)
    aside = side if scene.common else abreast * side
    room = (WIDTH_PX - 2.0 * _MARGIN - aside) / abreast - _LEFT - _GAP
    high = _TALLEST / lines - _HEAD_PX - _TITLE - _UNDER
    return abreast, fitted(scene.across_nm, up, room, max(high, 60.0), min(_LEAST, _NARROW * room))


def _head_px(scene: Scene, chosen: Sequence[int], scale: Scale, up: float) -> float:
    """The room (px) over the window that labels and beam need."""
    need = 4.0
    for (low, high), number in zip(scene.window.tolist(), chosen, strict=True):
        at = scene.relief.run.frames[number]
        view = View(scene.across_nm, low, high, scale.px_per_nm * scene.across_nm, scale.up_px_per_nm * up)
        blocks = _blocks(scene, at, view)
        if blocks:
            sizes = _sizes(blocks)
            places = rows([s * view.px_per_nm for _, (s, _) in blocks], [one[0] for one in sizes], 2.0, view.width_px)
            high_px = (max(row for row, _ in places) + 1) * max(one[1] for one in sizes) + _LEADER_PX
            need = max(need, high_px - (low + up - float(at.height_nm.max())) * scale.up_px_per_nm)
    return ROOM_PX + need


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
        goal = job.column_map.layers.index(job.goal.layer) if job.goal and _goal_met(scene) else None
        beside_it = layer_names(job, scene.pieces, beside=beside, sizes=False, goal=goal)
        write_layers(axes, view, scene.pieces, beside_it, goal, unit)
    step = step_at(scene.relief, at.time_s)
    if step is not None:
        draw_beam(axes, view, step, scene.relief, unit)
    _label_standing(axes, scene, at, view, unit)
    moment = scene.relief.moments[number]
    x, y = place[0] - 40.0, place[1]
    write(
        figure, x, y - 50.0, f"after {format_time(at.time_s)}" if at.time_s > 0.0 else "at the start", 11.0, bold=True
    )
    write(figure, x, y - 32.0, beam_in_words(step), 8.5, color="#333333")
    clear = "" if moment.clear_share is None else f", goal {percent(moment.clear_share)} clear"
    write(figure, x, y - 16.0, f"relief {moment.relief_nm:.0f} nm{clear}", 8.5, color="#333333")


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


def _label_standing(axes: Axes, scene: Scene, at: Frame, view: View, unit: Unit) -> None:
    """What stands up or is sunk, with its height, over the surface and with a line to its highest or lowest point."""
    blocks = _blocks(scene, at, view)
    places = rows([s * view.px_per_nm for _, (s, _) in blocks], [one[0] for one in _sizes(blocks)], 2.0, view.width_px)
    above = (float(at.height_nm.max()) - view.low_nm) * view.up_px_per_nm + _LEADER_PX
    for (text, (s, height)), (row, middle) in zip(blocks, places, strict=True):
        x = middle / view.px_per_nm / unit.nm
        under = [one[1] for one, (other, _) in zip(_sizes(blocks), places, strict=True) if other < row]
        y = (view.low_nm + (above + row * max(under, default=0.0)) / view.up_px_per_nm) / unit.nm
        axes.plot([s / unit.nm, x], [height / unit.nm, y], color="#222222", lw=0.8, zorder=7.5, path_effects=halo())
        axes.text(
            x, y, text, fontsize=SIZE, ha="center", va="bottom", zorder=9, linespacing=1.1, path_effects=halo(3.0),
            clip_on=False,
        )  # fmt: skip


def _sizes(blocks: Sequence[tuple[str, tuple[float, float]]]) -> list[tuple[float, float]]:
    return [(text_px(text, SIZE)[0] + 12.0, (text.count("\n") + 1) * _LABEL_PX + 3.0) for text, _ in blocks]


def _blocks(scene: Scene, at: Frame, view: View) -> list[tuple[str, tuple[float, float]]]:
    """Labels, one line a feature and one block a place, with the point (s, height; nm) they belong to."""
    blocks: list[tuple[str, str, tuple[float, float]]] = []
    for name, one, (s, height) in _standing(scene, at):
        text = f"{name}: {one.kind} {abs(one.height_nm):.0f} nm"
        near = [
            k
            for k, (_, kind, (other, _)) in enumerate(blocks)
            if kind == one.kind and abs(other - s) * view.px_per_nm < _SAME_PX
        ]
        if near:
            before, kind, where = blocks[near[0]]
            blocks[near[0]] = (f"{before}\n{text}", kind, where)
        else:
            blocks.append((text, one.kind, (s, height)))
    return [(text, where) for text, _, where in blocks]


def _standing(scene: Scene, at: Frame) -> list[tuple[str, Standing, tuple[float, float]]]:
    """Features that stand up or are sunk: name, measure, and the point (s, height; nm) that shows it."""
    relief = scene.relief
    features = relief.job.column_map.features
    own = {
        one.feature: one
        for one in footprints(relief.job.column_map.regions[relief.region], relief.run.terrain, features)
    }
    found = []
    for row in relief.rows:
        one = row.standing
        if row.time_s != at.time_s or abs(one.height_nm) < FLUSH_NM or one.feature not in own:
            continue
        height = np.where(own[one.feature].points[0], np.sign(one.height_nm) * at.height_nm[0], -np.inf)
        top = np.flatnonzero(height >= height.max() - 1.0)
        peak = int(top[len(top) // 2])
        name = features[one.feature][1] + (" (gone)" if one.state == "gone" else "")
        found.append((name, one, ((peak + 0.5) * scene.step_nm, float(at.height_nm[0][peak]))))
    return found
