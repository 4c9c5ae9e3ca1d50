"""The stop table put right by surfaces: where a column that decides is not flat and lit until it does.

Sections are cut through the deciding columns and run (the cell, if asked for); their moments take the place of the
columns', and the window is found again, until no column decides that only its own fall speaks for.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import RegionColumns
from stackmill.ensemble.run import Ensemble, Outcome, first_lost
from stackmill.errors import InputError
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.planning.carrying import PARTS, SHARES, Carried, SurfaceTimes, spoken_for, surface_times
from stackmill.planning.surfaces import along_the_beam
from stackmill.planning.windows import Window, find_window
from stackmill.planning.witness import by_the_cell, wants_the_cell
from stackmill.relief.gridding import Cut, columns_along
from stackmill.relief.watch import Watch
from stackmill.timing.fall import area_quantile

Array = NDArray[np.float64]

_ROUNDS = 4
_MOST_LINES = 3  # in a region and round
_EVEN_LINES = 8  # tried across the cell besides those through columns' centres

Doubtful = Callable[[Ensemble, Window], Sequence[tuple[int, int]]]
"""Gives the deciding columns of a window whose own falls are not to be trusted until they decide."""


@frozen
class Correction:
    """What surfaces made of a forecast.

    ensemble, window: with the surfaces' moments; surfaces: those run; unsaid: deciding columns (region, column)
    that no surface could speak for, and why not; error_s: what carrying to the draws adds (sd) to the moments that
    decide, the greater of the two.
    """

    ensemble: Ensemble
    window: Window
    surfaces: tuple[SurfaceTimes, ...]
    unsaid: tuple[tuple[tuple[int, int], str], ...]
    error_s: float


def correct(
    ensemble: Ensemble,
    confidence: float,
    doubtful: Doubtful,
    *,
    cell: bool = False,
    watch: Watch | None = None,
) -> Correction:
    """Run surfaces through whatever decides until nothing doubtful is left, or none can be run any more."""
    flat, surfaces = ensemble, list[SurfaceTimes]()
    unsaid: dict[tuple[int, int], str] = {}
    window = find_window(ensemble, confidence)
    for _ in range(_ROUNDS):
        open_ = _open(flat, doubtful(ensemble, window), surfaces, unsaid)
        if not open_:
            break
        for region, cut in _cuts(flat, open_, cell=cell):
            try:
                surfaces.append(surface_times(flat, region, cut, watch=watch))
            except InputError as error:
                unsaid |= {where: error.what for where in open_ if where[0] == region}
        unsaid |= {where: _why_not(flat, where) for where in _open(flat, open_, surfaces, unsaid)}
        ensemble = replace(
            flat,
            outcome=_with(flat, flat.outcome, surfaces, best=False),
            best_outcome=_with(flat, flat.best_outcome, surfaces, best=True),
        )
        window = find_window(ensemble, confidence)
    cells = [by_the_cell(flat, r, surfaces, watch) for r in _sectioned(surfaces) if wants_the_cell(flat, r)]
    if cells:
        surfaces += cells
        ensemble = replace(
            flat,
            outcome=_with(flat, flat.outcome, surfaces, best=False),
            best_outcome=_with(flat, flat.best_outcome, surfaces, best=True),
        )
        window = find_window(ensemble, confidence)
    still = doubtful(ensemble, window)
    left = dict.fromkeys(_open(flat, still, surfaces, unsaid), "too many columns decide in turn")
    return Correction(
        ensemble,
        window,
        tuple(surfaces),
        tuple((where, why) for where, why in (unsaid | left).items() if where in still),
        _error_s(flat, window, surfaces),
    )


def _sectioned(surfaces: Sequence[SurfaceTimes]) -> list[int]:
    """The regions that only sections were run in."""
    cells = {s.region for s in surfaces if s.cut is None}
    return [r for r in dict.fromkeys(s.region for s in surfaces) if r not in cells]


def _open(
    flat: Ensemble,
    doubtful: Sequence[tuple[int, int]],
    surfaces: Sequence[SurfaceTimes],
    unsaid: Mapping[tuple[int, int], str],
) -> list[tuple[int, int]]:
    """The doubtful columns (region, column) that no surface has told a deciding moment of, and nothing is said of."""
    told = {flat.outcome.wanted[row] for s in surfaces for row in s.upper}
    told |= {flat.outcome.spoilt[row].place for s in surfaces for row in s.spoilt}
    return [where for where in doubtful if where not in told and where not in unsaid]


def _error_s(flat: Ensemble, window: Window, surfaces: Sequence[SurfaceTimes]) -> float:
    """What carrying adds to the moments that decide: of the part that makes the goal clear, and of the first lost."""
    goal = flat.inputs.job.goal
    assert goal is not None
    part = int(np.argmin(np.abs(SHARES - goal.clear)))
    errors = [0.0]
    for surface in surfaces:
        for row, one in surface.upper.items():
            if flat.outcome.wanted[row] == window.exposed_by:
                errors.append(float(one.error_s[part]))
        for row, one in surface.spoilt.items():
            if flat.outcome.spoilt[row].place == window.lost_by:
                errors.append(float(one.error_s[0]))
    return max(errors)


def _why_not(ensemble: Ensemble, where: tuple[int, int]) -> str:
    region = ensemble.inputs.job.column_map.regions[where[0]]
    if region.placeless.any():
        return "a pattern density in its region has no place"
    if not along_the_beam(ensemble.inputs.job, None):
        return "no straight section along the beam cuts it as wide as it is"
    return "no straight section through its centre cuts it as wide as it is; --cell would"


def _cuts(ensemble: Ensemble, open_: Sequence[tuple[int, int]], *, cell: bool) -> list[tuple[int, Cut | None]]:
    """The fewest lines through the centres of some columns that can speak for all of them, as far as lines can."""
    column_map = ensemble.inputs.job.column_map
    found: list[tuple[int, Cut | None]] = []
    for r in dict.fromkeys(r for r, _ in open_):
        region = column_map.regions[r]
        wanted = {c for where, c in open_ if where == r}
        if region.placeless.any():
            continue
        if cell:
            found.append((r, None))
            continue
        speaks = {cut: set(spoken_for(ensemble, r, cut)) for cut in _lines(ensemble, r, wanted)}
        vias = {cut: crosses_a_via(ensemble.inputs.job, r, cut) for cut in speaks}
        own: list[Cut] = []
        for _ in range(_MOST_LINES):
            best = max(speaks, key=lambda cut: _worth(region, speaks[cut], wanted, via=vias[cut]))
            if not speaks[best] & wanted:
                break
            own.append(best)
            wanted -= speaks[best]
        if own and any(vias.values()) and not any(vias[cut] for cut in own):
            # What vias do to the ground around them is little of the area, but may be the first that is lost.
            all_wanted = {c for where, c in open_ if where == r}
            own.append(
                max((c for c in speaks if vias[c]), key=lambda c: _worth(region, speaks[c], all_wanted, via=True))
            )
        found += [(r, cut) for cut in own]
    return found


def _worth(region: RegionColumns, speaks: set[int], wanted: set[int], *, via: bool) -> tuple[float, bool, int]:
    """How good a line is: the wanted area it speaks for, whether it leaves vias alone, what else it speaks for."""
    area = float(region.area[list(speaks & wanted)].sum())
    return round(area, 3), not via, len(speaks)


def _lines(ensemble: Ensemble, r: int, wanted: set[int]) -> list[Cut]:
    """Lines to try: through the wanted columns' centres, and some others, along the beam where that matters."""
    column_map = ensemble.inputs.job.column_map
    centres = [column_map.regions[r].centre_nm[c].tolist() for c in sorted(wanted)]
    lines = [cut for x, y in centres for cut in (Cut("y", y), Cut("x", x))]
    for k in range(_EVEN_LINES):
        share = (k + 0.5) / _EVEN_LINES
        lines += [Cut("y", share * column_map.cell[1]), Cut("x", share * column_map.cell[0])]
    return [cut for cut in dict.fromkeys(lines) if along_the_beam(ensemble.inputs.job, cut)] or lines[:2]


def crosses_a_via(job: Job, r: int, cut: Cut) -> bool:
    """Whether a line meets a via, which a section takes for a wall."""
    region, cell = job.column_map.regions[r], job.column_map.cell
    vias = {
        n
        for n, (layer, name) in enumerate(job.column_map.features)
        for feature in job.stack.layers[layer].features
        if feature.name == name and feature.via is not None
    }
    return bool(vias and np.isin(region.feature[list(columns_along(region, cell, cut))], list(vias)).any())


def _with(flat: Ensemble, outcome: Outcome, surfaces: Sequence[SurfaceTimes], *, best: bool) -> Outcome:
    """An outcome with the surfaces' moments in place of the columns', each column in parts that come down in turn."""
    upper: dict[int, Carried] = {}
    spoilt: dict[int, Carried] = {}
    by_cells = {row for surface in surfaces if surface.cut is None for row in surface.spoilt}
    for surface in sorted(surfaces, key=lambda s: s.cut is not None):  # what a cell tells, no section tells better
        upper |= {row: one for row, one in surface.upper.items() if row not in upper}
        # Of what several lines tell of a loss, the earliest counts.
        for row, one in surface.spoilt.items():
            if row not in spoilt or (row not in by_cells and one.best_s[0] < spoilt[row].best_s[0]):
                spoilt[row] = one

    def moments(one: Carried) -> Array:
        return one.best_s[:, None] if best else one.draws_s

    upper_s = [moments(upper[n]) if n in upper else row[None] for n, row in enumerate(outcome.upper_s)]
    upper_area = [area * (PARTS if n in upper else np.ones(1)) for n, area in enumerate(outcome.upper_area)]
    parts = [len(PARTS) if n in upper else 1 for n in range(len(upper_s))]
    spoilt_s = [moments(spoilt[n]) if n in spoilt else row[None] for n, row in enumerate(outcome.spoilt_s)]
    spoils = [
        replace(spoil, area=spoil.area * share)
        for n, spoil in enumerate(outcome.spoilt)
        for share in (PARTS.tolist() if n in spoilt else [1.0])
    ]
    job = flat.inputs.job
    assert job.goal is not None
    all_upper, all_area, all_spoilt = np.concatenate(upper_s), np.concatenate(upper_area), np.concatenate(spoilt_s)
    lost_s, lost_by = first_lost(spoils, all_spoilt)
    return replace(
        outcome,
        exposed_s=area_quantile(all_upper, all_area, job.goal.clear),
        lost_s=lost_s,
        lost_by=lost_by,
        spoilt=tuple(spoils),
        spoilt_s=all_spoilt,
        upper_s=all_upper,
        upper_area=all_area,
        wanted=tuple(where for where, count in zip(outcome.wanted, parts, strict=True) for _ in range(count)),
    )
