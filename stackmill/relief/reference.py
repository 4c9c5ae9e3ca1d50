"""How a surface moves, in plain numpy: slow, readable, and the truth that kernel.py must equal.

    dh/dt = -w H_m(grad h)

H_m(p) is the vertical speed of the material m under the surface at slope p (slope_speed.py), w the part of the
light that nothing hides. Each time step looks at the surface once (its one-sided slopes and its horizons), then
lets every point fall through its column by itself, changing speed wherever it passes into another material: so a
level surface falls exactly as by columns alone, whatever the time step.

The flux is Godunov's (Osher & Shu, SIAM J. Numer. Anal. 28, 907 (1991), from memory): the least speed of all
slopes between the two one-sided ones where they open upwards, the greatest where they open downwards. Edges
between columns lie on faces between points. See docs/physics/relief.md for what this can and cannot show.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.relief.slope_speed import BINS, HIDDEN_INTERVALS, SlopeTable
from stackmill.relief.terrain import Surface, Terrain

Array = NDArray[np.float64]
Index = NDArray[np.intp]

SADDLE_SAMPLES = 5  # of one axis' slopes where the surface is a saddle; the other axis is exact
AZIMUTHS = 8  # of the light in a cell, turned a little each step
GOLDEN = 0.6180339887498949  # the golden ratio's turn, which fills a range evenly
_HAIR_NM = 1e-9
_STRAIGHT = 1e-9  # slopes either side that differ by less do not open at all


@frozen
class Sight:
    """What one look at the surface tells: one-sided slopes and what is hidden.

    back, ahead (2, ny, nx): slopes to the point before and to the one after, along y (0) and x (1).
    right, left (ny, nx): how many bins of the light from either side are hidden (sections);
    dark (azimuths, ny, nx): which directions are hidden (cells); bearing (azimuths, 2): their x and y.
    """

    back: Array
    ahead: Array
    right: Array
    left: Array
    dark: NDArray[np.bool_]
    bearing: Array


def mill(
    terrain: Terrain,
    surface: Surface,
    table: SlopeTable,
    *,
    duration_s: float,
    steps: int,
    counts: bool = True,
    second_order: bool = False,
    shadow: bool = True,
) -> None:
    """Mill a surface for `steps` equal time steps, in place.

    counts: whether the clock runs; second_order: ENO slopes and three stages a step (Shu & Osher, J. Comput.
    Phys. 77, 439 (1988), from memory); shadow: whether what stands between a point and the beam hides it.
    """
    span = duration_s / steps
    for _ in range(steps):
        start = surface.copy()
        hidden = look_around(terrain, surface, table, shadow=shadow)
        _fall(terrain, surface, table, _with_slopes(terrain, start, hidden, second_order), span, counts)
        if second_order:
            _refine(terrain, start, surface, table, hidden, span)
        surface.clock_s += span if counts else 0.0
        surface.steps += 1


def _refine(terrain: Terrain, start: Surface, first: Surface, table: SlopeTable, hidden: Sight, span: float) -> None:
    """The later two stages of a step; a point that passes into another material keeps the first's answer."""
    crossed = first.segment != start.segment

    def stage(height: Array) -> Array:
        nonlocal crossed
        moved = Surface(height.copy(), start.segment.copy(), np.full_like(start.passed_s, np.inf))
        _fall(terrain, moved, table, _with_slopes(terrain, moved, hidden, True), span, False)
        crossed = crossed | (moved.segment != start.segment)
        return moved.height_nm

    second = 0.75 * start.height_nm + 0.25 * stage(first.height_nm)
    third = start.height_nm / 3.0 + 2.0 / 3.0 * stage(second)
    first.height_nm[~crossed] = third[~crossed]


def look_around(terrain: Terrain, surface: Surface, table: SlopeTable, *, shadow: bool) -> Sight:
    """The one-sided slopes everywhere, and what hides which light."""
    back, ahead = one_sided(surface.height_nm, terrain.step_nm)
    shape = terrain.column.shape
    none, nowhere = np.zeros(shape), np.zeros((0, *shape), dtype=np.bool_)
    reach = table.light.steepest_tan if shadow else 0.0
    steep = max(float(np.abs(back).max()), float(np.abs(ahead).max()))
    if terrain.is_section:
        if steep * reach <= 1.0:
            return Sight(back, ahead, none, none, nowhere, np.zeros((0, 2)))
        height, step = surface.height_nm[0], terrain.step_nm[1]
        right = table.light.hidden_bins(horizon(height, step), 1)
        left = table.light.hidden_bins(horizon(height[::-1], step)[::-1], -1)
        return Sight(back, ahead, right[None], left[None], nowhere, np.zeros((0, 2)))
    if steep * np.sqrt(2.0) * reach <= 1.0:
        return Sight(back, ahead, none, none, nowhere, np.zeros((0, 2)))
    bearing = bearings(surface.steps)
    dark = np.stack([in_shadow(surface.height_nm, terrain.step_nm, b, reach) for b in bearing])
    return Sight(back, ahead, none, none, dark, bearing)


def one_sided(height: Array, step_nm: tuple[float, float]) -> tuple[Array, Array]:
    """Slopes (2, ny, nx) to the point before and to the point after, along y and x; the cell wraps."""
    ahead = np.stack([(np.roll(height, -1, axis=k) - height) * (1.0 / step_nm[k]) for k in (0, 1)])
    return np.stack([np.roll(ahead[k], 1, axis=k) for k in (0, 1)]), ahead


def _with_slopes(terrain: Terrain, surface: Surface, hidden: Sight, second_order: bool) -> Sight:
    """The same sight with the slopes of this surface: of second order where asked for."""
    if not second_order:
        return hidden
    back, ahead = one_sided(surface.height_nm, terrain.step_nm)
    material = material_at(terrain, surface)
    for k in (0, 1):
        same = (material == np.roll(material, 1, axis=k)) & (material == np.roll(material, -1, axis=k))
        bend = np.where(same, ahead[k] - back[k], 0.0)  # times the grid step; none across another material's edge
        back[k] += 0.5 * _least(bend, np.roll(bend, 1, axis=k))
        ahead[k] -= 0.5 * _least(bend, np.roll(bend, -1, axis=k))
    return Sight(back, ahead, hidden.right, hidden.left, hidden.dark, hidden.bearing)


def _least(one: Array, other: Array) -> Array:
    """The smaller of two bends, 0 where they bend opposite ways."""
    return np.where(one * other > 0.0, np.where(np.abs(one) < np.abs(other), one, other), 0.0)


def material_at(terrain: Terrain, surface: Surface) -> Index:
    """The material (ny, nx) the surface is in; -1 where nothing is left."""
    below = surface.segment >= terrain.count[terrain.column]
    held = np.minimum(surface.segment, terrain.material.shape[1] - 1)
    return np.where(below, -1, terrain.material[terrain.column, held])


def _fall(terrain: Terrain, surface: Surface, table: SlopeTable, sight: Sight, span: float, counts: bool) -> None:
    """Let each point fall for a time through its own column, at the speed its slopes give each material."""
    height, segment = surface.height_nm.ravel(), surface.segment.ravel()
    column = terrain.column.ravel()
    passed = surface.passed_s.reshape(len(height), -1)
    left = np.full(len(height), span)
    falling = np.flatnonzero(segment < terrain.count[column])
    while len(falling):
        c, s = column[falling], segment[falling]
        speed = lowering(table, terrain.material[c, s], falling, sight)
        floor = terrain.floor_nm[c, s]
        lower = height[falling] - speed * left[falling]
        through = lower <= floor
        height[falling[~through]] = lower[~through]
        on, down = falling[through], height[falling[through]] - floor[through]
        with np.errstate(divide="ignore", invalid="ignore"):
            left[on] = np.maximum(left[on] - np.where(down > 0.0, down / speed[through], 0.0), 0.0)
        height[on] = np.minimum(height[on], floor[through])
        passed[on, s[through]] = surface.clock_s + (span - left[on] if counts else 0.0)
        segment[on] += 1
        falling = on[segment[on] < terrain.count[column[on]]]


def lowering(table: SlopeTable, material: Index, points: Index, sight: Sight) -> Array:
    """The speed (P,) at which some points come down in their materials (P,)."""
    back = [b.ravel()[points] for b in sight.back]
    ahead = [a.ravel()[points] for a in sight.ahead]
    if sight.back.shape[1] == 1:
        flux = section_flux(table, material, back[1], ahead[1])
    else:
        flux = cell_flux(table, material, back, ahead)
    return flux * _lit(table, material, points, sight, back, ahead)


def section_flux(table: SlopeTable, material: Index, back: Array, ahead: Array) -> Array:
    """Godunov's flux of a section (P,) from its one-sided slopes (P,)."""
    low, high = np.minimum(back, ahead), np.maximum(back, ahead)
    return _over_range(table, material, low, high, valley=back <= ahead)


def _over_range(table: SlopeTable, material: Index, low: Array, high: Array, *, valley: NDArray[np.bool_]) -> Array:
    """The least speed of the slopes from low to high where `valley`, elsewhere the greatest (P,)."""
    sign = np.where(valley, 1.0, -1.0)
    found = np.minimum(sign * table.speed_at(material, low), sign * table.speed_at(material, high))
    for slope, speed in zip(table.extremum.T, table.extreme.T, strict=True):
        inside = (slope[material] > low) & (slope[material] < high)
        found = np.where(inside, np.minimum(found, sign * speed[material]), found)
    return np.asarray(sign * found)


def cell_flux(table: SlopeTable, material: Index, back: list[Array], ahead: list[Array]) -> Array:
    """Godunov's flux of a cell under a turning sample, whose speed depends on the size of the slope alone (P,).

    Where both axes open the same way, the slopes' sizes fill one range; an axis that is straight goes with the
    other. At a saddle the axis that opens upwards is sampled and the other taken whole.
    """
    valley = [b <= a for b, a in zip(back, ahead, strict=True)]
    straight = [np.abs(a - b) <= _STRAIGHT for b, a in zip(back, ahead, strict=True)]
    valley = [np.where(straight[0], valley[1], valley[0]), np.where(straight[1], valley[0], valley[1])]
    least, most = zip(*(_squares(b, a) for b, a in zip(back, ahead, strict=True)), strict=True)
    low, high = np.sqrt(least[0] + least[1]), np.sqrt(most[0] + most[1])
    flux = _over_range(table, material, low, high, valley=valley[0])
    saddle = np.flatnonzero(valley[0] != valley[1])
    if len(saddle):
        flux[saddle] = _at_saddle(
            table,
            material[saddle],
            [v[saddle] for v in valley],
            *([x[saddle] for x in xs] for xs in (back, ahead, least, most)),
        )
    return flux


def _squares(back: Array, ahead: Array) -> tuple[Array, Array]:
    """The least and the greatest square of the slopes between two."""
    one, other = back * back, ahead * ahead
    return np.where(back * ahead <= 0.0, 0.0, np.minimum(one, other)), np.maximum(one, other)


def _at_saddle(
    table: SlopeTable,
    material: Index,
    valley: list[NDArray[np.bool_]],
    back: list[Array],
    ahead: list[Array],
    least: list[Array],
    most: list[Array],
) -> Array:
    def pick(pair: list[Array], *, opens_up: bool) -> Array:
        return np.where(valley[0] == opens_up, pair[0], pair[1])

    one, other = pick(back, opens_up=True), pick(ahead, opens_up=True)
    low, high = pick(least, opens_up=False), pick(most, opens_up=False)
    down = np.zeros(len(material), dtype=np.bool_)
    found = np.full(len(material), np.inf)
    for k in range(SADDLE_SAMPLES):
        slope = one + (other - one) * (k / (SADDLE_SAMPLES - 1))
        square = slope * slope
        found = np.minimum(
            found, _over_range(table, material, np.sqrt(square + low), np.sqrt(square + high), valley=down)
        )
    return found


def _lit(
    table: SlopeTable, material: Index, points: Index, sight: Sight, back: list[Array], ahead: list[Array]
) -> Array:
    """The part of the milling light that reaches points (P,), at the slope that halves the angle between sides."""
    slope = [bisecting(b, a) for b, a in zip(back, ahead, strict=True)]
    if sight.back.shape[1] == 1:
        right, left = sight.right.ravel()[points], sight.left.ravel()[points]
        hidden = _hidden(table, 0, material, slope[1], right) + _hidden(table, 1, material, slope[1], left)
        return 1.0 - np.minimum(hidden, 1.0)
    if not len(sight.dark):
        return np.ones(len(points))
    size = np.hypot(slope[0], slope[1])
    whole = table.speed_at(material, size)
    flat = table.speed[material, table.speed.shape[1] // 2]
    dark = np.zeros(len(points))
    for hides, bearing in zip(sight.dark, sight.bearing, strict=True):
        direct = flat * direct_speed(table, material, slope, bearing)
        dark += np.where(hides.ravel()[points], direct, 0.0)
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(whole > 0.0, dark / (len(sight.dark) * whole), 0.0)
    return 1.0 - np.minimum(part, 1.0)


def bisecting(back: Array, ahead: Array) -> Array:
    """The slope that halves the angle between two slopes."""
    one, other = 1.0 / np.sqrt(1.0 + back * back), 1.0 / np.sqrt(1.0 + ahead * ahead)
    return (back * one + ahead * other) / (one + other)


def _hidden(table: SlopeTable, side: int, material: Index, slope: Array, bins: Array) -> Array:
    """The hidden share of the speed (P,) of slopes when this many bins of one side are hidden: bilinear."""
    at = (slope / (1.0 + np.abs(slope)) + 1.0) * HIDDEN_INTERVALS
    q = np.minimum(at.astype(np.intp), 2 * HIDDEN_INTERVALS - 1)
    k = np.minimum(bins.astype(np.intp), BINS - 1)
    v, u = at - q, bins - k
    rows = table.hidden[side]
    low = (1.0 - v) * rows[material, k, q] + v * rows[material, k, q + 1]
    high = (1.0 - v) * rows[material, k + 1, q] + v * rows[material, k + 1, q + 1]
    return np.asarray((1.0 - u) * low + u * high)


def direct_speed(table: SlopeTable, material: Index, slope: list[Array], bearing: Array) -> Array:
    """Vertical speed (P,) over flat ground's, under light from one bearing (x, y) at the table's incidence."""
    steepening = np.sqrt(1.0 + slope[0] * slope[0] + slope[1] * slope[1])
    tilt = table.light.high_rad
    along = slope[1] * bearing[0] + slope[0] * bearing[1]
    cosine = (np.cos(tilt) - np.sin(tilt) * along) / steepening
    intervals = table.facet.shape[1] - 1
    at = np.sqrt(1.0 - np.clip(cosine, 0.0, 1.0)) * intervals
    k = np.minimum(at.astype(np.intp), intervals - 1)
    part = at - k
    value = (1.0 - part) * table.facet[material, k] + part * table.facet[material, k + 1]
    return np.asarray(value * steepening)


def horizon(height: Array, step: float) -> Array:
    """The steepest slope (n,) from each point of a section up to any point after it, all around the cell; 0 if none.

    The cell repeats for ever, but a copy of the same ground farther off never stands higher in the sky.
    """
    found = np.zeros(len(height))
    for k in range(1, len(height)):
        found = np.maximum(found, (np.roll(height, -k) - height) / (k * step))
    return found


def bearings(step: int) -> Array:
    """Where the light comes from in this time step (AZIMUTHS, 2), as x and y.

    Pairs either side of each axis, so that mirrored and turned ground stays so; the steps fill the circle evenly.
    """
    off = ((0.5 + step * GOLDEN) % 1.0) * (2.0 * np.pi / AZIMUTHS)
    c, s = np.cos(off), np.sin(off)  # taken once, so that pairs are alike to the last digit
    return np.array([(c, s), (c, -s), (s, c), (-s, c), (-c, s), (-c, -s), (s, -c), (-s, -c)])


def in_shadow(height: Array, step_nm: tuple[float, float], bearing: Array, reach: float) -> NDArray[np.bool_]:
    """Which points (ny, nx) something hides from the light of one bearing, whose rays fall 1 in `reach`.

    Away from the light, row by row, the shadow's upper edge sinks; it is carried between the points of a row.
    """
    major = 1 if abs(bearing[0]) * step_nm[0] >= abs(bearing[1]) * step_nm[1] else 0
    ground = height.T if major == 1 else height  # rows in the direction of the light
    toward, across = (bearing[0], bearing[1]) if major == 1 else (bearing[1], bearing[0])
    row_step, point_step = step_nm[major], step_nm[1 - major]
    if toward > 0.0:
        ground = ground[::-1]  # the light comes from greater rows: go from there
    shift = across / abs(toward) * row_step / point_step  # towards the light, in points
    drop = row_step / abs(toward) / reach
    way, whole = (1 if shift >= 0.0 else -1), int(abs(shift))
    part = abs(shift) - whole
    edge = np.full(ground.shape[1], -np.inf)
    dark = np.zeros(ground.shape, dtype=np.bool_)
    rows = len(ground)
    before = 2 * int(np.ceil(float(np.ptp(ground)) / drop))  # as far as a shadow reaches, and again for its blur
    for k in range(-before, rows):
        above = np.maximum(ground[(k - 1) % rows], edge)
        edge = (1.0 - part) * np.roll(above, -way * whole) + part * np.roll(above, -way * (whole + 1)) - drop
        if k >= 0:
            dark[k] = ground[k] < edge - _HAIR_NM
    if toward > 0.0:
        dark = dark[::-1]
    return dark.T if major == 1 else dark
