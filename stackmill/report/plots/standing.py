"""What stands up or is sunk at a moment, written over the surface with its height."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from stackmill.relief.evolve import Frame
from stackmill.relief.measure import Standing, footprints
from stackmill.report.plots.beam import ROOM_PX
from stackmill.report.plots.canvas import Scale, Unit, short, text_px
from stackmill.report.plots.labels import rows
from stackmill.report.plots.names import SIZE, View
from stackmill.report.plots.paint import halo
from stackmill.report.plots.scene import Scene

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_LABEL_PX, _LEADER_PX = 13.0, 14.0
_SAME_PX = 25.0
_MOST_LINES = 3


def label_standing(axes: Axes, scene: Scene, at: Frame, view: View, unit: Unit) -> None:
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
    blocks: list[tuple[list[tuple[str, Standing]], tuple[float, float]]] = []
    for name, one, (s, height) in _standing(scene, at):
        near = [
            block
            for block, (other, _) in blocks
            if block[0][1].kind == one.kind and abs(other - s) * view.px_per_nm < _SAME_PX
        ]
        if near:
            near[0].append((name, one))
        else:
            blocks.append(([(name, one)], (s, height)))
    return [(_text(block), where) for block, where in blocks]


def _text(block: Sequence[tuple[str, Standing]]) -> str:
    """The lines of a block, the highest first."""
    order = sorted(block, key=lambda named: -abs(named[1].height_nm))[:_MOST_LINES]
    return "\n".join(f"{short(name, 24)}: {one.kind} {abs(one.height_nm):.0f} nm" for name, one in order)


def _standing(scene: Scene, at: Frame) -> list[tuple[str, Standing, tuple[float, float]]]:
    """Features that stand up or are sunk: name, measure, and the point (s, height; nm) that shows it.

    The ground over a buried feature is told of only where nothing else stands: the first of them, from the top.
    """
    relief = scene.relief
    features = relief.job.column_map.features
    own = {
        one.feature: one
        for one in footprints(relief.job.column_map.regions[relief.region], relief.run.terrain, features)
    }
    found = []
    for row in relief.rows:
        one = row.standing
        if row.time_s != at.time_s or one.kind == "flush" or one.overshadowed or one.feature not in own:
            continue
        height = np.where(own[one.feature].points[0], np.sign(one.height_nm) * at.height_nm[0], -np.inf)
        top = np.flatnonzero(height >= height.max() - 1.0)
        peak = int(top[len(top) // 2])
        name = features[one.feature][1]
        name = {"gone": f"{name} (gone)", "buried": f"over {name}"}.get(one.state, name)
        found.append((name, one, ((peak + 0.5) * scene.step_nm, float(at.height_nm[0][peak]))))
    bare = [named for named in found if named[1].state != "buried"]
    return bare or found[:1]


def head_px(scene: Scene, chosen: Sequence[int], scale: Scale, up: float) -> float:
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
