"""The uncertain inputs of a job, and how draws of them become dies and mills."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import ThicknessInput
from stackmill.documents.recipe import OTHER, Beam, Process
from stackmill.frozen import frozen
from stackmill.jobs import Job
from stackmill.rates.model import RateModel, rate_model

Array = NDArray[np.float64]


@frozen
class Inputs:
    """The uncertain inputs of a job, by name: the rows (N,) of every draw."""

    job: Job
    model: RateModel
    names: tuple[str, ...]
    rate_root: Array

    @classmethod
    def of(cls, job: Job) -> Inputs:
        """All inputs of a job that can differ from their best values."""
        model = rate_model(job.mill, job.recipe.steps, job.rated_materials, job.coupons)
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


@frozen
class Sample:
    """D dies and mills that may be true. rows: name -> (D,); parameters (P, D) of the rate model."""

    inputs: Inputs
    rows: Mapping[str, Array]
    parameters: Array

    @property
    def draws(self) -> int:
        """How many dies and mills there are."""
        return int(self.parameters.shape[1])

    def thickness_deltas_nm(self) -> list[Array]:
        """How far off each thickness input is, for each region: a list of (L, D), in nm."""
        column_map = self.inputs.job.column_map
        shared = np.zeros((len(column_map.inputs), self.draws))
        for k, i in enumerate(column_map.inputs):
            if i.thickness.sd:
                shared[k] = i.thickness.sd * self.rows[_called(i)]
        if column_map.scale_sd:
            # One error of the microscope stretches everything it measured, which the substrate's depth is not.
            last = len(column_map.layers) - 1
            value = np.array([0.0 if i.layer == last else i.thickness.value for i in column_map.inputs])
            shared += np.outer(value, column_map.scale_sd * self.rows["measured scale"])
        regions = []
        for region in column_map.regions:
            deltas = shared.copy()
            for k, i in enumerate(column_map.inputs):
                if i.thickness.across_sd:
                    deltas[k] += i.thickness.across_sd * self.rows[f"{_called(i)} at {region.name}"]
            regions.append(deltas)
        return regions

    def region_share(self) -> tuple[Array, ...] | None:
        """The share (D,) of the beam's current that reaches each region; None: the whole everywhere."""
        job = self.inputs.job
        sd = job.mill.uniformity_sd
        if not sd and all(share == 1.0 for share in job.beam_share):
            return None
        return tuple(
            share * np.exp(sd * self.rows[f"current density at {region.name}"]) if sd else np.full(self.draws, share)
            for share, region in zip(job.beam_share, job.column_map.regions, strict=True)
        )

    def rate_nm_per_s(self, step: int) -> Array:
        """Milling rates (M or more, D) in a step of the recipe, the column map's materials first."""
        job = self.inputs.job
        what = job.recipe.steps[step]
        if isinstance(what, Process):
            return np.stack([self._process_rate(what, name) for name in job.column_map.materials])
        return self.inputs.model.rate_nm_per_s(step, self.parameters)

    def _process_rate(self, step: Process, material: str) -> Array:
        name = material if material in step.rates else OTHER
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


def _called(measured: ThicknessInput) -> str:
    return f"{'height' if measured.is_height else 'thickness'} of {measured.name}"


def _names(job: Job, model: RateModel) -> Iterator[str]:
    yield from model.belief.names
    if job.mill.uniformity_sd:
        yield from (f"current density at {region.name}" for region in job.column_map.regions)
    if job.column_map.scale_sd:
        yield "measured scale"
    for i in job.column_map.inputs:
        if i.thickness.sd:
            yield _called(i)
        if i.thickness.across_sd:
            yield from (f"{_called(i)} at {region.name}" for region in job.column_map.regions)
    for step in job.recipe.steps:
        if isinstance(step, Beam | Process) and step.seen and step.seen.within.sd:
            yield f"eye in {step.name}"
        if isinstance(step, Process):
            yield from (f"{step.name}: rate of {name}" for name, rate in step.rates.items() if rate.sd)
