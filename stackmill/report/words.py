"""Quantities and steps in words, the same everywhere."""

from __future__ import annotations

from stackmill.documents.mill import Stage
from stackmill.documents.recipe import Beam, Cover, Process, Seen, Strip, Target, Uncover
from stackmill.units import clock, format_time

Step = Beam | Process | Strip | Cover | Uncover


def length(nm: float) -> str:
    """A length as people write it: nm up to a micron, then um, then mm."""
    for unit, size in (("mm", 1e6), ("um", 1e3)):
        if abs(nm) >= size:
            return f"{nm / size:.4g} {unit}"
    return f"{nm:.4g} nm"


def energy(ev: float) -> str:
    """An energy as people write it: eV up to a thousand, then keV."""
    return f"{ev / 1e3:.4g} keV" if ev >= 1e3 else f"{ev:.4g} eV"


def dial(incidence_deg: float, stage: Stage) -> str:
    """The angle as this mill's dial reads it, and from the normal where that differs."""
    if stage.dial == "from surface":
        return f"dial {90.0 - incidence_deg:.4g}° from the surface ({incidence_deg:.4g}° from the normal)"
    return f"dial {incidence_deg:.4g}° from the normal"


def step_in_words(step: Step, stage: Stage) -> str:
    """One step of a recipe as a line for the person at the mill."""
    if isinstance(step, Cover):
        return f"cover {', '.join(step.cover)} with {step.with_}"
    if isinstance(step, Uncover):
        return f"uncover {', '.join(step.uncover)}"
    if isinstance(step, Strip):
        return f"{step.name}: strip {', '.join(step.strips)} wherever it lies on top"
    if isinstance(step, Process):
        rates = ", ".join(f"{name} {60 * rate.value:.4g} nm/min" for name, rate in step.rates.items())
        return f"{step.name}: process lowering {rates}; {_end(step)}"
    return f"{step.name}: {energy(step.energy)}, {dial(step.incidence, stage)}, {step.motion}; {_end(step)}"


def _end(step: Beam | Process) -> str:
    if step.for_ is not None:
        return f"for {format_time(step.for_)}"
    if step.seen is not None:
        within = f" within ± {format_time(step.seen.within.sd)}" if step.seen.within.sd else " by a perfect eye"
        where = f" of {' and '.join(step.seen.in_)}" if step.seen.in_ else ""
        return f"until {_target(step.seen)} is seen over {100 * step.seen.area:.3g} %{where}{within}"
    assert step.to is not None
    where = f" in {', '.join(step.to.in_)}" if step.to.in_ else ""
    share = f", {percent(step.to.area)} of it" if step.to.area is not None else ""
    return f"planned to end at {_target(step.to)}{where}{share}"


def _target(target: Target | Seen) -> str:
    return target.layer if target.feature is None else f"{target.layer} / {target.feature}"


def percent(share: float) -> str:
    """A share as people read it: one decimal at most."""
    return f"{100.0 * share:.1f}".removesuffix(".0") + " %"


def moment(seconds: float | None) -> str:
    """A time on the clock; `never` for None."""
    return "never" if seconds is None else clock(seconds)
