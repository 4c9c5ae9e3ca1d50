"""What a job states without an error, and what a forecast therefore takes as exact."""

from __future__ import annotations

from stackmill.documents.recipe import Beam, Process
from stackmill.jobs.job import Job
from stackmill.units import Measure


def taken_as_exact(job: Job) -> tuple[str, ...]:
    """The thicknesses, current densities and process rates given without a ±, in words.

    The substrate has no end to reach, films on features are told by their drawings, and thicknesses measured on one
    scale have its error.
    """
    thicknesses = [] if job.stack.measured else job.stack.layers[:-1]
    found = [f"thickness of {layer.name}" for layer in thicknesses if _exact(layer.thickness)]
    beams = [step for step in job.recipe.steps if isinstance(step, Beam)]
    if _exact(job.mill.current_density) and any(step.current_density is None for step in beams):
        found.append("current density of the mill")
    found += [f"current density in {s.name}" for s in beams if s.current_density and _exact(s.current_density)]
    for step in job.recipe.steps:
        if isinstance(step, Process):
            found += [f"rate of {name} in {step.name}" for name, rate in step.rates.items() if _exact(rate)]
    return tuple(found)


def _exact(measure: Measure) -> bool:
    """Whether a number is given without an error; a rate of nothing needs none."""
    return measure.value > 0.0 and measure.sd == 0.0 and measure.across_sd == 0.0
