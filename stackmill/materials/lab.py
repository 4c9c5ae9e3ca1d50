"""A lab's own materials: laid over an entry of the library, told by others, or estimated from atoms."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import replace
from types import MappingProxyType
from typing import Any

from stackmill.constants import ATOMS_1E22_PER_MOL_CM3
from stackmill.documents.film_forms import RelativeRate
from stackmill.documents.material import LabMaterial, MeasuredRate
from stackmill.errors import InputError
from stackmill.materials.material import AngularData, Atom, Caution, LabRate, Material, Part, Sourced

LAB_SOURCE = "this lab's materials file"
UNSTATED_DENSITY_REL_SD = 0.05
MIXING_LN_SD = 0.20
"""What mixing adds to the parts' own sd: bonds between unlike parts and grains that shade each other; a guess."""


def overlay(lab: LabMaterial, base: Material) -> Material:
    """`base` with the lab's keys laid over it; under the lab's name where it is only `like` the base.

    Raises InputError for a density that would change a rate which does not hang on it.
    """
    if lab.density is not None and (base.relative is not None or base.mixture):
        told = f"a multiple of {base.relative.material}'s" if base.relative else "made of its parts'"
        raise InputError(
            f"the density of '{lab.name}' would be ignored: the rate of '{base.name}' is {told}",
            cure="leave the density out",
            key=lab.name,
        )
    changes = _changes(lab)
    if lab.like is not None:
        changes |= {"name": lab.name, "like": base.name, "aliases": lab.aliases}
        changes.setdefault("title", f"{lab.name}, like {base.name}")
    return replace(base, **changes)


def relative(lab: LabMaterial, base: Material) -> Material:
    """A material that mills at a multiple of `base`'s rate, at every energy and angle.

    It keeps the base's law, density and angular shape; a rate measured on the base is carried over by
    rates/model.py, and its own sd comes on top of the base's.
    """
    told = link = lab.rate
    assert told is not None
    assert link is not None
    if base.relative is not None:
        told = RelativeRate(
            told.factor * base.relative.factor, base.relative.material, math.hypot(told.ln_sd, base.relative.ln_sd)
        )
    changes = {"title": f"mills as {lab.rate}", **_changes(lab), "name": lab.name, "like": base.name}
    changes |= {"aliases": lab.aliases, "relative": told, "estimate": base.estimate}
    changes |= {"follows": base.name, "follows_ln_sd": link.ln_sd}
    if base.tie is not None:
        changes["tie"] = replace(base.tie, basis=f"{lab.rate}; {base.name}: {base.tie.basis}", rows=())
    return replace(base, **changes)


def mixed(lab: LabMaterial, parts: Mapping[str, Material]) -> Material:
    """A material made of others by volume: rates.mixing says how it mills.

    Density and composition are the volume's means; errors of the parts are taken to go together, since films
    alike share what is not known of them.
    """
    assert lab.mixture is not None
    mix = tuple(Part(parts[name], share) for name, share in lab.mixture.items())
    atoms: dict[str, float] = {}
    for part in mix:
        per_atom = part.share * part.material.atom_density_1e22 / sum(part.material.composition.values())
        for symbol, n in part.material.composition.items():
            atoms[symbol] = atoms.get(symbol, 0.0) + n * per_atom
    value = sum(part.share * part.material.density.value for part in mix)
    sd = sum(part.share * part.material.density.sd for part in mix)
    angular_sd = sum(part.share * part.material.angular_sd for part in mix)
    told = "a mixture's mean by volume"
    words = " + ".join(f"{100 * part.share:g} % {part.material.name}" for part in mix)
    whole = Material(
        name=lab.name,
        title=f"{words} by volume",
        kind="composite",
        aliases=lab.aliases,
        composition=MappingProxyType(atoms),
        density=Sourced(value, sd, "g/cm3", told, LAB_SOURCE, True),
        mean_mass_u=ATOMS_1E22_PER_MOL_CM3 * value / sum(atoms.values()),
        law="yamamura_tawara",
        constants=MappingProxyType({}),
        constants_source=LAB_SOURCE,
        constants_seen=True,
        tie=None,
        angular=AngularData((), (), (), angular_sd, told, LAB_SOURCE, True),
        estimate=any(part.material.estimate for part in mix),
        mixture=mix,
        mixing_ln_sd=MIXING_LN_SD,
        alarms=tuple(alarm for part in mix for alarm in part.material.alarms),
        toxicity=_joined([part.material.toxicity for part in mix]),
    )
    return replace(whole, **_changes(lab))


def _changes(lab: LabMaterial) -> dict[str, Any]:
    """What the lab says of itself, by Material's names."""
    changes: dict[str, Any] = {
        "origin": LAB_SOURCE,
        "measured_rates": tuple(map(_lab_rate, lab.measured_rate)),
    }
    for key in ("title", "kind"):
        if getattr(lab, key) is not None:
            changes[key] = getattr(lab, key)
    if lab.aliases:
        changes["aliases"] = lab.aliases
    if lab.toxicity is not None:
        changes["toxicity"] = Caution(lab.toxicity, LAB_SOURCE, True)
    if lab.density is not None:
        changes["density"] = _density(lab)
    return changes


def _joined(cautions: Iterable[Caution | None]) -> Caution | None:
    """Several cautions as one."""
    kept = list({caution.note: caution for caution in cautions if caution is not None}.values())
    if not kept:
        return None
    return Caution("; ".join(caution.note for caution in kept), kept[0].source, all(c.seen for c in kept))


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


def estimated(lab: LabMaterial, atoms: Mapping[str, Atom], cautions: Mapping[str, Caution]) -> Material:
    """A material known by composition and density only: the compound rule, and an sd that says so.

    cautions: by element; those of its elements are its own unless the lab gives one. Raises InputError where
    the composition names something that is no element of the table.
    """
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
    whole = Material(
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
        toxicity=_joined(cautions.get(symbol) for symbol in lab.composition),
    )
    return replace(whole, **_changes(lab))
