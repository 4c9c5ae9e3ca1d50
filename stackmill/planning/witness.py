"""The whole cell, run once at best values: what vias do to the ground around them, which no line across it can tell.

Its moments take the place of the sections' at best values; how they move from draw to draw is still told by the
sections, or by the columns alone where no section could speak.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam
from stackmill.ensemble.run import Ensemble
from stackmill.planning.carrying import (
    LONGER,
    SHARES,
    Carried,
    Level,
    SurfaceTimes,
    layouts,
    levels_of,
    moments,
    places_of,
    unresolved,
)
from stackmill.planning.surfaces import Surfaces, along_the_beam
from stackmill.relief.gridding import cell_grid
from stackmill.relief.watch import Watch

Array = NDArray[np.float64]

_POINTS = 224  # along x at most: it takes seconds, and films of a hundredth of the cell still have two points


def wants_the_cell(ensemble: Ensemble, region: int) -> bool:
    """Whether a region has vias under a tilted beam that turns, so that its cell can and should be run."""
    job = ensemble.inputs.job
    vias = {
        n
        for n, (layer, name) in enumerate(job.column_map.features)
        for feature in job.stack.layers[layer].features
        if feature.name == name and feature.via is not None
    }
    tilted = any(isinstance(step, Beam) and step.incidence > 0.0 for step in job.recipe.steps)
    there = bool(vias) and bool(np.isin(job.column_map.regions[region].feature, list(vias)).any())
    return there and tilted and along_the_beam(job, None)


def by_the_cell(ensemble: Ensemble, region: int, sections: Sequence[SurfaceTimes], watch: Watch | None) -> SurfaceTimes:
    """Run a region's cell at best values, and carry its moments by what sections, or columns, say of the draws."""
    surfaces = Surfaces(ensemble, region, None)
    fine = layouts(surfaces)[0]
    if fine.which.shape[1] > _POINTS:
        column_map = ensemble.inputs.job.column_map
        fine = surfaces.layout(cell_grid(column_map.regions[region], column_map.cell, _POINTS))
    columns = sorted(set(fine.region_column.tolist()))
    levels = [level for level in levels_of(ensemble, region, columns) if level.kind != "layer"]
    end = LONGER * max([level.flat_best_s for level in levels if np.isfinite(level.flat_best_s)], default=0.0)
    found = moments(surfaces, places_of(fine, columns), levels, ensemble.best_descent, 0, end, watch)
    upper: dict[int, Carried] = {}
    spoilt: dict[int, Carried] = {}
    for level, best in zip(levels, found, strict=True):
        told = [s.upper if level.kind == "upper" else s.spoilt for s in sections if s.region == region]
        known = next((rows[level.row] for rows in told if level.row in rows), None) or _flat(level)
        (upper if level.kind == "upper" else spoilt)[level.row] = _moved(ensemble, level, known, best)
    return SurfaceTimes(
        region=region,
        cut=None,
        points=fine.which.shape[1],
        runs=1,
        columns=frozenset(columns),
        unresolved=unresolved(ensemble, region, fine),
        layer={},
        upper=upper,
        spoilt=spoilt,
    )


def _flat(level: Level) -> Carried:
    """A level as its column alone has it, the same for every share of its points."""
    count = len(SHARES)
    return Carried(np.full(count, level.flat_best_s), np.repeat(level.flat_s[None], count, axis=0), np.zeros(count))


def _moved(ensemble: Ensemble, level: Level, known: Carried, best: Array) -> Carried:
    """Moments of all draws, as many times longer than they were known as the cell's are at best values."""
    leg = int(np.sum(level.flat_best_s > ensemble.best_outcome.leg_start_s[1:, 0]))
    start, best_start = ensemble.outcome.leg_start_s[leg], float(ensemble.best_outcome.leg_start_s[leg, 0])
    since, now = known.best_s - best_start, best - best_start
    with np.errstate(divide="ignore", invalid="ignore"):
        times = np.where((since > 0.0) & np.isfinite(since) & np.isfinite(now), now / since, 1.0)
        later = np.where(since > 0.0, 0.0, now - since)
    later = np.where(np.isfinite(later), later, 0.0)
    draws = start + (known.draws_s - start) * times[:, None] + later[:, None]
    return Carried(np.where(np.isfinite(best), best, known.best_s), np.maximum(draws, 0.0), known.error_s)
