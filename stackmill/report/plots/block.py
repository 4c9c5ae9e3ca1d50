"""The cell as a block: its surface coloured by what lies there, its two near sides cut open."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from stackmill.planning.relief import Relief
from stackmill.relief.evolve import Frame
from stackmill.relief.measure import FLUSH_NM
from stackmill.report.plots.canvas import DPI
from stackmill.report.plots.palette import Style
from stackmill.report.plots.slices import Piece, pieces, terrain_slices

if TYPE_CHECKING:
    from matplotlib.figure import Figure

Array = NDArray[np.float64]

_FACES = 110  # most faces along a side
_SUN = np.array([-0.5, -0.35, 1.2])
_AMBIENT = 0.45
_TIMES = (1.0, 2.0, 3.0, 4.0, 5.0, 8.0, 10.0, 15.0, 20.0, 30.0)
_LEAST, _MOST = 0.14, 0.9  # relief and height drawn, as shares of the cell's width
_UNDER = 0.22
_ROOM = 1.5  # axes as a multiple of the block: nothing is clipped


def draw_block(
    figure: Figure, relief: Relief, at: Frame, box: tuple[float, float, float, float], look: Mapping[str, Style]
) -> tuple[float, set[int]]:
    """Draw the block into a box; gives how heights are drawn, and the materials that are seen.

    box: left, top, width and height (px, from the picture's upper left corner).
    """
    wide, deep = relief.job.column_map.cell
    top, lowest = float(at.height_nm.max()), float(at.height_nm.min())
    times = _exaggeration(top - lowest, max(wide, deep))
    low = lowest - max(_UNDER * max(wide, deep) / times, 0.25 * (top - lowest))
    axes = _axes(figure, box, (wide, deep, low, top), times)
    met = _surface(axes, relief, at, times, look)
    met |= _sides(axes, relief, at, low, look)
    return times, met


def _axes(
    figure: Figure, box: tuple[float, float, float, float], extent: tuple[float, float, float, float], times: float
) -> Any:
    """Axes in which a block of this extent (width, depth, lowest, highest; nm) fills the box."""
    from mpl_toolkits.mplot3d import proj3d  # type: ignore[import-untyped]  # no types
    from mpl_toolkits.mplot3d.axes3d import Axes3D  # type: ignore[import-untyped]  # no types

    (left, upper, width, height), (wide, deep, low, top) = box, extent
    across, up = figure.get_size_inches() * DPI
    size = _ROOM * max(width, height)
    axes = Axes3D(figure, (0.0, 0.0, size / across, size / up), computed_zorder=False, proj_type="ortho")
    axes.set(xlim=(0.0, wide), ylim=(0.0, deep), zlim=(low, top))
    shape = (wide, deep, times * (top - low))
    axes.set_box_aspect(shape)
    axes.view_init(elev=32.0, azim=-58.0)
    corners = np.array([[x, y, z] for x in (0.0, wide) for y in (0.0, deep) for z in (low, top)])
    s, h, _ = proj3d.proj_transform(*corners.T, axes.get_proj())
    px = size / axes.viewLim.width
    zoom = min(width / (np.ptp(s) * px), height / (np.ptp(h) * px))
    axes.set_box_aspect(shape, zoom=zoom)
    middle = [zoom * px * (0.5 * (one.min() + one.max()) - centre) for one, centre in (
        (s, 0.5 * (axes.viewLim.x0 + axes.viewLim.x1)), (h, 0.5 * (axes.viewLim.y0 + axes.viewLim.y1)))]  # fmt: skip
    x = left + 0.5 * width - middle[0] - 0.5 * size
    y = up - (upper + 0.5 * height) - middle[1] - 0.5 * size
    axes.set_position((x / across, y / up, size / across, size / up))
    axes.set_axis_off()
    axes.patch.set_alpha(0.0)
    figure.add_axes(axes)
    return axes


def _exaggeration(relief_nm: float, across_nm: float) -> float:
    """The least of round numbers that makes the relief show, without making the block a tower."""
    best = 1.0
    for times in _TIMES if relief_nm >= FLUSH_NM else ():
        if times * relief_nm > _MOST * across_nm:
            break
        best = times
        if times * relief_nm >= _LEAST * across_nm:
            break
    return best


def _surface(axes: Any, relief: Relief, at: Frame, times: float, look: Mapping[str, Style]) -> set[int]:
    """The surface in the colours of its materials, shaded by its slope; gives the materials."""
    from mpl_toolkits.mplot3d.art3d import Poly3DCollection  # type: ignore[import-untyped]  # no types

    terrain, names = relief.run.terrain, relief.job.column_map.materials
    every = max(1, -(-max(terrain.column.shape) // _FACES))
    rows, columns = (np.arange(0, n, every) for n in terrain.column.shape)
    material = top_material(relief, at)[np.ix_(rows, columns)]
    edge_y, edge_x = (np.append(one, n) * step for one, n, step in zip(
        (rows, columns), terrain.column.shape, terrain.step_nm, strict=True))  # fmt: skip
    corner = _corners(at.height_nm, edge_y / terrain.step_nm[0], edge_x / terrain.step_nm[1])
    x, y = np.meshgrid(edge_x, edge_y)
    grid = np.stack([x, y, corner], axis=-1)
    faces = np.stack([grid[:-1, :-1], grid[:-1, 1:], grid[1:, 1:], grid[1:, :-1]], axis=2).reshape(-1, 4, 3)
    rgb = np.array([_rgb(look[names[m]].face) if m >= 0 else (1.0, 1.0, 1.0) for m in range(-1, len(names))])
    colour = rgb[material.ravel() + 1] * _light(faces * (1.0, 1.0, times))[:, None]
    drawn = Poly3DCollection(faces, facecolors=colour, edgecolors=colour, linewidths=0.3, zorder=1)
    drawn.set_rasterized(True)
    axes.add_collection3d(drawn)
    return set(np.unique(material).tolist()) - {-1}


def top_material(relief: Relief, at: Frame) -> NDArray[np.intp]:
    """The material (ny, nx) that lies at the surface; -1 below everything."""
    terrain = relief.run.terrain
    inside = at.segment < terrain.count[terrain.column]
    segment = np.minimum(at.segment, terrain.count[terrain.column] - 1)
    return np.where(inside, terrain.material[terrain.column, segment], -1)


def _corners(height: Array, at_y: Array, at_x: Array) -> Array:
    """Heights at the corners between points of a surface that repeats: means of the four around them."""
    mean = np.mean([np.roll(height, (dy, dx), axis=(0, 1)) for dy in (0, 1) for dx in (0, 1)], axis=0)
    ny, nx = height.shape
    return np.asarray(mean[np.ix_(at_y.round().astype(int) % ny, at_x.round().astype(int) % nx)], dtype=np.float64)


def _light(faces: Array) -> Array:
    """How light (0..1) faces (N, 4, 3) are."""
    normal = np.cross(faces[:, 2] - faces[:, 0], faces[:, 3] - faces[:, 1])
    normal /= np.linalg.norm(normal, axis=1)[:, None]
    sun = _SUN / np.linalg.norm(_SUN)
    lit = np.clip(normal @ sun, 0.0, 1.0) / sun[2]
    return np.asarray(np.clip(_AMBIENT + (1.0 - _AMBIENT) * lit, 0.0, 1.0), dtype=np.float64)


def _sides(axes: Any, relief: Relief, at: Frame, low: float, look: Mapping[str, Style]) -> set[int]:
    """The two near sides, cut open: y at its start, x at its end; gives the materials that they show."""
    from mpl_toolkits.mplot3d.art3d import Poly3DCollection

    job, terrain = relief.job, relief.run.terrain
    region, names = job.column_map.regions[relief.region], job.column_map.materials
    height, (step_y, step_x), wide = at.height_nm, terrain.step_nm, job.column_map.cell[0]
    front = 0.5 * (height[0] + height[-1]), step_x
    right = 0.5 * (height[:, 0] + height[:, -1]), step_y
    sides: list[tuple[list[Piece], int, float, float]] = [
        (pieces(terrain_slices(region, terrain, row=0), bottom_nm=low, surface=front), 1, 0.0, 0.94),
        (pieces(terrain_slices(region, terrain, column=-1), bottom_nm=low, surface=right), 0, wide, 0.8),
    ]
    met = set()
    for found, axis, where, light in sides:
        for piece in found:
            outline = np.insert(piece.outline_nm, axis, where, axis=1)
            face = tuple(light * one for one in _rgb(look[names[piece.material]].face))
            axes.add_collection3d(
                Poly3DCollection([outline], facecolors=[face], edgecolors="#333333", linewidths=0.5, zorder=3)
            )
            met.add(piece.material)
        rim = np.insert(_rim(found), axis, where, axis=1)
        axes.plot(*rim.T, color="black", lw=1.2, zorder=4)
    return met


def _rim(found: list[Piece]) -> Array:
    """The surface's edge along a side: the highest of all pieces."""
    s = np.unique(np.concatenate([piece.s_nm for piece in found]))
    over = [
        np.where((s >= one.s_nm[0]) & (s <= one.s_nm[-1]), np.interp(s, one.s_nm, one.top_nm), -np.inf) for one in found
    ]
    return np.column_stack([s, np.max(over, axis=0)])


def _rgb(colour: str) -> tuple[float, float, float]:
    red, green, blue = (int(colour[k : k + 2], 16) / 255.0 for k in (1, 3, 5))
    return red, green, blue
