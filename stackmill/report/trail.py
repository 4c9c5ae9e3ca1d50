"""Where is this number from? Laws, values, sources, calibration; and last, what would narrow the answer most."""

from __future__ import annotations

from collections.abc import Sequence

from stackmill.documents.recipe import Beam
from stackmill.jobs import Job
from stackmill.materials.material import LabRate
from stackmill.planning.stops import StopTable
from stackmill.rates.yields import trail

_SHARES_SHOWN = 6


def why_rates(job: Job) -> str:
    """The trail of every material's rate in the first beam step that mills."""
    energies = [step.energy for step in job.recipe.steps if isinstance(step, Beam)]
    lines = ["Where the rates come from"]
    for material in job.milled_materials.values():
        for energy_ev in dict.fromkeys(energies):
            first, *rest = trail(material, energy_ev=energy_ev, gas=job.mill.gas, citation=job.library.citation)
            lines += [f"- {first}", *(f"    {line}" for line in rest)]
        lines += [
            f"    measured on this mill: {60 * m.rate.value:.4g} nm/min ± {100 * m.rate.rel_sd:.2g} %"
            f" at {m.energy_ev:.4g} eV, {m.incidence_deg:.4g} deg, {m.current_density.value:.4g} mA/cm2, {_day(m)}"
            for m in material.measured_rates
        ]
    lines += _coupon_lines(job)
    return "\n".join(lines)


def _coupon_lines(job: Job) -> list[str]:
    """The calibration a job rests on: where it comes from, and each coupon."""
    if job.calibration is None:
        return []
    told = job.calibration
    lines = [
        f"- calibration {told.title}: made {told.made} from {told.data} (sha256 {told.data_sha256[:12]}),"
        f" {told.verdict}"
    ]
    return lines + [
        f"    {one.name}: {one.material} {60 * one.rate.value:.4g} nm/min ± {100 * one.rate.rel_sd:.2g} % at"
        f" {one.energy:.4g} eV, {one.incidence:.4g} deg, {one.current_density.value:.4g} mA/cm2,"
        f" weight {100 * one.weight:.3g} %"
        for one in told.coupons
    ]


def why_stops(table: StopTable, warnings: Sequence[str] = ()) -> str:
    """The trail of a stop table: the draws, the rates, and the inputs that widen the answer most."""
    job = table.ensemble.inputs.job
    mill = job.mill
    lines = [
        "How the times are found",
        f"- {len(table.ensemble.weights)} draws (Latin hypercube, seed {table.ensemble.seed}) of"
        f" {len(table.ensemble.inputs.names)} uncertain inputs; thickness over rate, segment after segment",
        f"- mill: {mill.gas}, {mill.current_density.value:.4g} mA/cm2 ± {100 * mill.current_density.rel_sd:.2g} %,"
        f" divergence {mill.divergence:.3g} deg, doubly charged {100 * mill.doubly_charged.value:.3g} % of the"
        f" current, dial zero ± {mill.stage.zero_error.sd:.3g} deg",
        f"- inputs sha256 {job.inputs_sha256}",
        "",
        why_rates(job),
    ]
    if warnings:
        lines += ["", "Warnings", *(f"- {text}" for text in warnings)]
    if table.shares:
        lines += ["", "What widens the moment of exposure most (share of its variance, read off the draws)"]
        lines += [f"- {100 * s.share:4.0f} %  {s.name}" for s in table.shares[:_SHARES_SHOWN]]
        lines.append(f"To narrow it: {_advice(table.shares[0].name)}.")
    return "\n".join(lines)


def _day(measured: LabRate) -> str:
    return "the same day, its current with it" if measured.same_day else "whose current's error counts again"


def _advice(name: str) -> str:
    """What to measure when this input is the weakest."""
    if name.startswith(("thickness of ", "height of ")):
        return f"measure the {name} on a section, or look on the way down (a step with `seen`)"
    if name.startswith("eye in "):
        return "make the look sharper, or look again later"
    if name.startswith("current density at "):
        return "map the beam, and give the mill a profile"
    if name.startswith("current density"):
        return "measure the current, or mill a coupon with it the same day"
    if ": rate of " in name:
        step, _, material = name.partition(": rate of ")
        return f"etch a test piece of {material} in {step!r}"
    known = {
        "dial zero error": "check the stage's zero",
        "doubly charged share": "measure the share of doubly charged ions, or mill a coupon the same day",
        "measured scale": "calibrate the microscope's scale",
    }
    return known.get(name) or f"mill a coupon of {name.split(':', maxsplit=1)[0]} at this setting"
