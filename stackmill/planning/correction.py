"""The stop table put right by surfaces: where a column that decides is not flat and lit until it does.

Sections are cut through the deciding columns and run (the cell, if asked for); their moments take the place of the
columns', and the window is found again, until no column decides that only its own fall speaks for.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from stackmill.ensemble.run import Ensemble, Outcome, first_lost
from stackmill.errors import InputError
from stackmill.frozen import frozen
from stackmill.planning.carrying import PARTS, Carried, SurfaceTimes, spoken_for, surface_times
from stackmill.planning.windows import Window, find_window
from stackmill.relief.gridding import Cut
from stackmill.relief.watch import Watch
from stackmill.timing.fall import area_quantile

Array = NDArray[np.float64]

_ROUNDS = 4

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
        spoken = {(s.region, c) for s in surfaces for c in s.columns}
        open_ = [where for where in doubtful(ensemble, window) if where not in spoken and where not in unsaid]
        if not open_:
            break
        for region, cut in _cuts(flat, open_, cell=cell):
            try:
                surfaces.append(surface_times(flat, region, cut, watch=watch))
            except InputError as error:
                unsaid |= {where: error.what for where in open_ if where[0] == region}
        spoken = {(s.region, c) for s in surfaces for c in s.columns}
        unsaid |= {where: _why_not(flat, where) for where in open_ if where not in spoken and where not in unsaid}
        ensemble = replace(
            flat,
            outcome=_with(flat, flat.outcome, surfaces, best=False),
            best_outcome=_with(flat, flat.best_outcome, surfaces, best=True),
        )
        window = find_window(ensemble, confidence)
    still = set(doubtful(ensemble, window))
    return Correction(
        ensemble,
        window,
        tuple(surfaces),
        tuple((w, why) for w, why in unsaid.items() if w in still),
        _error_s(flat, window, surfaces),
    )


def _error_s(flat: Ensemble, window: Window, surfaces: Sequence[SurfaceTimes]) -> float:
    errors = [0.0]
    for surface in surfaces:
        errors += [one.error_s for row, one in surface.upper.items() if flat.outcome.wanted[row] == window.exposed_by]
        errors += [
            one.error_s for row, one in surface.spoilt.items() if flat.outcome.spoilt[row].place == window.lost_by
        ]
    return max(errors)


def _why_not(ensemble: Ensemble, where: tuple[int, int]) -> str:
    region = ensemble.inputs.job.column_map.regions[where[0]]
    if region.placeless.any():
        return "a pattern density in its region has no place"
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
        centres = [region.centre_nm[c].tolist() for c in sorted(wanted)]
        speaks = {cut: set(spoken_for(ensemble, r, cut)) for x, y in centres for cut in (Cut("y", y), Cut("x", x))}
        while wanted:
            best = max(speaks, key=lambda cut: (len(speaks[cut] & wanted), len(speaks[cut])))
            if not speaks[best] & wanted:
                break
            found.append((r, best))
            wanted -= speaks[best]
    return found


def _with(flat: Ensemble, outcome: Outcome, surfaces: Sequence[SurfaceTimes], *, best: bool) -> Outcome:
    """An outcome with the surfaces' moments in place of the columns', each column in parts that come down in turn."""
    upper: dict[int, Carried] = {}
    spoilt: dict[int, Carried] = {}
    for surface in surfaces:
        upper |= {row: one for row, one in surface.upper.items() if row not in upper}
        spoilt |= {row: one for row, one in surface.spoilt.items() if row not in spoilt}

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
