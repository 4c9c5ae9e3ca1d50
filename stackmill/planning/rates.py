"""Milling rates of a job's materials, step by step."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from stackmill.documents.recipe import Beam
from stackmill.jobs import Job
from stackmill.materials.material import Material
from stackmill.rates.model import rate_model
from stackmill.rates.yields import angular_shape, normal_yield


@dataclass(frozen=True)
class RateRow:
    """The milling rate of one material in one step, with everything known of the mill in its sd.

    yield_atoms_per_ion: at the incidence, of singly charged ions; rate_rel_sd: sd of ln rate; source: what the
    rate rests on.
    """

    step: str
    material: str
    energy_ev: float
    incidence_deg: float
    current_density_ma_per_cm2: float
    yield_atoms_per_ion: float
    rate_nm_per_min: float
    rate_rel_sd: float
    source: str


def rate_rows(job: Job) -> list[RateRow]:
    """A row for each beam step and each material of the job."""
    model = rate_model(job.mill, job.recipe.steps, job.milled_materials)
    rows = []
    for i, step in enumerate(job.recipe.steps):
        if not isinstance(step, Beam):
            continue
        best, sd = model.best_nm_per_s(i, job.mill.doubly_charged.value), model.ln_rate_sd(i)
        current = (step.current_density or job.mill.current_density).value
        for m, (name, material) in enumerate(job.milled_materials.items()):
            shape = angular_shape(material, energy_ev=step.energy, gas=job.mill.gas)
            at_angle = float(shape.ratio(np.radians(step.incidence)))
            rows.append(
                RateRow(
                    step=step.name,
                    material=name,
                    energy_ev=step.energy,
                    incidence_deg=step.incidence,
                    current_density_ma_per_cm2=current,
                    yield_atoms_per_ion=at_angle
                    * float(normal_yield(material, energy_ev=step.energy, gas=job.mill.gas)),
                    rate_nm_per_min=60.0 * float(best[m]),
                    rate_rel_sd=float(sd[m]),
                    source=basis(material),
                )
            )
    return rows


def basis(material: Material) -> str:
    """What a material's rate rests on, in a few words."""
    if material.measured_rates:
        return "measured on this mill"
    if material.estimate:
        return "estimate, good to a factor 1.5; mill a coupon"
    return f"library: {material.tie.basis}" if material.tie else "library"
