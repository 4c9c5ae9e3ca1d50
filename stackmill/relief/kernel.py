"""reference.py once more, compiled: the same arithmetic, point by point. It must equal the reference everywhere.

All that the kernels call is in this one file, so that numba's cache on disk holds; it is imported only when a
surface is moved. `mill` is the only public name.
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from stackmill.relief.reference import AZIMUTHS, GOLDEN, SADDLE_SAMPLES
from stackmill.relief.slope_speed import BINS, HIDDEN_INTERVALS, INTERVALS, ROTATING, SlopeTable
from stackmill.relief.terrain import Surface, Terrain

Array = NDArray[np.float64]

_HAIR_NM, _STRAIGHT = 1e-9, 1e-9


def _compiled(function: Any) -> Any:
    """Compile on first use, and keep the result on disk where there is a place for it."""
    try:
        return njit(cache=True, nogil=True, error_model="numpy")(function)
    except RuntimeError:  # numba finds no folder that may be written
        return njit(nogil=True, error_model="numpy")(function)


def is_compiled(*, section: bool) -> bool:
    """Whether a kernel is at hand already, in memory or on disk: compiling it takes seconds."""
    kernel = _mill_section if section else _mill_cell
    if kernel.signatures:
        return True
    folder = Path(getattr(kernel._cache, "cache_path", None) or "/nowhere")
    return any(folder.glob(f"kernel.{kernel.py_func.__name__}-*.nbi"))


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
    """See reference.mill."""
    ny, nx = terrain.column.shape
    ground = (
        terrain.column.ravel(),
        np.ascontiguousarray(terrain.material),
        np.ascontiguousarray(terrain.floor_nm),
        terrain.count,
    )
    tables = (table.speed, table.extremum, table.extreme)
    light = (table.light.kind, table.light.low_rad, table.light.high_rad, table.light.steepest_tan if shadow else 0.0)
    state = (
        surface.height_nm.reshape(-1),
        surface.segment.reshape(-1),
        surface.passed_s.reshape(ny * nx, -1),
    )
    pace = (duration_s / steps, steps, surface.clock_s, counts, second_order)
    if ny == 1:
        _mill_section(*state, *ground, terrain.step_nm[1], *tables, table.hidden, *light, *pace)
    else:
        _mill_cell(*state, *ground, ny, nx, *terrain.step_nm, *tables, table.facet, *light[2:], *pace, surface.steps)
    for _ in range(steps):
        surface.clock_s += duration_s / steps if counts else 0.0
    surface.steps += steps


@_compiled
def _speed_at(speed, m, slope):
    size = 1.0 + abs(slope)
    at = (slope / size + 1.0) * INTERVALS
    below = min(int(at), 2 * INTERVALS - 1)
    part = at - below
    return ((1.0 - part) * speed[m, below] + part * speed[m, below + 1]) * size


@_compiled
def _over_range(extremum, extreme, m, low, high, at_low, at_high, valley):
    """The least (valley) or greatest speed of the slopes from low to high, whose ends have these speeds."""
    found = min(at_low, at_high) if valley else max(at_low, at_high)
    for e in range(extremum.shape[1]):
        if extremum[m, e] >= high:
            break
        if extremum[m, e] > low:
            found = min(found, extreme[m, e]) if valley else max(found, extreme[m, e])
    return found


@_compiled
def _least(one, other):
    if one * other <= 0.0:
        return 0.0
    return one if abs(one) < abs(other) else other


@_compiled
def _bisecting(back, ahead):
    one, other = 1.0 / math.sqrt(1.0 + back * back), 1.0 / math.sqrt(1.0 + ahead * ahead)
    return (back * one + ahead * other) / (one + other)


@_compiled
def _material_at(segment, column, material, count, i):
    c = column[i]
    return material[c, segment[i]] if segment[i] < count[c] else -1


# --- sections -------------------------------------------------------------------------------------------------


@_compiled
def _section_slopes(height, material_of, step, second_order, back, ahead, bend):
    n, finer = len(height), 1.0 / step
    for i in range(n):
        after = i + 1 if i + 1 < n else 0
        slope = (height[after] - height[i]) * finer
        ahead[i] = slope
        back[after] = slope
    if not second_order:
        return
    for i in range(n):
        before, after = i - 1 if i else n - 1, i + 1 if i + 1 < n else 0
        same = material_of[i] == material_of[before] and material_of[i] == material_of[after]
        bend[i] = ahead[i] - back[i] if same else 0.0
    for i in range(n):
        before, after = i - 1 if i else n - 1, i + 1 if i + 1 < n else 0
        back[i] += 0.5 * _least(bend[i], bend[before])
        ahead[i] -= 0.5 * _least(bend[i], bend[after])


@_compiled
def _horizons(height, step, twice, stack, found, side):
    """The steepest slope from each point up to any point after it (side 0) or before it (side 1), by a hull."""
    n = len(height)
    for i in range(n):
        h = height[i] if side == 0 else height[n - 1 - i]
        twice[i], twice[n + i] = h, h
    size = 0
    for place in range(2 * n - 1, -1, -1):  # from far to near, twice around
        h = twice[place]
        while size > 1:
            top, under = stack[size - 1], stack[size - 2]
            if (twice[top] - h) * (under - place) > (twice[under] - h) * (top - place):
                break
            size -= 1
        if place < n:
            top = stack[size - 1]
            found[place if side == 0 else n - 1 - place] = max((twice[top] - h) / ((top - place) * step), 0.0)
        stack[size] = place
        size += 1


@_compiled
def _hidden_bins(horizon, side, kind, low, high, reach):
    if horizon * reach <= 1.0:
        return 0.0
    if kind == ROTATING:
        return BINS * math.acos(1.0 / (horizon * reach)) / (0.5 * math.pi)
    up = 1.0 / horizon
    first = high if side == 0 else -low
    last = max(low if side == 0 else -high, 0.0)
    if first <= 0.0:
        return 0.0
    seen = math.atan(up)
    if first > last:
        return BINS * min(max((first - seen) / (first - last), 0.0), 1.0)
    return float(BINS) if seen < first else 0.0


@_compiled
def _hidden(hidden, side, m, slope, bins):
    at = (slope / (1.0 + abs(slope)) + 1.0) * HIDDEN_INTERVALS
    q = min(int(at), 2 * HIDDEN_INTERVALS - 1)
    k = min(int(bins), BINS - 1)
    v, u = at - q, bins - k
    low = (1.0 - v) * hidden[side, m, k, q] + v * hidden[side, m, k, q + 1]
    high = (1.0 - v) * hidden[side, m, k + 1, q] + v * hidden[side, m, k + 1, q + 1]
    return (1.0 - u) * low + u * high


@_compiled
def _fall_section(
    height, segment, passed, column, material, floor, count, speed, extremum, extreme, hidden,
    back, ahead, right, left, dark, span, clock, counts,
):  # fmt: skip
    for i in range(len(height)):
        c = column[i]
        remains = span
        one, other = back[i], ahead[i]
        low, high, valley = min(one, other), max(one, other), one <= other
        level = low == 0.0 and high == 0.0
        while segment[i] < count[c]:
            s = segment[i]
            m = material[c, s]
            if level:
                flux = speed[m, INTERVALS]
            else:
                flux = _over_range(
                    extremum, extreme, m, low, high, _speed_at(speed, m, low), _speed_at(speed, m, high), valley
                )
            if dark and (right[i] > 0.0 or left[i] > 0.0):
                slope = _bisecting(one, other)
                gone = _hidden(hidden, 0, m, slope, right[i]) + _hidden(hidden, 1, m, slope, left[i])
                flux *= 1.0 - min(gone, 1.0)
            lower = height[i] - flux * remains
            if lower > floor[c, s]:
                height[i] = lower
                break
            if height[i] > floor[c, s]:
                remains -= (height[i] - floor[c, s]) / flux
                height[i] = floor[c, s]
            remains = max(remains, 0.0)
            passed[i, s] = clock + (span - remains if counts else 0.0)
            segment[i] += 1


@_compiled
def _mill_section(
    height, segment, passed, column, material, floor, count, step, speed, extremum, extreme, hidden,
    kind, low, high, reach, span, steps, clock, counts, second_order,
):  # fmt: skip
    n = len(height)
    back, ahead, bend = np.empty(n), np.empty(n), np.empty(n)
    right, left = np.zeros(n), np.zeros(n)
    stack, twice = np.empty(2 * n, dtype=np.int64), np.empty(2 * n)
    of = np.full(n, -1)
    h0, s0 = np.empty(n), segment.copy()
    h1, s1 = np.empty(n), segment.copy()
    h2, crossed = np.empty(n), np.zeros(n, dtype=np.bool_)
    nowhere = np.empty((n, passed.shape[1] if second_order else 0))
    for _ in range(steps):
        steepest = 0.0
        for i in range(n):
            steepest = max(steepest, abs(height[i + 1 if i + 1 < n else 0] - height[i]))
        dark = steepest / step * reach > 1.0
        if dark:
            _horizons(height, step, twice, stack, right, 0)
            _horizons(height, step, twice, stack, left, 1)
            for i in range(n):
                right[i] = _hidden_bins(right[i], 0, kind, low, high, reach)
                left[i] = _hidden_bins(left[i], 1, kind, low, high, reach)
        if second_order:
            for i in range(n):
                of[i] = _material_at(segment, column, material, count, i)
            h0[:], s0[:] = height, segment
        _section_slopes(height, of, step, second_order, back, ahead, bend)
        _fall_section(
            height, segment, passed, column, material, floor, count, speed, extremum, extreme, hidden,
            back, ahead, right, left, dark, span, clock, counts,
        )  # fmt: skip
        if second_order:
            crossed[:] = segment != s0
            h1[:] = height
            for stage in range(2):
                s1[:] = s0
                _section_slopes(h1, of, step, True, back, ahead, bend)
                _fall_section(
                    h1, s1, nowhere, column, material, floor, count, speed, extremum, extreme, hidden,
                    back, ahead, right, left, dark, span, clock, counts,
                )  # fmt: skip
                for i in range(n):
                    crossed[i] = crossed[i] or s1[i] != s0[i]
                    if stage == 0:
                        h1[i] = 0.75 * h0[i] + 0.25 * h1[i]
                    else:
                        h2[i] = h0[i] / 3.0 + 2.0 / 3.0 * h1[i]
            for i in range(n):
                if not crossed[i]:
                    height[i] = h2[i]
        if counts:
            clock += span


# --- cells ----------------------------------------------------------------------------------------------------


@_compiled
def _cell_slopes(height, of, ny, nx, step_y, step_x, second_order, back, ahead, bend):
    finer_y, finer_x = 1.0 / step_y, 1.0 / step_x
    for j in range(ny):
        down = (j + 1 if j + 1 < ny else 0) * nx
        for i in range(nx):
            k = j * nx + i
            after = j * nx + (i + 1 if i + 1 < nx else 0)
            along_x, along_y = (height[after] - height[k]) * finer_x, (height[down + i] - height[k]) * finer_y
            ahead[1, k], back[1, after] = along_x, along_x
            ahead[0, k], back[0, down + i] = along_y, along_y
    if not second_order:
        return
    for axis in range(2):
        for j in range(ny):
            for i in range(nx):
                before, after = _beside(j, i, ny, nx, axis)
                k = j * nx + i
                same = of[k] == of[before] and of[k] == of[after]
                bend[axis, k] = ahead[axis, k] - back[axis, k] if same else 0.0
        for j in range(ny):
            for i in range(nx):
                before, after = _beside(j, i, ny, nx, axis)
                k = j * nx + i
                back[axis, k] += 0.5 * _least(bend[axis, k], bend[axis, before])
                ahead[axis, k] -= 0.5 * _least(bend[axis, k], bend[axis, after])


@_compiled
def _beside(j, i, ny, nx, axis):
    """The points before and after a point along an axis, around the cell."""
    if axis == 1:
        return j * nx + (i - 1 if i else nx - 1), j * nx + (i + 1 if i + 1 < nx else 0)
    return (j - 1 if j else ny - 1) * nx + i, (j + 1 if j + 1 < ny else 0) * nx + i


@_compiled
def _at_size(speed, m, square):
    return _speed_at(speed, m, math.sqrt(square))


@_compiled
def _cell_flux(speed, extremum, extreme, m, back_y, ahead_y, back_x, ahead_x):
    valley_y, valley_x = back_y <= ahead_y, back_x <= ahead_x
    straight_y, straight_x = abs(ahead_y - back_y) <= _STRAIGHT, abs(ahead_x - back_x) <= _STRAIGHT
    valley_y, valley_x = valley_x if straight_y else valley_y, valley_y if straight_x else valley_x
    yy, zy, xx, zx = back_y * back_y, ahead_y * ahead_y, back_x * back_x, ahead_x * ahead_x
    least_y, most_y = 0.0 if back_y * ahead_y <= 0.0 else min(yy, zy), max(yy, zy)
    least_x, most_x = 0.0 if back_x * ahead_x <= 0.0 else min(xx, zx), max(xx, zx)
    if valley_y == valley_x:
        low, high = math.sqrt(least_y + least_x), math.sqrt(most_y + most_x)
        at_low = _speed_at(speed, m, low)
        at_high = at_low if low == high else _speed_at(speed, m, high)
        return _over_range(extremum, extreme, m, low, high, at_low, at_high, valley_y)
    one, other = (back_y, ahead_y) if valley_y else (back_x, ahead_x)
    least, most = (least_x, most_x) if valley_y else (least_y, most_y)
    found = np.inf
    for k in range(SADDLE_SAMPLES):
        slope = one + (other - one) * (k / (SADDLE_SAMPLES - 1))
        low, high = math.sqrt(slope * slope + least), math.sqrt(slope * slope + most)
        greatest = _over_range(
            extremum, extreme, m, low, high, _speed_at(speed, m, low), _speed_at(speed, m, high), False
        )
        found = min(found, greatest)
    return found


@_compiled
def _direct_speed(facet, m, slope_y, slope_x, toward_y, toward_x, sine, cosine):
    steepening = math.sqrt(1.0 + slope_y * slope_y + slope_x * slope_x)
    along = slope_x * toward_x + slope_y * toward_y
    c = min(max((cosine - sine * along) / steepening, 0.0), 1.0)
    at = math.sqrt(1.0 - c) * (facet.shape[1] - 1)
    k = min(int(at), facet.shape[1] - 2)
    part = at - k
    return ((1.0 - part) * facet[m, k] + part * facet[m, k + 1]) * steepening


@_compiled
def _march(ground, rows, points, toward, shift, drop, before, bit, dark, edge, above):
    """Carry the shadow's edge away from the light, row by row; set a bit where a point lies under it."""
    way, whole = (1 if shift >= 0.0 else -1), int(abs(shift))
    part = abs(shift) - whole
    pad = 2 + whole
    for i in range(points):
        edge[i] = -np.inf
    for k in range(-before, rows):
        up = (k - 1) % rows
        here = k
        if toward > 0.0:
            up, here = rows - 1 - up, rows - 1 - k
        base = up * points
        for i in range(points):
            above[pad + i] = max(ground[base + i], edge[i])
        for i in range(pad):
            above[i] = above[points + i]
            above[pad + points + i] = above[pad + i]
        for i in range(points):
            at = pad + i + way * whole
            edge[i] = (1.0 - part) * above[at] + part * above[at + way] - drop
        if k >= 0:
            base = here * points
            for i in range(points):
                if ground[base + i] < edge[i] - _HAIR_NM:
                    dark[base + i] |= bit


@_compiled
def _shadows(height, turned, ny, nx, step_y, step_x, reach, count, bearing, dark, dark_turned, edge, above):
    lowest, highest = height[0], height[0]
    for j in range(ny):
        for i in range(nx):
            h = height[j * nx + i]
            turned[i * ny + j] = h
            lowest, highest = min(lowest, h), max(highest, h)
    dark[:] = 0
    dark_turned[:] = 0
    off = ((0.5 + count * GOLDEN) % 1.0) * (2.0 * math.pi / AZIMUTHS)
    c, s = math.cos(off), math.sin(off)
    toward = ((c, s), (c, -s), (s, c), (-s, c), (-c, s), (-c, -s), (s, -c), (-s, -c))
    for a in range(AZIMUTHS):
        x, y = toward[a]
        bearing[a, 0], bearing[a, 1] = x, y
        bit = np.uint8(1 << a)
        if abs(x) * step_y >= abs(y) * step_x:
            drop = step_x / abs(x) / reach
            before = 2 * math.ceil((highest - lowest) / drop)
            _march(turned, nx, ny, x, y / abs(x) * step_x / step_y, drop, before, bit, dark_turned, edge, above)
        else:
            drop = step_y / abs(y) / reach
            before = 2 * math.ceil((highest - lowest) / drop)
            _march(height, ny, nx, y, x / abs(y) * step_y / step_x, drop, before, bit, dark, edge, above)
    for j in range(ny):
        for i in range(nx):
            dark[j * nx + i] |= dark_turned[i * ny + j]


@_compiled
def _fall_cell(
    height, segment, passed, column, material, floor, count, speed, extremum, extreme, facet,
    back, ahead, dark, bearing, sine, cosine, shaded, span, clock, counts,
):  # fmt: skip
    for i in range(len(height)):
        c = column[i]
        remains = span
        back_y, ahead_y, back_x, ahead_x = back[0, i], ahead[0, i], back[1, i], ahead[1, i]
        level = back_y == 0.0 and ahead_y == 0.0 and back_x == 0.0 and ahead_x == 0.0
        while segment[i] < count[c]:
            s = segment[i]
            m = material[c, s]
            if level:
                flux = speed[m, INTERVALS]
            else:
                flux = _cell_flux(speed, extremum, extreme, m, back_y, ahead_y, back_x, ahead_x)
            if shaded and dark[i]:
                slope_y, slope_x = _bisecting(back_y, ahead_y), _bisecting(back_x, ahead_x)
                size = math.hypot(slope_y, slope_x)
                whole = _speed_at(speed, m, size)
                gone = 0.0
                for a in range(AZIMUTHS):
                    if dark[i] & np.uint8(1 << a):
                        gone += speed[m, INTERVALS] * _direct_speed(
                            facet, m, slope_y, slope_x, bearing[a, 1], bearing[a, 0], sine, cosine
                        )
                if whole > 0.0:
                    flux *= 1.0 - min(gone / (AZIMUTHS * whole), 1.0)
            lower = height[i] - flux * remains
            if lower > floor[c, s]:
                height[i] = lower
                break
            if height[i] > floor[c, s]:
                remains -= (height[i] - floor[c, s]) / flux
                height[i] = floor[c, s]
            remains = max(remains, 0.0)
            passed[i, s] = clock + (span - remains if counts else 0.0)
            segment[i] += 1


@_compiled
def _mill_cell(
    height, segment, passed, column, material, floor, count, ny, nx, step_y, step_x, speed, extremum, extreme,
    facet, high, reach, span, steps, clock, counts, second_order, step_count,
):  # fmt: skip
    n = ny * nx
    back, ahead = np.empty((2, n)), np.empty((2, n))
    bend = np.empty((2, n if second_order else 0))
    of = np.full(n if second_order else 0, -1)
    turned, dark, dark_turned = np.empty(n), np.zeros(n, dtype=np.uint8), np.zeros(n, dtype=np.uint8)
    widest = max(ny, nx)
    edge, above = np.empty(widest), np.empty(3 * widest + 16)
    bearing = np.empty((AZIMUTHS, 2))
    sine, cosine = math.sin(high), math.cos(high)
    h0, s0 = np.empty(n if second_order else 0), segment[: n if second_order else 0].copy()
    h1, s1 = np.empty(n if second_order else 0), segment[: n if second_order else 0].copy()
    crossed = np.zeros(n if second_order else 0, dtype=np.bool_)
    nowhere = np.empty((n if second_order else 0, passed.shape[1]))
    for number in range(steps):
        if second_order:
            for i in range(n):
                of[i] = _material_at(segment, column, material, count, i)
            h0[:], s0[:] = height, segment
        _cell_slopes(height, of, ny, nx, step_y, step_x, False, back, ahead, bend)
        steepest = 0.0
        for axis in range(2):
            for i in range(n):
                steepest = max(steepest, abs(ahead[axis, i]))
        shaded = steepest * math.sqrt(2.0) * reach > 1.0
        if shaded:
            _shadows(
                height, turned, ny, nx, step_y, step_x, reach, step_count + number, bearing, dark, dark_turned,
                edge, above,
            )  # fmt: skip
        if second_order:
            _cell_slopes(height, of, ny, nx, step_y, step_x, True, back, ahead, bend)
        _fall_cell(
            height, segment, passed, column, material, floor, count, speed, extremum, extreme, facet,
            back, ahead, dark, bearing, sine, cosine, shaded, span, clock, counts,
        )  # fmt: skip
        if second_order:
            crossed[:] = segment != s0
            h1[:] = height
            for stage in range(2):
                s1[:] = s0
                _cell_slopes(h1, of, ny, nx, step_y, step_x, True, back, ahead, bend)
                _fall_cell(
                    h1, s1, nowhere, column, material, floor, count, speed, extremum, extreme, facet,
                    back, ahead, dark, bearing, sine, cosine, shaded, span, clock, counts,
                )  # fmt: skip
                for i in range(n):
                    crossed[i] = crossed[i] or s1[i] != s0[i]
                    if stage == 0:
                        h1[i] = 0.75 * h0[i] + 0.25 * h1[i]
                    elif not crossed[i]:
                        height[i] = h0[i] / 3.0 + 2.0 / 3.0 * h1[i]
        if counts:
            clock += span
