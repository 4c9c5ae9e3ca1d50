"""Milling rates of a job's materials, step by step."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from stackmill.documents.calibration import CouponRate
from stackmill.documents.recipe import Beam, Process
from stackmill.jobs import Job
from stackmill.materials.material import Material
from stackmill.rates.model import RateModel, rate_model
from stackmill.rates.yields import angular_shape, normal_yield


@dataclass(frozen=True)
class RateRow:
    """The milling rate of one material in one step, with everything known of the mill in its sd.

    yield_atoms_per_ion: at the incidence, of singly charged ions, as the rate says it; rate_rel_sd: sd of ln
    rate; source: what the rate rests on. A process has a stated rate and nothing of a beam (None).
    """

    step: str
    material: str
    energy_ev: float | None
    incidence_deg: float | None
    current_density_ma_per_cm2: float | None
    yield_atoms_per_ion: float | None
    rate_nm_per_min: float
    rate_rel_sd: float
    source: str


def rate_rows(job: Job) -> list[RateRow]:
    """A row for each step that lowers and each material of the job."""
    model = rate_model(job.mill, job.recipe.steps, job.rated_materials, job.coupons)
    rows: list[RateRow] = []
    for i, step in enumerate(job.recipe.steps):
        if isinstance(step, Beam):
            rows += _beam_rows(job, model, i, step)
        elif isinstance(step, Process):
            rows += _process_rows(job, step)
    return rows


def _beam_rows(job: Job, model: RateModel, i: int, step: Beam) -> list[RateRow]:
    best, sd = model.best_nm_per_s(i), model.ln_rate_sd(i)
    current = (step.current_density or job.mill.current_density).value
    rows = []
    for m, (name, material) in enumerate(job.milled_materials.items()):
        shape = angular_shape(material, energy_ev=step.energy, gas=job.mill.gas)
        untaught = float(normal_yield(material, energy_ev=step.energy, gas=job.mill.gas))
        taught = float(np.exp(model.ln_factor(i)[m]))
        rows.append(
            RateRow(
                step=step.name,
                material=name,
                energy_ev=step.energy,
                incidence_deg=step.incidence,
                current_density_ma_per_cm2=current,
                yield_atoms_per_ion=untaught * float(shape.ratio(np.radians(step.incidence))) * taught,
                rate_nm_per_min=60.0 * float(best[m]),
                rate_rel_sd=float(sd[m]),
                source=basis(material, job.coupons),
            )
        )
    return rows


def _process_rows(job: Job, step: Process) -> list[RateRow]:
    rows = []
    for name in job.milled_materials:
        rate = step.rate(name)
        assert rate is not None
        sd = rate.rel_sd if rate.sd else 0.0
        rows.append(RateRow(step.name, name, None, None, None, None, 60.0 * rate.value, sd, "stated in the recipe"))
    return rows


def basis(material: Material, coupons: Sequence[CouponRate] = ()) -> str:
    """What a material's rate rests on, in a few words."""
    own = [one for one in coupons if one.material == material.name]
    if own:
        where = ", ".join(f"{one.name!r} at {one.energy:.4g} eV and {one.incidence:.4g} deg" for one in own)
        return f"coupon{'s' if len(own) > 1 else ''} {where}"
    if material.measured_rates:
        where = ", ".join(f"{m.energy_ev:.4g} eV and {m.incidence_deg:.4g} deg" for m in material.measured_rates)
        return f"measured on this mill at {where}"
    if material.mixture:
        parts = " + ".join(f"{100 * part.share:.3g} % {part.material.name}" for part in material.mixture)
        return f"mixture of {parts} by volume, {100 * material.mixing_ln_sd:.0f} % for mixing"
    if material.estimate:
        return "estimate, good to a factor 1.5; mill a coupon"
    return f"library: {material.tie.basis}" if material.tie else "library"
