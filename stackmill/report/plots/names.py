"""Names written on a section: layers at its side, features inside or, where they are too small, beside their layer."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np

from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.report.plots.canvas import Unit, short, text_px
from stackmill.report.plots.labels import spread
from stackmill.report.plots.paint import FAINT, GOAL, halo
from stackmill.report.plots.palette import Style
from stackmill.report.plots.slices import Piece
from stackmill.report.words import length

if TYPE_CHECKING:
    from matplotlib.axes import Axes

SIZE = 8.0
_LINE_PX = 14.0
_LEADER_PX = 16.0
_SUBSTRATE_SHOWN = 1e4  # nm; a thicker last layer is drawn broken off and told by its name alone


@frozen
class View:
    """What part of a section a panel shows (nm), and how many pixels it has for it."""

    across_nm: float
    low_nm: float
    high_nm: float
    width_px: float
    height_px: float

    @property
    def px_per_nm(self) -> float:
        """Pixels for each nm along the section."""
        return self.width_px / self.across_nm

    @property
    def up_px_per_nm(self) -> float:
        """Pixels for each nm of height."""
        return self.height_px / (self.high_nm - self.low_nm)


def layer_names(
    job: Job, pieces: Sequence[Piece], *, beside: Mapping[int, str], sizes: bool, goal: int | None = None
) -> dict[int, str]:
    """What is written at the side of each layer met: its name, features named beside it, its thickness, the goal."""
    found = {}
    for k in sorted({piece.layer for piece in pieces}):
        layer = job.stack.layers[k]
        name = short(f"{layer.name} / {beside[k]}" if k in beside else layer.name)
        thick = layer.thickness.value
        text = f"{name}  {length(thick)}" if sizes and thick < _SUBSTRATE_SHOWN else name
        found[k] = f"{text}  (goal)" if k == goal else text
    return found


def side_width(names: Mapping[int, str]) -> float:
    """How much room (px) the names at a side need."""
    wide = max((text_px(name, SIZE, True)[0] for name in names.values()), default=0.0)
    return wide + _LEADER_PX + 6.0


def write_layers(
    axes: Axes, view: View, pieces: Sequence[Piece], names: Mapping[int, str], goal: int | None, unit: Unit
) -> None:
    """Names of layers at the right, each with a leader to where the layer ends there."""
    met = {piece.layer for piece in pieces if piece.top_nm.max() > view.low_nm and piece.floor_nm.min() < view.high_nm}
    found = sorted(_most_important(view, pieces, met & set(names), goal), reverse=True)
    at = [_anchor(view, [piece for piece in pieces if piece.layer == k]) for k in found]
    wanted = [(height - view.low_nm) * view.up_px_per_nm for _, height in at]
    places = spread(wanted, [_LINE_PX] * len(found), -6.0, view.height_px + 10.0)
    for k, (s, height), place in zip(found, at, places, strict=True):
        level = (view.low_nm + place / view.up_px_per_nm) / unit.nm
        edge, text = view.across_nm, view.across_nm + _LEADER_PX / view.px_per_nm
        inside = s < 0.999 * edge
        axes.plot(
            [s / unit.nm, edge / unit.nm, text / unit.nm] if inside else [edge / unit.nm, text / unit.nm],
            [height / unit.nm, height / unit.nm, level] if inside else [height / unit.nm, level],
            color=FAINT, lw=0.7, clip_on=False, zorder=6, marker="o" if inside else None, ms=2.5, markevery=[0],
        )  # fmt: skip
        axes.text(
            text / unit.nm + 3.0 / view.px_per_nm / unit.nm, level, names[k],
            fontsize=SIZE, va="center", ha="left", clip_on=False,
            color=GOAL if k == goal else "black", fontweight="bold" if k == goal else "normal",
        )  # fmt: skip


def _most_important(view: View, pieces: Sequence[Piece], layers: set[int], goal: int | None) -> list[int]:
    """The layers there is room to name: the goal's, then the thickest."""
    thick = dict.fromkeys(layers, 0.0)
    for piece in pieces:
        if piece.layer in thick:
            shown = np.minimum(piece.top_nm, view.high_nm) - np.maximum(piece.floor_nm, view.low_nm)
            thick[piece.layer] = max(thick[piece.layer], float(shown.max()))
    order = sorted(layers, key=lambda k: (k != goal, -thick[k], k))
    return order[: max(int((view.height_px + 16.0) / _LINE_PX), 1)]


def _anchor(view: View, own: Sequence[Piece]) -> tuple[float, float]:
    """Where a layer's leader ends: at the edge if the layer comes to it, else at its largest piece."""
    shown = [piece for piece in own if piece.top_nm.max() > view.low_nm and piece.floor_nm.min() < view.high_nm]
    ending = [piece for piece in shown if piece.s_nm[-1] >= 0.999 * view.across_nm]
    if ending:
        one = max(ending, key=lambda piece: float(piece.top_nm[-1] - piece.floor_nm[-1]))
        top, floor = float(one.top_nm[-1]), float(one.floor_nm[-1])
        return view.across_nm, 0.5 * (min(top, view.high_nm) + max(floor, view.low_nm))
    if not shown:
        return view.across_nm, view.low_nm
    one = max(shown, key=lambda piece: piece.area_nm2)
    top, floor = min(float(one.top_nm[-1]), view.high_nm), max(float(one.floor_nm[-1]), view.low_nm)
    return float(one.s_nm[-1]), 0.5 * (top + floor)


def feature_places(job: Job, view: View, pieces: Sequence[Piece]) -> tuple[list[tuple[str, Piece]], dict[int, str]]:
    """Names that fit inside a piece of their feature, and those that do not, by layer."""
    inside: list[tuple[str, Piece]] = []
    beside: dict[int, str] = {}
    for number, (layer, name) in enumerate(job.column_map.features):
        own = [piece for piece in pieces if piece.feature == number]
        if not own:
            continue
        best = max(own, key=lambda piece: piece.area_nm2)
        wide, high = text_px(name, SIZE)
        room = float((best.top_nm - best.floor_nm).max()) * view.up_px_per_nm
        if best.width_nm * view.px_per_nm >= wide + 4.0 and room >= 0.8 * high:
            inside.append((name, best))
        else:
            beside[layer] = f"{beside[layer]}, {name}" if layer in beside else name
    return inside, beside


def write_features(
    axes: Axes, inside: Sequence[tuple[str, Piece]], names: Sequence[str], look: Mapping[str, Style], unit: Unit
) -> None:
    """Names of features on their own ground."""
    for name, piece in inside:
        s, height = piece.middle_nm
        own = look[names[piece.material]]
        axes.text(
            s / unit.nm, height / unit.nm, name, fontsize=SIZE, ha="center", va="center_baseline",
            color=own.on_it, zorder=6, path_effects=halo(2.0) if own.hatch else None,
        )  # fmt: skip
