"""The stack as it lies before it is milled: a section through every region, side by side at one scale."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from stackmill.errors import UsageError
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.relief.gridding import Cut, columns_along
from stackmill.report.plots.canvas import WIDTH_PX, Scale, Unit, blank, fitted, look, panel, unit_for, write_within
from stackmill.report.plots.goals import GoalLevel, goal_in_words, goal_levels, mark_goal
from stackmill.report.plots.names import (
    View,
    feature_places,
    layer_names,
    side_width,
    write_features,
    write_layers,
)
from stackmill.report.plots.paint import break_off, frame, job_styles, legend, legend_height, paint
from stackmill.report.plots.palette import Style
from stackmill.report.plots.slices import Piece, Slice, busiest_cut, pieces, region_slices
from stackmill.report.words import length
from stackmill.timing.plan import Ground, ground

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_ABREAST = 4
_LEFT, _TITLE, _UNDER, _MARGIN = 62.0, 88.0, 62.0, 18.0
_TALLEST, _LEAST, _NARROWEST = 860.0, 330.0, 120.0
_LINE_PX = 14.5
_WORDS_PX = 780.0  # least width, for title and caption
_SUBSTRATE = 0.09  # of the height over the substrate
_ABOVE = 0.03


@frozen
class Sectioned:
    """One region's section: region (number), its line, slices, pieces of material, and the goal's levels."""

    region: int
    cut: Cut
    slices: tuple[Slice, ...]
    pieces: tuple[Piece, ...]
    goal: dict[int, GoalLevel]

    def across_nm(self, job: Job) -> float:
        """The length of the line."""
        return job.column_map.cell[0 if self.cut.along == "x" else 1]


def draw_stack(job: Job, region: str | None = None, cut: Cut | None = None) -> Figure:
    """The stack before milling: every segment of every column along a line across the cell, to scale.

    region: one of the job's, or None for all of them side by side; cut: the line; by default the one that meets the
    goal, if there is one, and the most columns. Raises UsageError for an unknown region or a line outside the cell.
    """
    numbers = _regions(job, region)
    _check(job, cut)
    prepared = ground(job, [np.zeros((len(job.column_map.inputs), 1))] * len(job.column_map.regions))
    shown = [_sectioned(job, prepared, r, cut) for r in numbers]
    with look():
        return _drawn(job, shown)


def _regions(job: Job, region: str | None) -> list[int]:
    names = [one.name for one in job.column_map.regions]
    if region is None:
        return list(range(len(names)))
    if region not in names:
        raise UsageError(f"there is no region {region!r}", cure=f"give one of {', '.join(names)}")
    return [names.index(region)]


def _check(job: Job, cut: Cut | None) -> None:
    if cut is not None and not 0.0 <= cut.at_nm <= job.column_map.cell[0 if cut.fixed == "x" else 1]:
        size = job.column_map.cell[0 if cut.fixed == "x" else 1]
        raise UsageError(f"the line {cut} lies outside the cell", cure=f"{cut.fixed} goes from 0 to {length(size)}")


def _sectioned(job: Job, prepared: Ground, r: int, cut: Cut | None) -> Sectioned:
    region, cell = job.column_map.regions[r], job.column_map.cell
    levels = goal_levels(job, prepared, r)
    line = cut or busiest_cut(region, cell, levels)
    slices = region_slices(region, cell, line)
    bottom = -_SUBSTRATE * max(float(one.top_nm.max()) for one in job.column_map.regions)
    return Sectioned(r, line, tuple(slices), tuple(pieces(slices, bottom_nm=bottom)), levels)


def _drawn(job: Job, shown: list[Sectioned]) -> Figure:
    top = max(float(job.column_map.regions[one.region].top_nm.max()) for one in shown)
    whole = max(float(region.top_nm.max()) for region in job.column_map.regions)
    low, high = -_SUBSTRATE * whole, top + _ABOVE * whole
    across = max(one.across_nm(job) for one in shown)
    unit = unit_for(max(high - low, across))
    sides = [side_width(_all_names(job, one)) for one in shown]
    abreast, room = _abreast(sides)
    lines = -(-len(shown) // abreast)
    layers = max(len({piece.layer for piece in one.pieces}) for one in shown)
    scale = fitted(across, high - low, room, max(_TALLEST, 1.3 * _LINE_PX * layers), max(_LEAST, _LINE_PX * layers))
    tall = scale.up_px_per_nm * (high - low)
    styles = _styles_met(job, shown)
    extra = ["goal"] if any(one.goal for one in shown) else []
    alone = _LEFT + scale.px_per_nm * across + max(sides)
    inner = (WIDTH_PX if abreast > 1 else min(max(alone, _WORDS_PX) + 2.0 * _MARGIN, WIDTH_PX)) - 2.0 * _MARGIN
    under = legend_height([*styles, *extra], _MARGIN, _MARGIN + inner)
    row = _TITLE + tall + _UNDER
    figure = blank(inner + 2.0 * _MARGIN, _MARGIN + 36.0 + lines * row + under)
    write_within(figure, _MARGIN, _MARGIN + 10.0, job.title, 12.0, inner, bold=True)
    write_within(figure, _MARGIN, _MARGIN + 31.0, _caption(job, scale), 9.0, inner, color="#333333")
    left = _MARGIN
    for k, one in enumerate(shown):
        wide = scale.px_per_nm * one.across_nm(job)
        left = _MARGIN + _LEFT if k % abreast == 0 else left + _LEFT
        place = (left, _MARGIN + 36.0 + (k // abreast) * row + _TITLE)
        _panel(figure, job, one, View(one.across_nm(job), low, high, wide, tall), place, unit, first=k % abreast == 0)
        left += room + sides[k]
    legend(figure, _MARGIN + 36.0 + lines * row, _MARGIN, _MARGIN + inner, styles, extra)
    return figure


def _abreast(sides: list[float]) -> tuple[int, float]:
    """How many panels stand beside each other, and how wide (px) each can be beside its names."""
    for abreast in range(min(len(sides), _ABREAST), 0, -1):
        aside = max(sum(sides[k : k + abreast]) for k in range(0, len(sides), abreast))
        room = (WIDTH_PX - 2.0 * _MARGIN - aside) / abreast - _LEFT
        if room >= _NARROWEST:
            return abreast, room
    return 1, _NARROWEST


def _all_names(job: Job, one: Sectioned) -> dict[int, str]:
    """The longest names that a region's layers may get."""
    beside: dict[int, str] = {}
    for number, (layer, name) in enumerate(job.column_map.features):
        if any(piece.feature == number for piece in one.pieces) and len(one.slices) > 1:
            beside[layer] = f"{beside[layer]}, {name}" if layer in beside else name
    return layer_names(job, one.pieces, beside=beside, sizes=True, goal=_goal_layer(job, one))


def _goal_layer(job: Job, one: Sectioned) -> int | None:
    return job.column_map.layers.index(job.goal.layer) if job.goal and one.goal else None


def _styles_met(job: Job, shown: list[Sectioned]) -> dict[str, Style]:
    names, every = job.column_map.materials, job_styles(job)
    met = {piece.material for one in shown for piece in one.pieces}
    return {name: every[name] for k, name in enumerate(names) if k in met}


def _caption(job: Job, scale: Scale) -> str:
    goal = f"; goal: {goal_in_words(job.goal)}" if job.goal else ""
    return f"The stack before milling, best values; {scale.in_words()}, the substrate broken off{goal}"


def _panel(
    figure: Figure, job: Job, one: Sectioned, view: View, place: tuple[float, float], unit: Unit, *, first: bool
) -> None:
    axes = panel(figure, *place, view.width_px, view.height_px)
    names, every = job.column_map.materials, job_styles(job)
    axes.set_xlim(0.0, view.across_nm / unit.nm)
    axes.set_ylim(view.low_nm / unit.nm, view.high_nm / unit.nm)
    frame(axes, unit, heights=first)
    axes.set_xlabel(f"{one.cut.along} ({unit.name})", fontsize=9)
    paint(axes, one.pieces, names, every, unit)
    break_off(axes, view.across_nm, view.low_nm, 7.0 / view.up_px_per_nm, unit)
    inside, beside = feature_places(job, view, one.pieces)
    write_features(axes, inside, names, every, unit)
    goal = _goal_layer(job, one)
    beside_it = layer_names(job, one.pieces, beside=beside, sizes=True, goal=goal)
    write_layers(axes, view, one.pieces, beside_it, goal, unit)
    mark_goal(axes, job, one.slices, one.goal, unit)
    region = job.column_map.regions[one.region]
    left, top = place
    room = view.width_px + 40.0 + side_width(beside_it)
    write_within(figure, left - 40.0, top - 44.0, region.name, 11.0, room, bold=True)
    write_within(figure, left - 40.0, top - 26.0, f"along {one.cut.along} at {one.cut}", 8.5, room, color="#333333")
    note = _unmet(job, one)
    if note:
        write_within(figure, left - 40.0, top - 10.0, note, 8.0, room, color="#555555", style="italic")


def _unmet(job: Job, one: Sectioned) -> str:
    """Features of the region that the line does not meet, and those nobody knows the place of."""
    region = job.column_map.regions[one.region]
    met = {piece.feature for piece in one.pieces}
    there = sorted(set(region.feature.ravel().tolist()) - {-1} - met)
    names = [job.column_map.features[k][1] for k in there]
    if not names:
        return ""
    known = len(columns_along(region, job.column_map.cell, one.cut)) > 0 and not region.placeless.any()
    return f"not on this line: {', '.join(names)}" if known else f"known by share of area only: {', '.join(names)}"
