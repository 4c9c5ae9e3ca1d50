"""The beam over a section, as arrows at its true angle: from both sides, from one, or swinging."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from stackmill.documents.recipe import Beam, Cover, Uncover
from stackmill.planning.relief import Relief
from stackmill.planning.surfaces import light_of
from stackmill.relief.slope_speed import ROTATING
from stackmill.report.plots.canvas import Unit
from stackmill.report.plots.names import View
from stackmill.report.plots.paint import halo
from stackmill.report.words import energy
from stackmill.timing.fall import Lowering

if TYPE_CHECKING:
    from matplotlib.axes import Axes

COLOUR = "#1f3fa8"
ROOM_PX = 86.0
"""How much height (px) the arrows need."""

_LONG_PX, _APART_PX, _TIPS_PX = 56.0, 26.0, 5.0


def step_at(relief: Relief, time_s: float) -> Beam | None:
    """The beam step that is in force at a moment, or was last; None where the region is covered then."""
    recipe = relief.job.recipe.steps
    name = relief.job.column_map.regions[relief.region].name
    spans, covered, milled, found = relief.ensemble.best.spans, False, False, None
    for step, lowering, span in zip(recipe, relief.ensemble.best_steps, spans, strict=False):
        if milled and float(span.start_s[0]) >= time_s:
            break
        if isinstance(step, Cover | Uncover):
            named = step.cover if isinstance(step, Cover) else step.uncover
            covered = isinstance(step, Cover) if name in named else covered
        elif isinstance(step, Beam) and isinstance(lowering, Lowering):
            milled, found = True, None if covered else step
    return found


def beam_in_words(step: Beam | None) -> str:
    """`finish: 1 keV, 45° from the normal, rotating`."""
    if step is None:
        return "covered: the beam does not reach it"
    return f"{step.name}: {energy(step.energy)}, {step.incidence:.4g}° from the normal, {step.motion}"


def draw_beam(axes: Axes, view: View, step: Beam, relief: Relief, unit: Unit) -> None:
    """Arrows in the panel's uppermost ROOM_PX, as steep as the picture draws heights, with the true angle in words."""
    light = light_of(step, relief.cut)
    middle, tip = 0.5 * view.width_px, view.height_px - ROOM_PX + 4.0
    tilts = [-light.high_rad, light.high_rad] if light.kind == ROTATING else [light.low_rad, light.high_rad]
    rotating, still = light.kind == ROTATING and light.high_rad > 0.0, tilts[0] == tilts[1] or light.high_rad == 0.0
    if rotating:
        arrows = [(np.sign(tilt) * _TIPS_PX, tilt) for tilt in tilts]
    elif still:
        arrows = [(off * _APART_PX, tilts[0]) for off in (-1.0, 0.0, 1.0)]
    else:
        arrows = [(0.0, tilt) for tilt in (tilts[0], 0.5 * (tilts[0] + tilts[1]), tilts[1])]
    for off, tilt in arrows:
        across, up = _along(view, tilt)
        _arrow(axes, view, (middle + off + across, tip + up), (middle + off, tip), unit)
    normal = np.array([[middle, tip], [middle, tip + _LONG_PX + 12.0]])
    axes.plot(*_data(view, normal, unit).T, color="#444444", lw=0.8, ls=(0, (3, 3)), zorder=7)
    if rotating:
        _turn(axes, view, (middle, tip + _LONG_PX + 10.0), unit)
    across, up = _along(view, max(abs(one) for one in tilts))
    side = 1.0 if rotating or tilts[1] >= -tilts[0] else -1.0
    at = _data(view, np.array([[middle + side * (across + 8.0 + (_APART_PX if still else 0.0)), tip + up - 4.0]]), unit)
    axes.text(
        float(at[0, 0]), float(at[0, 1]), f"{step.incidence:.4g}°", fontsize=8.5, color=COLOUR, zorder=8, va="center",
        ha="left" if side > 0 else "right", path_effects=halo(),
    )  # fmt: skip


def _along(view: View, tilt_rad: float) -> tuple[float, float]:
    """An arrow's way (px, across and up) from its tip, stretched as the panel stretches heights."""
    across, up = np.sin(tilt_rad) * view.px_per_nm, np.cos(tilt_rad) * view.up_px_per_nm
    long = float(np.hypot(across, up))
    return float(across) * _LONG_PX / long, float(up) * _LONG_PX / long


def _data(view: View, at_px: np.ndarray[tuple[int, ...], np.dtype[np.float64]], unit: Unit) -> np.ndarray:
    """Points (px, from the panel's lower left corner) on the axes."""
    s = at_px[:, 0] / view.px_per_nm
    return np.column_stack([s, view.low_nm + at_px[:, 1] / view.up_px_per_nm]) / unit.nm


def _arrow(axes: Axes, view: View, start: tuple[float, float], end: tuple[float, float], unit: Unit) -> None:
    tail, head = _data(view, np.array([start, end]), unit)
    axes.annotate(
        "", xy=tuple(head), xytext=tuple(tail), zorder=8, annotation_clip=False,
        arrowprops={
            "arrowstyle": "-|>,head_width=0.28,head_length=0.6", "color": COLOUR, "lw": 1.8, "shrinkA": 0.0,
            "shrinkB": 0.0, "path_effects": halo(3.6),
        },
    )  # fmt: skip


def _turn(axes: Axes, view: View, at: tuple[float, float], unit: Unit) -> None:
    """A small arrow around the normal: the sample turns."""
    angle = np.linspace(np.radians(-230.0), np.radians(50.0), 40)
    ring = np.column_stack([at[0] + 17.0 * np.cos(angle), at[1] + 5.0 * np.sin(angle)])
    axes.plot(*_data(view, ring, unit).T, color="#444444", lw=1.0, zorder=8, clip_on=False)
    tail, head = _data(view, np.array([ring[-3], ring[-1] + 0.6 * (ring[-1] - ring[-3])]), unit)
    axes.annotate(
        "", xy=tuple(head), xytext=tuple(tail), zorder=8, annotation_clip=False,
        arrowprops={"arrowstyle": "-|>,head_width=0.16,head_length=0.34", "color": "#444444", "lw": 0.8},
    )  # fmt: skip
