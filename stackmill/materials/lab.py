"""A lab's own materials: laid over an entry of the library, copied from one, or estimated from atoms."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from types import MappingProxyType
from typing import Any

from stackmill.documents.material import LabMaterial, MeasuredRate
from stackmill.errors import InputError
from stackmill.materials.material import AngularData, Atom, Caution, LabRate, Material, Sourced

LAB_SOURCE = "this lab's materials file"
UNSTATED_DENSITY_REL_SD = 0.05


def overlay(lab: LabMaterial, base: Material | None, atoms: Mapping[str, Atom]) -> Material:
    """The material `lab` describes: its own keys first, then those of `base`, else an estimate from atoms.

    Raises InputError when the composition names something that is no element of the table.
    """
    changes: dict[str, Any] = {
        "origin": LAB_SOURCE,
        "measured_rates": tuple(map(_lab_rate, lab.measured_rate)),
    }
    if lab.title is not None:
        changes["title"] = lab.title
    if lab.kind is not None:
        changes["kind"] = lab.kind
    if lab.aliases:
        changes["aliases"] = lab.aliases
    if lab.toxicity is not None:
        changes["toxicity"] = Caution(lab.toxicity, LAB_SOURCE, True)
    if lab.density is not None:
        changes["density"] = _density(lab)
    if base is None or lab.composition is not None:
        return replace(_estimated(lab, atoms), **changes)
    if lab.like is not None:
        changes |= {"name": lab.name, "like": base.name, "aliases": lab.aliases}
        changes.setdefault("title", f"{lab.name}, like {base.name}")
    return replace(base, **changes)


def _lab_rate(measured: MeasuredRate) -> LabRate:
    return LabRate(
        rate=measured.rate,
        energy_ev=measured.energy,
        incidence_deg=measured.incidence,
        current_density=measured.current_density,
        same_day=measured.same_day,
    )


def _density(lab: LabMaterial) -> Sourced:
    assert lab.density is not None
    sd = lab.density.sd or UNSTATED_DENSITY_REL_SD * lab.density.value
    told = "as the lab states it" if lab.density.sd else "as the lab states it; no ± given, 5 % taken"
    return Sourced(lab.density.value, sd, "g/cm3", told, LAB_SOURCE, True)


def _estimated(lab: LabMaterial, atoms: Mapping[str, Atom]) -> Material:
    """A material known by composition and density only: the compound rule, and an sd that says so."""
    assert lab.composition is not None
    missing = [symbol for symbol in lab.composition if symbol not in atoms]
    if missing:
        raise InputError(
            f"the composition of '{lab.name}' names {', '.join(missing)}, of which no atomic data are held",
            cure="use `like:` with a library material instead",
            key=lab.name,
        )
    total = sum(lab.composition.values())
    used = tuple(atoms[symbol] for symbol in lab.composition)
    mean_mass = sum(atom.m_u * n for atom, n in zip(used, lab.composition.values(), strict=True)) / total
    formation = lab.formation
    return Material(
        name=lab.name,
        title=f"{lab.name} (the lab's own; yield estimated from its composition)",
        kind=lab.kind or "dielectric",
        aliases=lab.aliases,
        composition=MappingProxyType(dict(lab.composition)),
        density=_density(lab),
        mean_mass_u=mean_mass,
        law="yamamura_tawara",
        constants=MappingProxyType({}),
        constants_source="effective-target",
        constants_seen=all(atom.seen for atom in used),
        tie=None,
        angular=AngularData((), (), (), 0.4, "rule in the mass ratio; compound not measured", "angular-rule", True),
        estimate=True,
        formation=None
        if formation is None
        else Sourced(formation.value, formation.sd, "eV per formula unit", "as the lab states it", LAB_SOURCE, True),
        atoms=used,
    )
