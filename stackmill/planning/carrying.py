"""What a surface says of a region's times, carried from best values to every draw.

The surface is run once at best values, on a fine grid, and in 64 of the draws on a coarser one. In each the
moments are read at which it gets to the levels asked for. How these move from draw to draw is learnt from how the
columns' own times: a pillar whose facets have met goes down with what surrounds it, so a level's moment may follow
its own column's time, the first column's, or the last's, and go over from one to the other (kriging.py). What
is got wrong on the draws left out is the carrying's own error; it is added to the draws, so that the chances hold it.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stackmill.ensemble.run import Descent, Ensemble
from stackmill.frozen import frozen
from stackmill.planning.kriging import learn
from stackmill.planning.surfaces import Surfaces
from stackmill.relief.evolve import evolve
from stackmill.relief.gridding import Cut, Grid, Layout, cell_grid, section_grid
from stackmill.relief.terrain import passed_above
from stackmill.relief.watch import Watch

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Mask = NDArray[np.bool_]

RUNS, CELL_RUNS = 64, 24  # draws whose surfaces are run, of a section and of a cell
SHARES = np.array([0.01, 0.05, 0.15, 0.3, 0.5, 0.7, 0.85, 0.95, 0.99])  # of a column's points, first down first
PARTS = np.diff(np.concatenate([[0.0], 0.5 * (SHARES[1:] + SHARES[:-1]), [1.0]]))  # of its area, one each
_DRAW_POINTS, _DRAW_CELL_POINTS = 200, 128
_AS_WIDE = 0.9  # of a column's own half-width: what a section must cut of it to stand for it
LONGER = 1.25  # surfaces are followed to this multiple of the last time by columns
_ENOUGH = 12  # draws that reach a level, to learn from
_GRID_LEFT = 0.5  # of the difference between the two grids: what the finer one may still be off by
_LEAST_SHARE = 0.05  # of the median: times shorter than this are not divided by
_SAME = 1e-7


@frozen
class Carried:
    """Moments of one level: best_s (Q,) at best values, draws_s (Q, D).

    error_s (Q,): sd of what carrying adds, with what the grid may still be off by.
    """

    best_s: Array
    draws_s: Array
    error_s: Array


@frozen
class SurfaceTimes:
    """What one region's surface says.

    cut: the section, None for the cell; points: of the finer grid, along x; runs: draws it was run in; columns: those
    it can speak for; unresolved: share of the region's area in columns too narrow for the finer grid; layer[c, k]:
    when a column's centre gets to a layer's top (Q = 1); upper, spoilt: by their rows in the outcome, when each
    of SHARES of the column's points is down.
    """

    region: int
    cut: Cut | None
    points: int
    runs: int
    columns: frozenset[int]
    unresolved: float
    layer: dict[tuple[int, int], Carried]
    upper: dict[int, Carried]
    spoilt: dict[int, Carried]


@frozen
class Level:
    """A level in one column, and its times by columns alone.

    kind: a layer's top, or a row of the outcome's upper levels or of its places to spoil; row: which; layer: near
    which layer it lies.
    """

    kind: Literal["layer", "upper", "spoilt"]
    column: int
    row: int
    layer: int
    flat_best_s: float
    flat_s: Array

    def above(self, region: int, down: Descent, draw: int) -> int:
        """How many segments lie over it in one draw of a descent."""
        if self.kind == "layer":
            return int(down.ground.layer_above[region][self.column, self.row])
        where = down.ground
        spots = where.goal_upper
        if self.kind == "spoilt":
            spots = (*where.goal_lower, *(spot for keep in where.keeps for spot in keep.spots))
        above = spots[self.row].above
        return above if isinstance(above, int) else int(np.asarray(above).flat[draw])


def surface_times(ensemble: Ensemble, region: int, cut: Cut | None, *, watch: Watch | None = None) -> SurfaceTimes:
    """Run a region's surface at best values and in RUNS draws, and carry its moments to all draws.

    watch: told how much is done. Raises InputError where the beam does not lie in the section.
    """
    surfaces = Surfaces(ensemble, region, cut)
    fine, coarse = layouts(surfaces)
    columns = tuple(c for c in _represented(ensemble, region, fine) if c in coarse.region_column)
    levels = levels_of(ensemble, region, columns)
    end = LONGER * max([level.flat_best_s for level in levels if np.isfinite(level.flat_best_s)], default=0.0)
    finer, coarser = places_of(fine, columns), places_of(coarse, columns)
    best = [moments(surfaces, at, levels, ensemble.best_descent, 0, end, watch) for at in (finer, coarser)]
    runs = min(CELL_RUNS if cut is None else RUNS, len(ensemble.weights))
    chosen = np.arange(runs) * (len(ensemble.weights) // runs)
    down = ensemble.descent(ensemble.z[:, chosen])
    drawn = []
    for d, number in enumerate(chosen.tolist()):
        flat = [float(level.flat_s[number]) for level in levels]
        last = LONGER * max([time for time in flat if np.isfinite(time)], default=0.0)
        drawn.append(moments(surfaces, coarser, levels, down, d, last))
        if watch:
            watch.done((d + 1) / len(chosen))
    carried = _carried(ensemble, region, levels, columns, best, drawn, chosen)
    missing = unresolved(ensemble, region, fine) if cut is None else 0.0
    layer, upper, spoilt = _sorted(levels, carried)
    return SurfaceTimes(region, cut, fine.which.shape[1], runs, frozenset(columns), missing, layer, upper, spoilt)


def unresolved(ensemble: Ensemble, region: int, laid: Layout) -> float:
    """The share of a region's area in columns that have no point on a grid."""
    area = ensemble.inputs.job.column_map.regions[region].area
    return 1.0 - float(area[np.unique(laid.region_column)].sum())


def layouts(surfaces: Surfaces) -> tuple[Layout, Layout]:
    """The finer grid, for best values, and the coarser one, for draws."""
    region, cell = surfaces.job.column_map.regions[surfaces.region], surfaces.job.column_map.cell

    def grid(points: int | None) -> Grid:
        if surfaces.cut is None:
            return cell_grid(region, cell, points)
        return section_grid(region, cell, surfaces.cut, points)

    fine = grid(None)
    most = _DRAW_CELL_POINTS if surfaces.cut is None else _DRAW_POINTS
    return surfaces.layout(fine), surfaces.layout(grid(min(most, fine.x_nm.shape[1])))


def _points(laid: Layout, column: int) -> Mask:
    """The points (ny, nx) of one of the region's columns."""
    found: Mask = laid.region_column[laid.which] == column
    return found


def _inside_nm(points: Mask, step_nm: tuple[float, float]) -> Array:
    """How far each point (ny, nx) lies inside, in nm, at least, counting along the axes."""
    left, far = points.copy(), np.zeros(points.shape)
    step = step_nm[1] if points.shape[0] == 1 else min(step_nm)
    while left.any() and not left.all():
        far[left] += step
        smaller = left & np.roll(left, 1, axis=1) & np.roll(left, -1, axis=1)
        if points.shape[0] > 1:
            smaller &= np.roll(left, 1, axis=0) & np.roll(left, -1, axis=0)
        left = smaller
    return far - 0.5 * step * points


def spoken_for(ensemble: Ensemble, region: int, cut: Cut | None) -> tuple[int, ...]:
    """The columns a surface can speak for: those it cuts about as wide as they are."""
    return _represented(ensemble, region, layouts(Surfaces(ensemble, region, cut))[0])


def _represented(ensemble: Ensemble, region: int, laid: Layout) -> tuple[int, ...]:
    own = ensemble.inputs.job.column_map.regions[region]
    found = []
    for c in sorted(set(laid.region_column.tolist())):
        points = _points(laid, c)
        width = float(own.edge_distance_nm[c].min())
        far = float(_inside_nm(points, laid.step_nm).max())
        if points.any() and (points.all() or far >= _AS_WIDE * width - max(laid.step_nm)):
            found.append(c)
    return tuple(found)


def levels_of(ensemble: Ensemble, region: int, columns: Sequence[int]) -> list[Level]:
    """Every level of these columns that is asked for: layers' tops, then the goal's and the keeps' levels."""
    job, outcome, best = ensemble.inputs.job, ensemble.outcome, ensemble.best_outcome
    layers = len(job.column_map.layers)
    last = layers if job.goal is None else min(job.column_map.layers.index(job.goal.layer) + 2, layers)
    found = [
        Level("layer", c, k, k, float(best.reached_s(region, c, k)[0]), outcome.reached_s(region, c, k))
        for c in columns
        for k in range(last)
    ]
    goal = 0 if job.goal is None else job.column_map.layers.index(job.goal.layer)
    for row, (r, c) in enumerate(outcome.wanted):
        if r == region and c in columns:
            found.append(Level("upper", c, row, goal, float(best.upper_s[row, 0]), outcome.upper_s[row]))
    for row, spoil in enumerate(outcome.spoilt):
        if spoil.region == region and spoil.column in columns:
            layer = goal if spoil.keep < 0 else job.column_map.layers.index(job.keeps[spoil.keep].layer)
            times = float(best.spoilt_s[row, 0]), outcome.spoilt_s[row]
            found.append(Level("spoilt", spoil.column, row, min(layer + 1, layers - 1), *times))
    return found


@frozen
class Places:
    """A grid with the points (ny, nx) of each column that is asked for, and which of those (P,) are its centre."""

    laid: Layout
    points: dict[int, Mask]
    centre: dict[int, Mask]


def places_of(laid: Layout, columns: Sequence[int]) -> Places:
    """Where the points of some columns lie on a grid."""
    points = {c: _points(laid, c) for c in columns}
    far = {c: _inside_nm(points[c], laid.step_nm)[points[c]] for c in columns}
    return Places(laid, points, {c: far[c] >= far[c].max() - 1e-9 for c in columns})


def moments(
    surfaces: Surfaces,
    places: Places,
    levels: Sequence[Level],
    down: Descent,
    draw: int,
    end_s: float,
    watch: Watch | None = None,
) -> list[Array]:
    """Run one draw's surface and read every level's moments off it: (1,) of a centre, (len(SHARES),) of the rest."""
    terrain = surfaces.terrain(places.laid, down, draw)
    run = evolve(
        terrain, surfaces.stages(terrain, down, draw), region=surfaces.region, end_s=end_s, undercuts=False, watch=watch
    )
    if not run.finished:  # a surface that was interrupted has told nothing
        raise KeyboardInterrupt
    found = []
    for level in levels:
        passed = run.passed_s[places.points[level.column]]
        above = level.above(surfaces.region, down, draw)
        times = passed_above(passed, np.full(len(passed), above))
        if level.kind == "layer":
            found.append(times[places.centre[level.column]].max(keepdims=True))
        else:
            order = np.sort(times)
            found.append(order[np.minimum((SHARES * len(order)).astype(np.intp), len(order) - 1)])
    return found


def _carried(
    ensemble: Ensemble,
    region: int,
    levels: Sequence[Level],
    columns: Sequence[int],
    best: Sequence[Sequence[Array]],
    drawn: Sequence[Sequence[Array]],
    chosen: Index,
) -> list[Carried | None]:
    """Every level's moments in all draws; None where too few draws reach it."""
    start, best_start = ensemble.outcome.leg_start_s, ensemble.best_outcome.leg_start_s[:, 0]
    around: dict[int, tuple[Array, Array]] = {}
    for k in {level.layer for level in levels}:
        around[k] = (
            np.stack([ensemble.best_outcome.reached_s(region, c, k) for c in columns]),
            np.stack([ensemble.outcome.reached_s(region, c, k) for c in columns]),
        )
    found: list[Carried | None] = []
    for n, level in enumerate(levels):
        leg = int(np.sum(level.flat_best_s > best_start[1:]))
        near, near_all = around[level.layer]
        x_best = np.array([level.flat_best_s, near.min(), near.max()]) - best_start[leg]
        x = np.stack([level.flat_s, near_all.min(axis=0), near_all.max(axis=0)]) - start[leg]
        y_best, y_coarse = best[0][n] - best_start[leg], best[1][n] - best_start[leg]
        y = np.stack([run[n] for run in drawn], axis=1) - start[leg][chosen]
        carried = _fit(x_best, x, y_best, y_coarse, y, chosen)
        if carried is not None:
            carried = Carried(
                carried.best_s + best_start[leg], np.maximum(carried.draws_s + start[leg], 0.0), carried.error_s
            )
        found.append(carried)
    return found


def _fit(x_best: Array, x: Array, y_best: Array, y_coarse: Array, y: Array, chosen: Index) -> Carried | None:
    """Moments (Q, D) of all draws from how those (Q, R) of the chosen ones follow the columns' times x (3, D).

    All rates twice as fast halve every time, so what is learnt is the moment as a multiple of the column's own
    time, from the first and the last column's times as such multiples.
    """
    usual = float(np.median(np.abs(x[0])))
    if not 0.0 < usual < np.inf:
        return None
    own = np.maximum(x[0], _LEAST_SHARE * usual)
    with np.errstate(invalid="ignore"):
        others = (x[1:] / own).T
        multiple = (y / own[chosen]).T
    met = np.isfinite(multiple).all(axis=1) & np.isfinite(others[chosen]).all(axis=1)
    if met.sum() < _ENOUGH or not (np.isfinite(y_best).all() and np.isfinite(y_coarse).all()):
        return None
    finer = (y_best - y_coarse) / max(float(x_best[0]), _LEAST_SHARE * usual)
    if np.abs(multiple[met] - 1.0).max() < _SAME and np.abs(finer).max() < _SAME:
        return Carried(y_best, np.repeat(x[:1], len(y_best), axis=0), np.zeros(len(y_best)))
    learnt = learn(others[chosen[met]], multiple[met])
    known = np.isfinite(others).all(axis=1)
    draws = np.full((len(y_best), x.shape[1]), np.inf)
    left_out = learnt.left_out[np.arange(int(known.sum())) % len(learnt.left_out)]
    draws[:, known] = (own[known, None] * (learnt.at(others[known]) + left_out + finer)).T
    error = np.sqrt(np.mean(np.square(learnt.left_out * own[chosen[met], None]), axis=0))
    return Carried(y_best, draws, np.hypot(error, _GRID_LEFT * np.abs(y_best - y_coarse)))


_Told = dict[int, Carried]


def _sorted(
    levels: Sequence[Level], carried: Sequence[Carried | None]
) -> tuple[dict[tuple[int, int], Carried], _Told, _Told]:
    """The levels that were carried: layers' tops, upper levels and places to spoil."""
    layer: dict[tuple[int, int], Carried] = {}
    upper: _Told = {}
    spoilt: _Told = {}
    for level, one in zip(levels, carried, strict=True):
        if one is None:
            continue
        if level.kind == "layer":
            layer[level.column, level.row] = one
        else:
            (upper if level.kind == "upper" else spoilt)[level.row] = one
    return layer, upper, spoilt
