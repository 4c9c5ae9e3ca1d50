"""Many dies and mills that may be true: the draws, what each reaches when, and what share of them succeeds.

The only owner of random numbers. Every uncertain input has a name and a stream of its own, made from the seed
and that name, so that adding an input leaves the draws of all others as they were.
"""

from __future__ import annotations

import zlib
from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from statistics import NormalDist
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam, Process
from stackmill.errors import InputError
from stackmill.jobs import Job
from stackmill.rate_model import RateModel, rate_model
from stackmill.timing.fall import NEVER, Fall, area_quantile, fall
from stackmill.timing.plan import LOST_SHARE, Ground, Spot, fall_steps, ground

Array = NDArray[np.float64]

DRAWS = 4096
SEED = 20_26
CHUNK = 2048  # draws that fall together: few enough for a processor's cache, and the same for any --jobs


def latin_hypercube(names: Sequence[str], draws: int, seed: int) -> Array:
    """Standard normal draws (names, D): each row takes the middle of each of D equal shares of the bell once.

    Source: McKay, Beckman & Conover, Technometrics 21, 239 (1979), from memory.
    """
    bell = NormalDist()
    strata = np.array([bell.inv_cdf((i + 0.5) / draws) for i in range((draws + 1) // 2)])
    values = np.concatenate([strata, -strata[: draws // 2][::-1]])
    rows = [_stream(seed, name).permutation(values) for name in names]
    return np.stack(rows) if rows else np.zeros((0, draws))


def _stream(seed: int, name: str) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64([seed, zlib.crc32(name.encode())]))


@dataclass(frozen=True)
class Inputs:
    """The uncertain inputs of a job, by name: the rows (N,) of every draw."""

    job: Job
    model: RateModel
    names: tuple[str, ...]
    rate_root: Array

    @classmethod
    def of(cls, job: Job) -> Inputs:
        """All inputs of a job that can differ from their best values."""
        model = rate_model(job.mill, job.recipe.steps, job.milled_materials)
        return cls(job, model, tuple(_names(job, model)), model.belief.root())

    def sample(self, z: Array) -> Sample:
        """Dies and mills from standard normal draws (N, D)."""
        rows = dict(zip(self.names, z, strict=True))
        belief = self.model.belief
        free = np.stack([rows[name] for name in belief.names])
        return Sample(self, rows, belief.mean[:, None] + self.rate_root @ free)

    def best(self) -> Sample:
        """The one die and mill in which every input has its best value."""
        return self.sample(np.zeros((len(self.names), 1)))


@dataclass(frozen=True)
class Sample:
    """D dies and mills that may be true. rows: name -> (D,); parameters (P, D) of the rate model."""

    inputs: Inputs
    rows: Mapping[str, Array]
    parameters: Array

    @property
    def draws(self) -> int:
        """How many dies and mills there are."""
        return self.parameters.shape[1]

    def thickness_deltas_nm(self) -> list[Array]:
        """How far off each thickness input is, for each region: a list of (L, D), in nm."""
        column_map = self.inputs.job.column_map
        shared = np.zeros((len(column_map.inputs), self.draws))
        for k, i in enumerate(column_map.inputs):
            if i.thickness.sd:
                shared[k] = i.thickness.sd * self.rows[f"thickness of {i.name}"]
        regions = []
        for region in column_map.regions:
            deltas = shared.copy()
            for k, i in enumerate(column_map.inputs):
                if i.thickness.across_sd:
                    deltas[k] += i.thickness.across_sd * self.rows[f"thickness of {i.name} at {region.name}"]
            regions.append(deltas)
        return regions

    def rate_nm_per_s(self, step: int, material: str) -> Array:
        """Milling rate (D,) of a material in a step of the recipe."""
        what = self.inputs.job.recipe.steps[step]
        if isinstance(what, Process):
            return self._process_rate(what, material)
        charged = self.inputs.job.mill.doubly_charged
        share = np.full(self.draws, charged.value)
        if charged.sd:
            share = np.clip(share + charged.sd * self.rows["doubly charged share"], 0.0, 1.0)
        return self.inputs.model.rate_nm_per_s(step, material, parameters=self.parameters, doubly_charged=share)

    def _process_rate(self, step: Process, material: str) -> Array:
        name = material if material in step.rates else "other"
        rate = step.rates[name]
        if not rate.sd:
            return np.full(self.draws, rate.value)
        return rate.value * np.exp(rate.rel_sd * self.rows[f"{step.name}: rate of {name}"])

    def late_s(self) -> dict[int, Array]:
        """How much too late each step that is stopped by eye ends (D,), in s."""
        return {
            i: step.seen.within.sd * self.rows[f"eye in {step.name}"]
            for i, step in enumerate(self.inputs.job.recipe.steps)
            if isinstance(step, Beam | Process) and step.seen and step.seen.within.sd
        }


def _names(job: Job, model: RateModel) -> Iterator[str]:
    yield from model.belief.names
    if job.mill.doubly_charged.sd:
        yield "doubly charged share"
    for i in job.column_map.inputs:
        if i.thickness.sd:
            yield f"thickness of {i.name}"
        if i.thickness.across_sd:
            yield from (f"thickness of {i.name} at {region.name}" for region in job.column_map.regions)
    for step in job.recipe.steps:
        if isinstance(step, Beam | Process) and step.seen and step.seen.within.sd:
            yield f"eye in {step.name}"
        if isinstance(step, Process):
            yield from (f"{step.name}: rate of {name}" for name, rate in step.rates.items() if rate.sd)


@dataclass(frozen=True)
class Outcome:
    """What the draws reach, and when, on the clock (s); inf where never.

    layer_s[r] (C, layers, D): the layers' tops; exposed_s, lost_s (D,): the goal's two moments; upper_s (W, D)
    and upper_area (W,): the goal's upper level in each wanted column, named (region, column) in `wanted`;
    lost_by (D,): which of `lost_at` (keep number or -1 for the goal, region, column) is spoilt first;
    leg_start_s (legs, D): the start, then the end of each step that is stopped by eye; end_s (D,): the
    recipe's planned end.
    """

    layer_s: tuple[Array, ...]
    exposed_s: Array
    lost_s: Array
    lost_by: NDArray[np.intp]
    lost_at: tuple[tuple[int, int, int], ...]
    upper_s: Array
    upper_area: Array
    wanted: tuple[tuple[int, int], ...]
    leg_start_s: Array
    end_s: Array


@dataclass(frozen=True)
class Ensemble:
    """The best-value fall and all draws of a job.

    best: the fall at best values (D = 1) over `best_ground`; z (N, D): the standard normal draws behind
    `outcome`, rows as `inputs.names`; seed: what they were made from; weights (D,): shares adding up to 1.
    """

    inputs: Inputs
    best_ground: Ground
    best: Fall
    best_outcome: Outcome
    z: Array
    outcome: Outcome
    weights: Array
    seed: int


def run(job: Job, *, draws: int = DRAWS, seed: int = SEED, jobs: int = 1) -> Ensemble:
    """Let a job fall at best values and in many draws. The same answer for any number of `jobs` (threads)."""
    inputs = Inputs.of(job)
    best = inputs.best()
    best_ground = ground(job, best.thickness_deltas_nm())
    steps = fall_steps(job, best_ground, best.rate_nm_per_s, durations_s={}, late_s={})
    best_fall = fall(best_ground.columns, steps, keep_left=True)
    durations = _planned(job, best_fall)
    z = latin_hypercube(inputs.names, draws, seed)
    chunks = [z[:, k : k + CHUNK] for k in range(0, draws, CHUNK)]

    def reach(chunk: Array) -> Outcome:
        return _chunk_outcome(inputs.sample(chunk), durations)

    if jobs > 1 and len(chunks) > 1:
        with ThreadPoolExecutor(jobs) as pool:
            parts = list(pool.map(reach, chunks))
    else:
        parts = [reach(chunk) for chunk in chunks]
    outcome = _outcome(job, best_ground, best_fall)
    weights = np.full(draws, 1.0 / draws)
    return Ensemble(inputs, best_ground, best_fall, outcome, z, _join(parts), weights, seed)


def _chunk_outcome(sample: Sample, durations_s: Mapping[int, float]) -> Outcome:
    job = sample.inputs.job
    where = ground(job, sample.thickness_deltas_nm())
    steps = fall_steps(job, where, sample.rate_nm_per_s, durations_s=durations_s, late_s=sample.late_s())
    return _outcome(job, where, fall(where.columns, steps))


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


def _outcome(job: Job, where: Ground, run_down: Fall) -> Outcome:
    def reach(spot: Spot) -> Array:
        return run_down.reach(spot.region, spot.column, spot.above)

    draws = where.columns[0][0].thickness_nm.shape[1]
    layer_s = tuple(
        np.stack([[run_down.reach(r, c, int(above)) for above in row] for c, row in enumerate(boundaries)])
        for r, boundaries in enumerate(where.layer_above)
    )
    spans = run_down.spans[: len(job.recipe.steps)]
    legs = [span.end_s for span, step in zip(spans, job.recipe.steps, strict=True) if getattr(step, "seen", None)]
    upper = np.stack([reach(spot) for spot in where.goal_upper]) if where.goal_upper else np.zeros((0, draws))
    area = np.array([spot.area for spot in where.goal_upper])
    exposed = area_quantile(upper, area, job.goal.clear) if job.goal else np.full(draws, np.inf)
    spoilt = [(-1, where.goal_lower, [reach(spot) for spot in where.goal_lower])] if job.goal else []
    for k, keep in enumerate(where.keeps):
        times = [np.where(thin, 0.0, reach(spot)) for spot, thin in zip(keep.spots, keep.too_thin, strict=True)]
        spoilt.append((k, keep.spots, times))
    lost_s, lost_by, lost_at = _first_lost(spoilt, draws)
    return Outcome(
        layer_s=layer_s,
        exposed_s=exposed,
        lost_s=lost_s,
        lost_by=lost_by,
        lost_at=lost_at,
        upper_s=upper,
        upper_area=area,
        wanted=tuple((spot.region, spot.column) for spot in where.goal_upper),
        leg_start_s=np.stack([np.zeros(draws), *legs]),
        end_s=spans[-1].end_s,
    )


_Spoilt = tuple[int, Sequence[Spot], Sequence[Array]]


def _first_lost(
    spoilt: Sequence[_Spoilt], draws: int
) -> tuple[Array, NDArray[np.intp], tuple[tuple[int, int, int], ...]]:
    """When the goal or the first keep is lost (D,), and by which spot (D,) of all that could."""
    lost_s, lost_by = np.full(draws, np.inf), np.zeros(draws, dtype=np.intp)
    lost_at: list[tuple[int, int, int]] = []
    for keep, spots, times in spoilt:
        stacked = np.stack(times)
        moment = area_quantile(stacked, np.array([spot.area for spot in spots]), LOST_SHARE)
        earlier = moment < lost_s
        lost_by = np.where(earlier, len(lost_at) + np.argmax(stacked == moment, axis=0), lost_by)
        lost_s = np.where(earlier, moment, lost_s)
        lost_at += [(keep, spot.region, spot.column) for spot in spots]
    return lost_s, lost_by, tuple(lost_at)


def _join(parts: Sequence[Outcome]) -> Outcome:
    def along(name: str) -> NDArray[Any]:
        return np.concatenate([getattr(part, name) for part in parts], axis=-1)

    first = parts[0]
    return Outcome(
        layer_s=tuple(
            np.concatenate([part.layer_s[r] for part in parts], axis=-1) for r in range(len(first.layer_s))
        ),
        exposed_s=along("exposed_s"),
        lost_s=along("lost_s"),
        lost_by=along("lost_by"),
        lost_at=first.lost_at,
        upper_s=along("upper_s"),
        upper_area=first.upper_area,
        wanted=first.wanted,
        leg_start_s=along("leg_start_s"),
        end_s=along("end_s"),
    )
