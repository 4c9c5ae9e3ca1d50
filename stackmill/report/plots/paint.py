"""Pieces of material on axes: filled and hatched, as ghosts, their legend, the substrate's broken edge."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from stackmill.jobs import Job
from stackmill.report.plots.canvas import DPI, Unit, short, text_px, write
from stackmill.report.plots.palette import Style, styles
from stackmill.report.plots.slices import Piece

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

GOAL = "#c2005a"
FAINT = "#6d7278"
_SWATCH = (30.0, 15.0)
_LEGEND_SIZE, _LEGEND_ROW = 9.0, 24.0


def job_styles(job: Job) -> dict[str, Style]:
    """The styles of all materials of a job's columns; a lab's own by what they mill like or are mixed from."""
    materials = job.milled_materials
    like = {}
    for name, material in materials.items():
        parts = sorted(material.mixture, key=lambda part: -part.share)
        near = material.like or material.follows or (parts[0].material.name if parts else None)
        if near and near != name:
            like[name] = near
    return styles(materials, like=like, kind={name: material.kind for name, material in materials.items()})


def paint(axes: Axes, pieces: Iterable[Piece], names: Sequence[str], look: Mapping[str, Style], unit: Unit) -> None:
    """Fill pieces with their materials' faces and hatches, and draw their outlines thin."""
    from matplotlib.patches import Polygon

    for piece in pieces:
        own, outline = look[names[piece.material]], piece.outline_nm / unit.nm
        axes.add_artist(
            Polygon(outline, closed=True, facecolor=own.face, edgecolor=own.ink, hatch=own.hatch, lw=0.0, zorder=2)
        )
        axes.add_artist(Polygon(outline, closed=True, fill=False, edgecolor=own.ink, lw=0.6, zorder=2.1))


def haunt(axes: Axes, pieces: Iterable[Piece], names: Sequence[str], look: Mapping[str, Style], unit: Unit) -> None:
    """Draw pieces as what was there: pale, without hatch, with a thin dotted outline."""
    from matplotlib.patches import Polygon

    for piece in pieces:
        outline = piece.outline_nm / unit.nm
        axes.add_artist(
            Polygon(outline, closed=True, facecolor=look[names[piece.material]].face, alpha=0.13, lw=0.0, zorder=1)
        )
        axes.add_artist(Polygon(outline, closed=True, fill=False, edgecolor="#b4b8bd", lw=0.5, ls=":", zorder=1.1))


def break_off(axes: Axes, across_nm: float, bottom_nm: float, tooth_nm: float, unit: Unit) -> None:
    """A zigzag along the lower end of what is drawn: below it the substrate goes on."""
    from matplotlib.patches import Polygon

    teeth = 2 * max(6, round(across_nm / max(12.0 * tooth_nm, across_nm / 20.0)))
    s = np.linspace(0.0, across_nm, teeth + 1)
    high = bottom_nm + tooth_nm * np.where(np.arange(teeth + 1) % 2, 1.0, 0.15)
    under = np.concatenate([np.column_stack([s, high]), [[across_nm, bottom_nm], [0.0, bottom_nm]]])
    axes.add_artist(Polygon(under / unit.nm, closed=True, facecolor="white", edgecolor="none", zorder=3))
    axes.plot(s / unit.nm, high / unit.nm, color="#333333", lw=0.9, zorder=3.1, clip_on=False)


def halo(width: float = 2.5) -> list[Any]:
    """A white rim around letters and lines, so that they read on any ground."""
    from matplotlib.patheffects import withStroke

    return [withStroke(linewidth=width, foreground="white")]


def frame(axes: Axes, unit: Unit, *, heights: bool) -> None:
    """Plain axes: only the left and lower edge, ticks outside, the unit in words."""
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    axes.tick_params(labelsize=8.5, length=3.5, width=0.8)
    if heights:
        axes.set_ylabel(f"height over the substrate ({unit.name})", fontsize=9)


def legend(
    figure: Figure, top: float, left: float, right: float, look: Mapping[str, Style], extra: Sequence[str] = ()
) -> None:
    """Swatches of materials with their names, in rows from a place down (px); extra: names of LINES."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

    across, up = figure.get_size_inches() * DPI
    for name, x, y in _laid_out([*look, *extra], left, right):
        low = (x / across, 1.0 - (top + y + 0.5 * _SWATCH[1]) / up)
        size = (_SWATCH[0] / across, _SWATCH[1] / up)
        if name in look:
            own = look[name]
            ways: tuple[dict[str, Any], ...] = (
                {"facecolor": own.face, "edgecolor": own.ink, "hatch": own.hatch, "lw": 0.0},
                {"fill": False, "edgecolor": "#444444", "lw": 0.7},
            )
            for more in ways:
                figure.add_artist(Rectangle(low, *size, transform=figure.transFigure, **more))
        else:
            at = [low[0], low[0] + size[0]], [low[1] + 0.5 * size[1]] * 2
            figure.add_artist(Line2D(*at, transform=figure.transFigure, **LINES[name]))
        write(figure, x + _SWATCH[0] + 7.0, top + y, short(name), _LEGEND_SIZE)


LINES: dict[str, dict[str, Any]] = {
    "goal": {"color": GOAL, "lw": 1.8, "ls": (0, (5, 2))},
    "earlier surfaces": {"color": "#55595e", "lw": 0.8},
    "the surface": {"color": "black", "lw": 1.6},
    "milled or stripped off": {"color": "#b4b8bd", "lw": 1.2, "ls": ":"},
}
"""How lines look that a legend may name."""


def legend_height(names: Sequence[str], left: float, right: float) -> float:
    """How high (px) a legend of some names is."""
    return max(y for _, _, y in _laid_out(names, left, right)) + _LEGEND_ROW


def _laid_out(names: Sequence[str], left: float, right: float) -> list[tuple[str, float, float]]:
    """Name, x and y (px) of each entry."""
    placed, x, y = [], left, 0.5 * _LEGEND_ROW
    for name in names:
        wide = _SWATCH[0] + 7.0 + text_px(short(name), _LEGEND_SIZE)[0] + 26.0
        if x > left and x + wide > right:
            x, y = left, y + _LEGEND_ROW
        placed.append((name, x, y))
        x += wide
    return placed
