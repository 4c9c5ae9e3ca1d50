"""The stop table: when each layer is reached in every column, and the window in which to stop."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam
from stackmill.ensemble.run import DRAWS, SEED, Ensemble, run
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.planning.shares import Share, variance_shares
from stackmill.planning.windows import Window, find_window, quantiles
from stackmill.rates.facets import shadow_multiple, slope_grid, speeds_of
from stackmill.rates.model import setting
from stackmill.rates.yields import angular_shape
from stackmill.timing.flatness import SlopeSpeeds, flat_until
from stackmill.timing.plan import last_milling

if TYPE_CHECKING:
    from stackmill.planning.correction import Correction
    from stackmill.relief.watch import Watch

Array = NDArray[np.float64]

_EDGES = 0.02  # of the way to a column's centre: facets that have come no farther spoil no window
_MATTERS = 0.9  # of the wanted area: columns are looked at, from the largest on, until so much is


@frozen
class Reach:
    """One layer's top in one column: when the surface gets there, at best values, early and late.

    Times in s on the clock, None where never; those of a later leg are counted from the moment its eye-stopped
    step ends at best values. depth_nm is counted from the region's highest starting point, height_nm from
    the substrate's top. present: whether the layer is there at all in this column. share: the column's area
    share of its region. flat_ok: the column's centre is flat and lit until then.
    """

    region: str
    column: str
    layer: str
    time_s: float | None
    time_early_s: float | None
    time_late_s: float | None
    depth_nm: float
    height_nm: float
    step: str | None
    flat_ok: bool
    basis: str
    present: bool
    share: float
    column_number: int
    leg: int


@frozen
class StopTable:
    """The answer of `stops`: rows, the goal's window (None without a goal), and what would narrow it most.

    provisional: a deciding column's own fall is not to be trusted until it decides, and no surface says more;
    correction: what surfaces made of it, None where none was needed or asked for; flat_window: by columns alone.
    """

    ensemble: Ensemble
    rows: tuple[Reach, ...]
    window: Window | None
    provisional: bool
    shares: tuple[Share, ...]
    confidence: float
    correction: Correction | None = None
    flat_window: Window | None = None


def stop_table(
    job: Job,
    *,
    draws: int = DRAWS,
    seed: int = SEED,
    jobs: int = 1,
    flat: bool = False,
    cell: bool = False,
    watch: Watch | None = None,
) -> StopTable:
    """Forecast a job: every column falls as if flat and lit (`flat_ok` says if it is), then surfaces put it right.

    flat: by columns alone, whatever decides; cell: run whole cells instead of sections; watch: told now and then
    how much of a surface's runs is done.
    """
    ensemble = run(job, draws=draws, seed=seed, jobs=jobs)
    until = _flat_until(ensemble)
    window = flat_window = find_window(ensemble, job.confidence) if job.goal else None
    correction, provisional = None, False
    if window is not None:
        edges = _flat_until(ensemble, way=_EDGES)
        in_doubt = doubtful(ensemble, window, edges)
        provisional = bool(in_doubt)
        if in_doubt and not flat:
            from stackmill.planning.correction import correct

            correction = correct(ensemble, job.confidence, lambda e, w: doubtful(e, w, edges), cell=cell, watch=watch)
            ensemble, window = correction.ensemble, correction.window
            provisional = any(where in deciding(window) for where, _ in correction.unsaid)
    rows = tuple(_rows(ensemble, until, job.confidence))
    if correction:
        rows = tuple(_by_surface(row, ensemble, correction, job) for row in rows)
    return StopTable(
        ensemble=ensemble,
        rows=rows,
        window=window,
        provisional=provisional,
        shares=variance_shares(ensemble, window) if window else (),
        confidence=job.confidence,
        correction=correction,
        flat_window=flat_window,
    )


def _by_surface(row: Reach, ensemble: Ensemble, correction: Correction, job: Job) -> Reach:
    """A row with the surface's times, where its column's own are not to be trusted and a surface says more."""
    if row.flat_ok:
        return row
    r = [region.name for region in job.column_map.regions].index(row.region)
    at = (row.column_number, job.column_map.layers.index(row.layer))
    carried = next((s.layer[at] for s in correction.surfaces if s.region == r and at in s.layer), None)
    if carried is None:
        return row
    start, best_start = ensemble.outcome.leg_start_s[row.leg], float(ensemble.best_outcome.leg_start_s[row.leg][0])
    q = job.confidence
    early, late = quantiles(carried.draws_s[0] - start + best_start, ensemble.weights, [(1 - q) / 2, (1 + q) / 2])
    return replace(
        row,
        time_s=float(carried.best_s[0]),
        time_early_s=_finite(float(early)),
        time_late_s=_finite(float(late)),
        basis="surface",
    )


def _flat_until(ensemble: Ensemble, *, way: float = 1.0) -> list[Array]:
    """For each region, the clock (C,) at which each column's centre stops being flat and lit.

    way: how far on the way to the centre facets and shadows may have come by then.
    """
    job, best = ensemble.inputs.job, ensemble.best
    speeds = _slope_speeds(ensemble)
    share = ensemble.inputs.best().region_share()
    return [
        flat_until(
            sloped=region.slope > 0,
            distance_nm=way * region.edge_distance_nm,
            columns=ensemble.best_ground.columns[r],
            best=best,
            region=r,
            speeds=[s and s.scaled(float(share[r][0])) for s in speeds] if share else speeds,
        )
        for r, region in enumerate(job.column_map.regions)
    ]


def _slope_speeds(ensemble: Ensemble) -> list[SlopeSpeeds | None]:
    """One for each step of the best fall, the last beam's once more for going on after the recipe's end."""
    job, best = ensemble.inputs.job, ensemble.inputs.best()
    names = job.column_map.materials
    known: dict[tuple[object, ...], SlopeSpeeds] = {}
    speeds: list[SlopeSpeeds | None] = []
    for i, step in enumerate(job.recipe.steps):
        if not isinstance(step, Beam):
            speeds.append(None)
            continue
        if setting(step) not in known:
            shapes = {n: angular_shape(job.materials[n], energy_ev=step.energy, gas=job.mill.gas) for n in names}
            flat = dict(zip(names, best.rate_nm_per_s(i)[: len(names), 0].tolist(), strict=True))
            shadow = shadow_multiple(step, job.mill.divergence)
            table = speeds_of(shapes, flat, step)
            slowest = table.min(axis=1) if table.shape[1] > 1 else None
            known[setting(step)] = SlopeSpeeds(slope_grid(), table.max(axis=1), shadow, slowest)
        speeds.append(known[setting(step)])
    beams = [s for s in speeds if s is not None]
    return speeds + ([beams[-1]] if beams else [None]) * (len(ensemble.best.spans) - len(speeds))


def _rows(ensemble: Ensemble, flat: list[Array], confidence: float) -> list[Reach]:
    job = ensemble.inputs.job
    rows = []
    for r, region in enumerate(job.column_map.regions):
        level = ensemble.best_outcome.level[r]
        best, leg, early, late = (values[level] for values in _bounds(ensemble, r, confidence))
        highest = float(region.top_nm.max())
        for c in range(len(region.area)):
            count, gone = int(region.segments[c]), _steps_gone(ensemble, r, c)
            for k, layer in enumerate(job.column_map.layers):
                above = int(np.searchsorted(region.layer[c, :count], k))
                height = float(region.top_nm[c] if above == 0 else region.floor_nm[c, above - 1])
                time = float(best[c, k])
                rows.append(
                    Reach(
                        region=region.name,
                        column=region.label(c),
                        layer=layer,
                        time_s=_finite(time),
                        time_early_s=_finite(float(early[c, k])),
                        time_late_s=_finite(float(late[c, k])),
                        depth_nm=highest - height,
                        height_nm=height,
                        step=_step_name(ensemble, gone, int(ensemble.best_ground.boundary[r][c][above])),
                        flat_ok=bool(time <= flat[r][c] or above == 0),
                        basis="flat",
                        present=bool((region.layer[c, :count] == k).any()),
                        share=float(region.area[c]),
                        column_number=c,
                        leg=int(leg[c, k]),
                    )
                )
    return rows


def _bounds(ensemble: Ensemble, r: int, confidence: float) -> tuple[Array, NDArray[np.intp], Array, Array]:
    """For the distinct levels of a region (N,): their best times, leg, early and late times.

    The leg is the one in which a level is met at best values; early and late are counted from its start.
    """
    best = ensemble.best_outcome.level_s[r][:, 0]
    best_start = ensemble.best_outcome.leg_start_s[:, 0]
    leg = np.sum(best[:, None] > best_start[1:], axis=-1)
    since = ensemble.outcome.level_s[r].copy()
    for k in range(1, len(best_start)):
        since[leg == k] += best_start[k] - ensemble.outcome.leg_start_s[k]
    early, late = quantiles(since, ensemble.weights, [(1 - confidence) / 2, (1 + confidence) / 2])
    return best, leg, early, late


def _steps_gone(ensemble: Ensemble, r: int, c: int) -> NDArray[np.intp]:
    """For each step of the best fall, how many segments from the top are gone after it (steps,)."""
    left = (after[r][c][:, 0] for after in ensemble.best.left_nm)
    return np.array([int(np.argmax(thick > 0.0)) if thick.any() else len(thick) for thick in left])


def _step_name(ensemble: Ensemble, gone: NDArray[np.intp], above: int) -> str | None:
    """The step in which (at best values) everything above a boundary goes; None at the start, or if never."""
    if above == 0 or gone[-1] < above:
        return None
    job = ensemble.inputs.job
    return ensemble.best.spans[int(np.argmax(gone >= above))].name or job.recipe.steps[last_milling(job)].name


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def deciding(window: Window) -> list[tuple[int, int]]:
    """The columns (region, column) that most often decide a window."""
    return list(dict.fromkeys(where for where in (window.exposed_by, window.lost_by) if where is not None))


def doubtful(ensemble: Ensemble, window: Window, edges: list[Array]) -> list[tuple[int, int]]:
    """The columns whose own falls are not to be trusted until the window is decided, over all of their area.

    edges: until when (C,) each column of a region is flat and lit but for a little of its edges. First those that
    decide, then the wanted ones by their area, as long as there is enough of it to matter.
    """
    best = ensemble.best_outcome
    late = max((float(t[0]) for t in (best.exposed_s, best.lost_s) if np.isfinite(t[0])), default=0.0)
    area: dict[tuple[int, int], float] = {}
    for where, share in zip(best.wanted, best.upper_area.tolist(), strict=True):
        area[where] = area.get(where, 0.0) + share
    found = [where for where in deciding(window) if late > edges[where[0]][where[1]]]
    covered, whole = 0.0, sum(area.values())
    for where in sorted(area, key=lambda w: -area[w]):
        if covered >= _MATTERS * whole:
            break
        covered += area[where]
        if late > edges[where[0]][where[1]] and where not in found:
            found.append(where)
    return found
