"""A job let down in many draws: what each reaches when, and when the goal is exposed and lost."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam, Process
from stackmill.ensemble.draws import latin_hypercube
from stackmill.ensemble.inputs import Inputs, Sample
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.timing.fall import NEVER, Fall, Step, area_quantile, fall
from stackmill.timing.plan import ANY_SHARE, LOST_SHARE, Ground, Spot, fall_steps, ground
from stackmill.timing.tree import SegmentTree

Array = NDArray[np.float64]
Index = NDArray[np.intp]

DRAWS = 4096
SEED = 2026
CHUNK = 2048  # draws that fall together: few enough for a processor's cache, and the same for any --jobs


@frozen
class Spoil:
    """A place whose passing spoils something: keep (its number, -1 for the goal), region, column, area."""

    keep: int
    region: int
    column: int
    area: float

    @property
    def place(self) -> tuple[int, int]:
        """Its region and column."""
        return self.region, self.column


@frozen
class Outcome:
    """What the draws reach, and when, on the clock (s); inf where never.

    level_s[r] (N, D): the moments of a region's distinct levels; level[r] (C, layers): which of them each layer's top
    is in each column. exposed_s, lost_s (D,): the goal's two moments; upper_s (W, D) and upper_area (W,): the
    goal's upper level in each wanted column, named (region, column) in `wanted`; spoilt (P): the places whose
    passing spoils something, spoilt_s (P, D): when; lost_by (D,): which of them is first; leg_start_s (legs, D): the
    start, then the end of each step that is stopped by eye; end_s (D,): the recipe's planned end.
    """

    level_s: tuple[Array, ...]
    level: tuple[Index, ...]
    exposed_s: Array
    lost_s: Array
    lost_by: NDArray[np.intp]
    spoilt: tuple[Spoil, ...]
    spoilt_s: Array
    upper_s: Array
    upper_area: Array
    wanted: tuple[tuple[int, int], ...]
    leg_start_s: Array
    end_s: Array

    def reached_s(self, region: int, column: int, layer: int) -> Array:
        """When a layer's top is reached in a column (D,), on the clock; inf where never."""
        moments: Array = self.level_s[region][self.level[region][column, layer]]
        return moments


@frozen
class _Levels:
    """The distinct levels of a region: level (C, layers), and one column and boundary that stands for each."""

    level: Index
    spots: tuple[tuple[int, int], ...]


@frozen
class Descent:
    """D draws let down by columns: their ground, the recipe as steps to fall by, and the fall."""

    ground: Ground
    steps: tuple[Step, ...]
    fall: Fall


@frozen
class Ensemble:
    """The best-value fall and all draws of a job.

    best: the fall at best values (D = 1) over `best_ground`, by `best_steps`; durations_s: how long each `to` step
    is planned; z (N, D): the standard normal draws behind `outcome`, rows as `inputs.names`; seed: what they were
    made from; weights (D,): shares adding up to 1.
    """

    inputs: Inputs
    best_ground: Ground
    best: Fall
    best_outcome: Outcome
    z: Array
    outcome: Outcome
    weights: Array
    seed: int
    best_steps: tuple[Step, ...]
    durations_s: Mapping[int, float]

    @property
    def best_descent(self) -> Descent:
        """The descent at best values."""
        return Descent(self.best_ground, self.best_steps, self.best)

    def descent(self, z: Array) -> Descent:
        """Some draws (N, D) let down once more, with everything that happens to them."""
        return _descent(self.inputs.sample(z), self.durations_s)


def run(job: Job, *, draws: int = DRAWS, seed: int = SEED, jobs: int = 1) -> Ensemble:
    """Let a job fall at best values and in many draws. The same answer for any number of `jobs` (threads)."""
    inputs = Inputs.of(job)
    best = inputs.best()
    best_ground = ground(job, best.thickness_deltas_nm())
    steps = fall_steps(
        job, best_ground, best.rate_nm_per_s, durations_s={}, late_s={}, region_share=best.region_share()
    )
    best_fall = fall(best_ground.columns, steps, keep_left=True)
    durations = _planned(job, best_fall)
    levels = [
        _distinct_levels(boundaries, tree)
        for boundaries, tree in zip(best_ground.layer_above, best_fall.trees, strict=True)
    ]
    z = latin_hypercube(inputs.names, draws, seed)
    chunks = [z[:, k : k + CHUNK] for k in range(0, draws, CHUNK)]

    def reach(chunk: Array) -> Outcome:
        return _chunk_outcome(inputs.sample(chunk), durations, levels)

    if jobs > 1 and len(chunks) > 1:
        from concurrent.futures import ThreadPoolExecutor

        with ThreadPoolExecutor(jobs) as pool:
            parts = list(pool.map(reach, chunks))
    else:
        parts = [reach(chunk) for chunk in chunks]
    outcome = _outcome(job, best_ground, best_fall, levels)
    weights = np.full(draws, 1.0 / draws)
    return Ensemble(inputs, best_ground, best_fall, outcome, z, _join(parts), weights, seed, tuple(steps), durations)


def _distinct_levels(boundaries: Index, tree: SegmentTree) -> _Levels:
    """Columns that are alike down to a level meet it at the same moment in every draw: it is one level."""
    known: dict[int, int] = {}
    spots: list[tuple[int, int]] = []
    level = np.zeros_like(boundaries)
    for c, row in enumerate(boundaries.tolist()):
        for k, above in enumerate(row):
            number = tree.paths[c][above - 1] if above else -1
            if number not in known:
                known[number] = len(spots)
                spots.append((c, above))
            level[c, k] = known[number]
    return _Levels(level, tuple(spots))


def _descent(sample: Sample, durations_s: Mapping[int, float]) -> Descent:
    job = sample.inputs.job
    where = ground(job, sample.thickness_deltas_nm())
    steps = fall_steps(
        job,
        where,
        sample.rate_nm_per_s,
        durations_s=durations_s,
        late_s=sample.late_s(),
        region_share=sample.region_share(),
    )
    return Descent(where, tuple(steps), fall(where.columns, steps))


def _chunk_outcome(sample: Sample, durations_s: Mapping[int, float], levels: Sequence[_Levels]) -> Outcome:
    down = _descent(sample, durations_s)
    return _outcome(sample.inputs.job, down.ground, down.fall, levels)


def _planned(job: Job, best: Fall) -> dict[int, float]:
    """How long each `to` step lasts: until the level is met at best values."""
    lengths = {}
    for i, step in enumerate(job.recipe.steps):
        if not isinstance(step, Beam | Process) or (step.to or step.seen) is None:
            continue
        length = float(best.spans[i].length_s[0])
        if length <= 0.0 or length >= NEVER:
            raise job.step_error(i, passed=length <= 0.0)
        if step.to is not None:
            lengths[i] = length
    return lengths


def _outcome(job: Job, where: Ground, run_down: Fall, levels: Sequence[_Levels]) -> Outcome:
    def reach(spot: Spot) -> Array:
        return run_down.reach(spot.region, spot.column, spot.above)

    draws = where.columns[0][0].draws
    level_s = tuple(
        np.stack([run_down.reach(r, c, above) for c, above in region.spots]) for r, region in enumerate(levels)
    )
    spans = run_down.spans[: len(job.recipe.steps)]
    legs = [span.end_s for span, step in zip(spans, job.recipe.steps, strict=True) if getattr(step, "seen", None)]
    upper = np.stack([reach(spot) for spot in where.goal_upper]) if where.goal_upper else np.zeros((0, draws))
    area = np.array([spot.area for spot in where.goal_upper])
    exposed = area_quantile(upper, area, job.goal.clear) if job.goal else np.full(draws, np.inf)
    spoilt = [Spoil(-1, spot.region, spot.column, spot.area) for spot in where.goal_lower]
    spoilt_s = [reach(spot) for spot in where.goal_lower]
    for k, keep in enumerate(where.keeps):
        spoilt += [Spoil(k, spot.region, spot.column, spot.area) for spot in keep.spots]
        spoilt_s += [np.where(thin, 0.0, reach(spot)) for spot, thin in zip(keep.spots, keep.too_thin, strict=True)]
    times = np.stack(spoilt_s) if spoilt_s else np.zeros((0, draws))
    lost_s, lost_by = first_lost(spoilt, times)
    return Outcome(
        level_s=level_s,
        level=tuple(region.level for region in levels),
        exposed_s=exposed,
        lost_s=lost_s,
        lost_by=lost_by,
        spoilt=tuple(spoilt),
        spoilt_s=times,
        upper_s=upper,
        upper_area=area,
        wanted=tuple((spot.region, spot.column) for spot in where.goal_upper),
        leg_start_s=np.stack([np.zeros(draws), *legs]),
        end_s=spans[-1].end_s,
    )


def first_lost(spoilt: Sequence[Spoil], times: Array) -> tuple[Array, NDArray[np.intp]]:
    """When the goal or the first keep is lost (D,), and by which (D,) of some places passed at times (P, D)."""
    draws = times.shape[1]
    lost_s, lost_by = np.full(draws, np.inf), np.zeros(draws, dtype=np.intp)
    area = np.array([one.area for one in spoilt])
    for keep in dict.fromkeys(one.keep for one in spoilt):
        own = np.array([k for k, one in enumerate(spoilt) if one.keep == keep])
        moment = area_quantile(times[own], area[own], LOST_SHARE if keep < 0 else ANY_SHARE)
        earlier = moment < lost_s
        lost_by = np.where(earlier, own[np.argmax(times[own] == moment, axis=0)], lost_by)
        lost_s = np.where(earlier, moment, lost_s)
    return lost_s, lost_by


def _join(parts: Sequence[Outcome]) -> Outcome:
    def along(name: str) -> NDArray[Any]:
        return np.concatenate([getattr(part, name) for part in parts], axis=-1)

    first = parts[0]
    return Outcome(
        level_s=tuple(np.concatenate([part.level_s[r] for part in parts], axis=-1) for r in range(len(first.level_s))),
        level=first.level,
        exposed_s=along("exposed_s"),
        lost_s=along("lost_s"),
        lost_by=along("lost_by"),
        spoilt=first.spoilt,
        spoilt_s=along("spoilt_s"),
        upper_s=along("upper_s"),
        upper_area=first.upper_area,
        wanted=first.wanted,
        leg_start_s=along("leg_start_s"),
        end_s=along("end_s"),
    )
