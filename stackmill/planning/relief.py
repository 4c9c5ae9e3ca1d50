"""The relief of one region at the moments asked for: run on its surface, and every feature measured."""

from __future__ import annotations

import warnings
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import RegionColumns
from stackmill.documents.recipe import Beam
from stackmill.ensemble.run import DRAWS, SEED, Ensemble
from stackmill.ensemble.run import run as run_ensemble
from stackmill.errors import InputError, StackmillWarning, UsageError
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.planning.stops import stop_table
from stackmill.planning.surfaces import Surfaces, along_the_beam
from stackmill.planning.windows import find_window
from stackmill.relief.evolve import Frame, Reaching, Run, evolve
from stackmill.relief.gridding import CELLS_ACROSS, Cut, Grid, cell_grid, columns_along, section_grid
from stackmill.relief.measure import Standing, footprints, measured, relief_nm
from stackmill.relief.terrain import passed_above
from stackmill.relief.watch import Watch

Array = NDArray[np.float64]
Index = NDArray[np.intp]

GRAZING_DEG = 75.0  # beyond, the shadow is not to be trusted
_LARGEST, _NEAR_NM = 40, 5.0  # columns through which lines are tried, and how near lines are the same
_LOOK_BEYOND = 1.5  # a section runs on to this multiple of the last moment, to see what vanishes


@frozen
class FeatureRelief:
    """One feature at one moment: what it does, with the grid's own errors of height and slope (None without one)."""

    time_s: float
    standing: Standing
    height_error_nm: float | None
    slope_error_deg: float | None


@frozen
class Moment:
    """The region at one moment: relief_nm, highest minus lowest; clear_share: of the goal's area there, or None."""

    time_s: float
    relief_nm: float
    clear_share: float | None


@frozen
class Relief:
    """The answer of `relief`: one region's surface at every moment asked for, and all its features.

    cut: the section's line, None for the whole cell; why_cut: why this one was chosen, if the user did not choose.
    """

    ensemble: Ensemble
    region: int
    cut: Cut | None
    why_cut: str
    grid: Grid
    run: Run
    moments: tuple[Moment, ...]
    rows: tuple[FeatureRelief, ...]

    @property
    def job(self) -> Job:
        """The job behind it."""
        return self.ensemble.inputs.job


@frozen
class When:
    """The moments asked for: at_s, on the clock; reach: the layer whose reaching is one; stop: the proposed stop."""

    at_s: tuple[float, ...] = ()
    reach: str | None = None
    stop: bool = False


def patterned(job: Job) -> tuple[int, ...]:
    """The regions in which something drawn can stand up or sink: those of more than one column, the goal's first."""
    regions = job.column_map.regions
    goal = job.goal.in_ if job.goal else ()
    found = [r for r, region in enumerate(regions) if len(region.area) > 1 and not region.placeless.any()]
    return tuple(sorted(found, key=lambda r: (regions[r].name not in goal, r)))


@frozen
class How:
    """How a surface is run. section, cell: by default a section through the columns that decide; points: of the
    grid, along the section or x; second_order: finer facets from the same grid.
    """

    section: Cut | None = None
    cell: bool = False
    points: int | None = None
    second_order: bool = False


def relief_tables(
    job: Job,
    *,
    when: When | None = None,
    how: How | None = None,
    region: str | None = None,
    seed: int = SEED,
    watch: Watch | None = None,
) -> tuple[Relief, ...]:
    """Run the surface of every patterned region, the goal's first, at best values; or of one region, if named.

    when: by default the stop that the stop table proposes, or without a goal the recipe's end; watch: told how
    much is done now and then. After an interrupt the regions that were not begun are left out.
    """
    how = how or How()
    if how.section is not None and how.cell:
        raise UsageError("a section and the cell cannot both be run", cure="leave out --section or --cell")
    _check_cut(job, how.section)
    chosen = [_region(job, region)] if region or not patterned(job) else list(patterned(job))
    for r in chosen:
        _refuse_densities(job, r)
    ensemble, at_s = _moments(job, when, how, seed, watch)
    _warn(job)
    found: list[Relief] = []
    for r in chosen:
        found.append(_one_region(ensemble, r, when, how, at_s, watch))
        if not found[-1].run.finished:
            break
    return tuple(found)


def _one_region(
    ensemble: Ensemble, r: int, when: When | None, how: How, at_s: Sequence[float], watch: Watch | None
) -> Relief:
    job = ensemble.inputs.job
    cut, why = (None, "") if how.cell else (how.section, "") if how.section else deciding_cut(ensemble, r)
    surfaces = Surfaces(ensemble, r, cut)
    grid = _grid(job, r, cut, how.points)
    last = max(at_s, default=float(ensemble.best_outcome.end_s[0]))
    until = _until(ensemble, when.reach) if when and when.reach else None
    run = _run(surfaces, grid, at_s, until, last, how.second_order, run_on=not how.cell, watch=watch)
    if until is not None and run.reached_s is None and run.finished:
        raise InputError(f"{until[0]!r} is not reached in {job.column_map.regions[r].name!r} while the recipe lasts")
    coarse = None
    if run.finished:
        rough = _grid(job, r, cut, max(4, grid.x_nm.shape[1] // 2))
        coarse = _run(surfaces, rough, at_s, until, last, how.second_order, run_on=False, watch=None)
    moments = tuple(_moment(ensemble, r, run, frame) for frame in run.frames)
    return Relief(ensemble, r, cut, why, grid, run, moments, _rows(job, r, run, coarse))


def _region(job: Job, name: str | None) -> int:
    names = [region.name for region in job.column_map.regions]
    if name is not None:
        if name not in names:
            raise UsageError(f"there is no region {name!r}", cure=f"give one of {', '.join(names)}")
        return names.index(name)
    most = max(range(len(names)), key=lambda r: len(job.column_map.regions[r].area))
    return next(iter(patterned(job)), most)


def _refuse_densities(job: Job, r: int) -> None:
    if job.column_map.regions[r].placeless.any():
        name = job.column_map.regions[r].name
        raise InputError(
            f"{name!r} has a feature known by its pattern density alone: nobody knows where it stands",
            cure="draw it as lines or vias, or ask for another region",
        )


def _moments(job: Job, when: When | None, how: How, seed: int, watch: Watch | None) -> tuple[Ensemble, list[float]]:
    """The moments asked for, and the ensemble they belong to: the stop table's own where its stop is one."""
    at = list(when.at_s) if when else []
    if when is not None and when.stop and job.goal is None:
        raise UsageError("without a goal there is no stop to look at", cure="give --at, --at-reach or --goal")
    if (when is None or when.stop) and job.goal is not None:
        table = stop_table(job, seed=seed, cell=how.cell, watch=watch)
        window = table.window
        assert window is not None
        if window.stop_s is None:
            warnings.warn(
                f"no stop is safe at {100 * window.confidence:.3g} %: what is shown is the best one, whose chance is"
                f" {window.best_stop_chance:.2f}",
                StackmillWarning,
                stacklevel=2,
            )
        at.append(window.best_stop_s if window.stop_s is None else window.stop_s)
        return table.ensemble, at
    ensemble = run_ensemble(job, draws=DRAWS if job.goal else 1, seed=seed)
    if when is None:
        at.append(float(ensemble.best_outcome.end_s[0]))
    return ensemble, at


def _check_cut(job: Job, cut: Cut | None) -> None:
    if cut is None:
        return
    size = job.column_map.cell[0 if cut.fixed == "x" else 1]
    if not 0.0 <= cut.at_nm <= size:
        raise UsageError(
            f"the section {cut} lies outside the cell", cure=f"{cut.fixed} goes from 0 to {size / 1000.0:.4g} um"
        )


def deciding_cut(ensemble: Ensemble, r: int) -> tuple[Cut, str]:
    """The line that meets the columns which decide the window here, and of those lines the most features."""
    job = ensemble.inputs.job
    region, size = job.column_map.regions[r], job.column_map.cell
    deciding: set[int] = set()
    if job.goal is not None and len(ensemble.weights) > 1:
        window = find_window(ensemble, job.confidence)
        deciding = {where[1] for where in (window.exposed_by, window.lost_by) if where and where[0] == r}
    columns = [*sorted(deciding), *range(min(len(region.area), _LARGEST))]
    centres = np.round(region.centre_nm[columns] / _NEAR_NM) * _NEAR_NM
    tried = list(dict.fromkeys(cut for x, y in centres.tolist() for cut in (Cut("y", y), Cut("x", x))))
    lines = [cut for cut in tried if along_the_beam(job, cut)] or tried
    met = {cut: columns_along(region, size, cut) for cut in lines}
    best = max(lines, key=lambda cut: (len(met[cut] & deciding), _features_crossed(region, met[cut]), len(met[cut])))
    names = " and ".join(region.label(c) for c in sorted(met[best] & deciding))
    if not names:
        return best, "it meets the most features" if _features_crossed(region, met[best]) else ""
    return best, f"through {names}, which decide{'s' if len(met[best] & deciding) == 1 else ''}"


def _features_crossed(region: RegionColumns, columns: set[int]) -> int:
    """How many features begin or end along a line that meets these columns."""
    rows = [set(region.feature[c].tolist()) - {-1} for c in columns]
    return len(set.union(*rows) - set.intersection(*rows))


def _grid(job: Job, r: int, cut: Cut | None, points: int | None) -> Grid:
    region, cell = job.column_map.regions[r], job.column_map.cell
    return cell_grid(region, cell, points) if cut is None else section_grid(region, cell, cut, points)


def _until(ensemble: Ensemble, layer: str) -> tuple[str, float]:
    job = ensemble.inputs.job
    if layer not in job.column_map.layers:
        raise UsageError(f"there is no layer {layer!r}", cure=f"give one of {', '.join(job.column_map.layers)}")
    return layer, job.goal.clear if job.goal else 0.95


def _run(
    surfaces: Surfaces,
    grid: Grid,
    at_s: Sequence[float],
    until: tuple[str, float] | None,
    last: float,
    second_order: bool,
    *,
    run_on: bool,
    watch: Watch | None,
) -> Run:
    """Run one surface; run_on: beyond the last moment, to see what vanishes."""
    down = surfaces.ensemble.best_descent
    terrain = surfaces.terrain(surfaces.layout(grid), down)
    reaching = None
    if until is not None:
        layer = surfaces.job.column_map.layers.index(until[0])
        above = down.ground.layer_above[surfaces.region][:, layer]
        reaching = Reaching(above[terrain.region_column], until[1])
        last = max(last, 2.0 * float(surfaces.ensemble.best_outcome.end_s[0]))
    end = _LOOK_BEYOND * last if run_on and not until else last
    return evolve(
        terrain,
        surfaces.stages(terrain, down),
        region=surfaces.region,
        at_s=at_s,
        until=reaching,
        end_s=end,
        second_order=second_order,
        undercuts_until_s=last,
        watch=watch,
    )


def _moment(ensemble: Ensemble, r: int, run: Run, frame: Frame) -> Moment:
    return Moment(frame.time_s, relief_nm(frame), clear_share(ensemble, r, run, frame.time_s))


def clear_share(ensemble: Ensemble, r: int, run: Run, time_s: float) -> float | None:
    """The share of the goal's points of this surface that are down to its upper level; None where it has none."""
    above = np.full(len(ensemble.inputs.job.column_map.regions[r].area), -1)
    for spot in ensemble.best_ground.goal_upper:
        if spot.region == r:
            above[spot.column] = int(np.asarray(spot.above).flat[0])
    at = above[run.terrain.region_column][run.terrain.column]
    wanted = at >= 0
    if not wanted.any():
        return None
    down = passed_above(run.passed_s, at) <= time_s * (1.0 + 1e-12)
    return float(down[wanted].mean())


def _rows(job: Job, r: int, run: Run, coarse: Run | None) -> tuple[FeatureRelief, ...]:
    """All features at all moments; what a grid of half as many points makes of them is the grid's own error."""
    region, features = job.column_map.regions[r], job.column_map.features
    own = footprints(region, run.terrain, features)
    rough = footprints(region, coarse.terrain, features) if coarse else []
    rows = []
    for k, frame in enumerate(run.frames):
        other: dict[int, Standing] = {}
        if coarse and k < len(coarse.frames):
            other = {s.feature: s for s in measured(region, coarse, coarse.frames[k], rough)}
        for one in measured(region, run, frame, own):
            twin = other.get(one.feature)
            height = abs(one.height_nm - twin.height_nm) if twin else None
            slope = None
            if twin and one.side_slope_deg is not None and twin.side_slope_deg is not None:
                slope = abs(one.side_slope_deg - twin.side_slope_deg)
            rows.append(FeatureRelief(frame.time_s, one, height, slope))
    return tuple(rows)


def too_coarse(relief: Relief) -> list[tuple[str, int, int]]:
    """Features under CELLS_ACROSS points wide: name, points across, and the grid (points along x) that would do."""
    found = {}
    n = relief.grid.x_nm.shape[1]
    for row in relief.rows:
        s = row.standing
        if s.cells_across < CELLS_ACROSS:
            layer, name = relief.job.column_map.features[s.feature]
            found[s.feature] = (
                f"{relief.job.column_map.layers[layer]} / {name}",
                s.cells_across,
                int(np.ceil(n * CELLS_ACROSS / max(s.cells_across, 1))),
            )
    return list(found.values())


def _warn(job: Job) -> None:
    for step in job.recipe.steps:
        if isinstance(step, Beam) and step.incidence + step.motion.half_angle > GRAZING_DEG:
            warnings.warn(
                f"step {step.name!r} mills beyond {GRAZING_DEG:.0f} deg from the normal: the shadows of so low a beam"
                " are not to be trusted",
                StackmillWarning,
                stacklevel=2,
            )
