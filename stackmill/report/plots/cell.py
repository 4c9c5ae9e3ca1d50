"""The cell's surface: a shaded map of its height, and a view of it as a block in the palette of its materials."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from stackmill.errors import NoAnswerError, UsageError
from stackmill.planning.relief import Relief
from stackmill.relief.evolve import Frame
from stackmill.relief.measure import FLUSH_NM, Standing, footprints
from stackmill.report.plots.beam import beam_in_words, step_at
from stackmill.report.plots.block import draw_block
from stackmill.report.plots.canvas import WIDTH_PX, Unit, blank, look, panel, text_px, unit_for, write, write_within
from stackmill.report.plots.paint import halo, job_styles, legend, legend_height
from stackmill.report.words import percent
from stackmill.units import format_time

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Array = NDArray[np.float64]

_MARGIN, _TOP, _LEFT = 18.0, 108.0, 64.0
_MAP_PX, _BAR_PX, _BLOCK_PX, _UNDER = 520.0, 18.0, 610.0, 56.0
_SHADE = 0.35
_SUN = (-1.0, 1.0, 1.6)  # from the upper left of the map
_NAME_SIZE = 8.0
_CLEAR_PX = 12.0
_SHARED_PX = 400.0  # how far off its middle a name goes to lie in one outline less


def draw_cell(relief: Relief, moment: int = -1) -> Figure:
    """The whole cell at one of its moments (the last by default): map of heights at the left, block at the right.

    Raises UsageError for a section, or where there is no such moment, and NoAnswerError where there is none at all.
    """
    if relief.cut is not None:
        raise UsageError("a section was run: there is no cell to draw", cure="draw the section, or run the cell")
    if not relief.run.frames:
        raise NoAnswerError("the run was stopped before the first moment asked for: there is nothing to draw")
    count = len(relief.run.frames)
    if not -count <= moment < count:
        raise UsageError(f"there is no moment {moment}", cure=f"give one from 0 to {count - 1}")
    with look():
        return _drawn(relief, moment % count)


def _drawn(relief: Relief, number: int) -> Figure:
    job, at = relief.job, relief.run.frames[number]
    wide, deep = job.column_map.cell
    scale = min(_MAP_PX / wide, _MAP_PX / deep)
    width, height = scale * wide, scale * deep
    names, every = job.column_map.materials, job_styles(job)
    tall = max(height, 0.8 * _MAP_PX)
    figure = blank(WIDTH_PX, _TOP + tall + _UNDER + legend_height(names, _MARGIN, WIDTH_PX - _MARGIN))
    box = (WIDTH_PX - _BLOCK_PX - 2.0 * _MARGIN, _TOP + 6.0, _BLOCK_PX, tall)
    times, met = draw_block(figure, relief, at, box, every)
    styles = {name: every[name] for k, name in enumerate(names) if k in met}
    room = WIDTH_PX - 2.0 * _MARGIN
    write_within(figure, _MARGIN, _MARGIN + 10.0, job.title, 12.0, room, bold=True)
    write_within(figure, _MARGIN, _MARGIN + 31.0, _caption(relief, number), 9.0, room, color="#333333")
    unit = unit_for(max(wide, deep))
    axes = panel(figure, _LEFT + _MARGIN, _TOP, width, height)
    shown = _map(axes, relief, at, unit)
    bar = panel(figure, _LEFT + _MARGIN + width + 16.0, _TOP, _BAR_PX, height)
    figure.colorbar(shown, cax=bar).set_label("height over the substrate (nm)", fontsize=9)
    bar.tick_params(labelsize=8.5)
    shape = "drawn to scale" if times == 1.0 else f"heights drawn {times:g} x"
    write(figure, box[0], _TOP - 20.0, f"The surface by its materials, from the map's lower right; {shape}", 9.0)
    lines = "lines: features (dashed: gone, dotted: still buried)"
    write(figure, _LEFT + _MARGIN, _TOP - 20.0, f"Heights, lit from the upper left; {lines}", 9.0)
    legend(figure, _TOP + tall + _UNDER, _MARGIN, WIDTH_PX - _MARGIN, styles)
    return figure


def _caption(relief: Relief, number: int) -> str:
    job, moment = relief.job, relief.moments[number]
    region = job.column_map.regions[relief.region].name
    when = f"after {format_time(moment.time_s)}" if moment.time_s > 0.0 else "at the start"
    parts = [f"{region}, the whole cell {when} ({beam_in_words(step_at(relief, moment.time_s))})"]
    parts.append(f"relief {moment.relief_nm:.0f} nm")
    if moment.clear_share is not None:
        parts.append(f"goal {percent(moment.clear_share)} clear")
    return "; ".join(parts)


def _map(axes: Axes, relief: Relief, at: Frame, unit: Unit) -> Any:
    """The shaded map; what a colour bar is made from."""
    from matplotlib import colormaps
    from matplotlib.cm import ScalarMappable
    from matplotlib.colors import Normalize

    wide, deep = relief.job.column_map.cell
    height = at.height_nm
    flat = float(np.ptp(height)) < FLUSH_NM
    middle = float(height.mean())
    norm = Normalize(middle - FLUSH_NM, middle + FLUSH_NM) if flat else Normalize(height.min(), height.max())
    rgb = colormaps["cividis"](norm(height))[..., :3]
    shade = hillshade(height, relief.run.terrain.step_nm)
    lit = np.clip(rgb * (1.0 + _SHADE * (shade[..., None] - 1.0) * 2.0), 0.0, 1.0)
    extent = (0.0, wide / unit.nm, 0.0, deep / unit.nm)
    axes.imshow(lit, origin="lower", extent=extent, interpolation="nearest", aspect="auto", zorder=1)
    axes.set_xlabel(f"x ({unit.name})", fontsize=9)
    axes.set_ylabel(f"y ({unit.name})", fontsize=9)
    axes.tick_params(labelsize=8.5)
    _outlines(axes, relief, at, unit)
    return ScalarMappable(norm, "cividis")


def hillshade(height_nm: Array, step_nm: tuple[float, float]) -> Array:
    """How light a surface that repeats is under light from the upper left: 1 where it is flat, 0 to 1.25 elsewhere."""
    down = (np.roll(height_nm, -1, axis=0) - np.roll(height_nm, 1, axis=0)) / (2.0 * step_nm[0])
    across = (np.roll(height_nm, -1, axis=1) - np.roll(height_nm, 1, axis=1)) / (2.0 * step_nm[1])
    sun = np.array(_SUN) / np.linalg.norm(_SUN)
    lit = (sun[2] - across * sun[0] - down * sun[1]) / np.sqrt(1.0 + across**2 + down**2)
    return np.asarray(np.clip(lit / sun[2], 0.0, 1.25), dtype=np.float64)


def _outlines(axes: Axes, relief: Relief, at: Frame, unit: Unit) -> None:
    """Where features are drawn, each named where it shows most: with its height where it stands or is sunk."""
    from matplotlib.patheffects import withStroke

    job, terrain = relief.job, relief.run.terrain
    y, x = (
        np.asarray((np.arange(n) + 0.5) * step / unit.nm, dtype=np.float64)
        for n, step in zip(terrain.column.shape, terrain.step_nm, strict=True)
    )
    rows = {row.standing.feature: row.standing for row in relief.rows if row.time_s == at.time_s}
    wanted: list[tuple[str, NDArray[np.bool_]]] = []
    for one in footprints(job.column_map.regions[relief.region], terrain, job.column_map.features):
        standing = rows.get(one.feature)
        if standing is None or standing.overshadowed or (standing.state == "gone" and standing.kind == "flush"):
            continue
        dashes = "solid" if standing.state == "showing" else (0, (4, 2)) if standing.state == "gone" else "dotted"
        drawn = axes.contour(
            x, y, one.points.astype(float), levels=[0.5], colors="white", linewidths=1.1, linestyles=[dashes]
        )
        drawn.set_path_effects([withStroke(linewidth=2.4, foreground="black")])
        if standing.state != "buried" or standing.kind != "flush":
            wanted.append((_said(job.column_map.features[one.feature][1], standing), one.points))
    _names(axes, wanted, x, y)


def _said(name: str, standing: Standing) -> str:
    state = "" if standing.state == "showing" else f" ({standing.state})"
    return (
        f"{name}{state}: flush"
        if standing.kind == "flush"
        else f"{name}{state}: {standing.kind} " + (f"{abs(standing.height_nm):.0f} nm")
    )


def _names(axes: Axes, wanted: list[tuple[str, NDArray[np.bool_]]], x: Array, y: Array) -> None:
    """Each name inside its outline, where the fewest others are and no other name is near."""
    px = axes.get_window_extent().width / float(x[-1] + x[0])
    py = axes.get_window_extent().height / float(y[-1] + y[0])
    taken: list[tuple[float, float, float]] = []
    shared = np.sum([points for _, points in wanted], axis=0)
    for text, points in sorted(wanted, key=lambda one: int(one[1].sum())):
        half = 0.5 * text_px(text, _NAME_SIZE)[0] + 5.0
        rows, columns = np.nonzero(_inner(points, round(_CLEAR_PX / float((x[1] - x[0]) * px))))
        at = np.column_stack([x[columns] * px, y[rows] * py])
        at[:, 0] = np.clip(at[:, 0], half, float(x[-1] + x[0]) * px - half)
        at[:, 1] = np.clip(at[:, 1], 10.0, float(y[-1] + y[0]) * py - 10.0)
        away = np.full(len(at), np.inf)
        for cx, cy, other in taken:
            gap = np.maximum(np.abs(at[:, 0] - cx) - half - other, np.abs(at[:, 1] - cy) - 15.0)
            away = np.minimum(away, gap)
        middle = np.hypot(*(at - at.mean(axis=0)).T)
        cost = middle + _SHARED_PX * shared[rows, columns]
        best = int(np.argmin(np.where(away >= 0.0, cost, 1e6 - away)))
        taken.append((float(at[best, 0]), float(at[best, 1]), half))
        axes.text(
            at[best, 0] / px, at[best, 1] / py, text, fontsize=_NAME_SIZE, ha="center", va="center", zorder=5,
            path_effects=halo(3.0),
        )  # fmt: skip


def _inner(points: NDArray[np.bool_], by: int) -> NDArray[np.bool_]:
    """Points at least so many off the outline, as far as there are any."""
    inner = points
    for _ in range(by):
        less = inner.copy()
        for axis in (0, 1):
            less &= np.roll(inner, 1, axis=axis) & np.roll(inner, -1, axis=axis)
        if not less.any():
            break
        inner = less
    return inner
