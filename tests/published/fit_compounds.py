"""Averages the compounds' constants, ties them to what is known, and writes both into the library.

    python -m tests.published.fit_compounds         # after fit_yields; writes stackmill/materials/data/*.yaml

Data: data/compound_ties.csv (yields and ranges of rates) and data/compound_check.csv (compositions and heats
of formation of the compounds behind the rule). A compound without data takes the factor of the rule in the
mean atomic mass, `laws.compounds.tie_of_unmeasured`, whose two numbers `rule()` below fits.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from stackmill.constants import GASES, KJ_PER_MOL_PER_EV
from stackmill.laws.compounds import EffectiveTarget, effective_target, tie_of_unmeasured
from stackmill.laws.sputtering import yamamura_tawara
from stackmill.materials.library import Library
from stackmill.materials.material import Atom, Material
from stackmill.rates.yields import (
    ESTIMATE_ABOVE,
    ESTIMATE_BELOW,
    ESTIMATE_LN_SD,
    ESTIMATE_RANGE_EV,
    NM_PER_S_PER_MA_CM2,
)
from tests.published.blocks import entry_path, replaced

DATA = Path(__file__).parent / "data"
REFERENCE_EV = 1000.0

TIED_TO = {
    "SiO2": ("SiO2", 0.0),
    "SiO2 PECVD": ("SiO2", 0.10),
    "BPSG": ("SiO2", 0.15),
    "SiN PECVD": ("SiN PECVD", 0.0),
    "novolac resist": ("novolac resist", 0.0),
    "GaAs": ("GaAs", 0.0),
    "diamond": ("diamond", 0.0),
}
"""Which rows tie which entry, and the ln sd added where the rows are a relative's."""
ALLOYS = {"AlCu": ("Al", 0.05)}
"""Dilute alloys: the host metal's tie, with the ln sd added."""
ESTIMATES = {"SiCN": 0.0, "SiCOH": 0.0, "TiN": 0.0, "TaN": 0.0, "silver paint": 0.45}
"""Entries nothing is known of, and the ln sd added to that of any estimate."""


@dataclass(frozen=True)
class Row:
    """What is known of one compound at one energy: yield [atoms/ion], ln(known/law) and its sd."""

    energy_ev: float
    atoms_per_ion: float
    ln: float
    ln_sd: float
    source: str
    seen: bool


def averaged(
    composition: Mapping[str, float], formation_ev_per_atom: float, atoms: Mapping[str, Atom]
) -> EffectiveTarget:
    """The effective target of a composition."""
    used = [atoms[symbol] for symbol in composition]
    return effective_target(
        share=list(composition.values()),
        z=[atom.z for atom in used],
        m_u=[atom.m_u for atom in used],
        us_ev=[atom.us_ev for atom in used],
        q=[atom.q for atom in used],
        w_ev=[atom.w_ev for atom in used],
        s=[atom.s for atom in used],
        formation_ev_per_atom=formation_ev_per_atom,
    )


def bare_yield(target: EffectiveTarget, energy_ev: float) -> float:
    """Yamamura-Tawara yield of an effective target under argon [atoms/ion]."""
    argon = GASES["argon"]
    return float(
        yamamura_tawara(
            energy_ev=energy_ev,
            z1=argon.z,
            m1_u=argon.mass_u,
            z2=target.z2,
            m2_u=target.m2_u,
            us_ev=target.us_ev,
            q=target.q,
            w_ev=target.w_ev,
            s=target.s,
        )
    )


def known_rows(name: str, target: EffectiveTarget, atom_density_1e22: float) -> list[Row]:
    """The rows of data/compound_ties.csv for one material; rates become yields through the atom density."""
    rows = []
    with (DATA / "compound_ties.csv").open(encoding="utf-8") as file:
        for line in csv.DictReader(file):
            if line["material"] != name:
                continue
            low, high, energy = float(line["low"]), float(line["high"]), float(line["energy_ev"])
            value = math.sqrt(low * high)
            if line["quantity"] == "rate_nm_per_min":
                value *= atom_density_1e22 / (60.0 * NM_PER_S_PER_MA_CM2)
            sd = float(line["ln_sd"]) if line["ln_sd"] else 0.5 * math.log(high / low)
            ln = math.log(value / bare_yield(target, energy))
            rows.append(Row(energy, value, ln, sd, line["source"], line["seen"] == "yes"))
    return sorted(rows, key=lambda row: row.energy_ev)


def mean_and_sd(rows: Sequence[Row]) -> tuple[float, float]:
    """Weighted mean of ln, and an sd that covers both its own error and the rows' scatter."""
    weight = np.array([row.ln_sd**-2 for row in rows])
    ln = np.array([row.ln for row in rows])
    mean = float(np.sum(weight * ln) / np.sum(weight))
    scatter = float(np.sqrt(np.sum((ln - mean) ** 2) / max(len(rows) - 1, 1)))
    return mean, math.hypot(float(np.sum(weight)) ** -0.5, scatter)


@dataclass(frozen=True)
class Rule:
    """ln factor = offset + slope ln(mean mass/ion mass); points: each compound's (mean mass, ln factor)."""

    offset: float
    slope: float
    scatter: float
    points: Mapping[str, tuple[float, float]]


def rule() -> Rule:
    """The rule fitted to the measured compounds."""
    library = Library.load()
    points: dict[str, tuple[float, float]] = {}
    with (DATA / "compound_check.csv").open(encoding="utf-8") as file:
        for line in csv.DictReader(file):
            if line["used"] != "yes":
                continue
            words = line["composition"].split()
            composition = {s: float(n) for s, n in zip(words[::2], words[1::2], strict=True)}
            heat = float(line["formation_kj_per_mol"]) / KJ_PER_MOL_PER_EV / sum(composition.values())
            target = averaged(composition, heat, library.atoms())
            points[line["material"]] = (
                target.m2_u,
                mean_and_sd(known_rows(line["material"], target, 1.0))[0],
            )
    for name in ("SiN PECVD", "novolac resist"):
        material = library.get(name)
        target = target_of(material, library)
        points[name] = (target.m2_u, mean_and_sd(known_rows(name, target, density_of(material, target)))[0])
    x = np.log([mass / GASES["argon"].mass_u for mass, _ in points.values()])
    y = np.array([ln for _, ln in points.values()])
    slope, offset = np.polyfit(x, y, 1)
    scatter = float(np.sqrt(np.sum((y - offset - slope * x) ** 2) / (len(y) - 2)))
    return Rule(float(offset), float(slope), scatter, points)


def target_of(material: Material, library: Library) -> EffectiveTarget:
    """The effective target of a library material."""
    return averaged(material.composition, material.formation_ev_per_atom, library.atoms())


def density_of(material: Material, target: EffectiveTarget) -> float:
    """Atom density [1e22/cm3] from the entry's density and the averaged mass."""
    return material.atom_density_1e22 * material.mean_mass_u / target.m2_u


def constants_block(target: EffectiveTarget) -> str:
    """The `constants` block of a compound, as YAML text."""
    values = ", ".join(f"{name}: {getattr(target, name):.5g}" for name in ("z2", "m2_u", "us_ev", "q", "w_ev", "s"))
    return f"constants:\n  values: {{{values}}}\n  source: effective-target\n  seen: yes\n"


def tied_block(name: str, target: EffectiveTarget, atom_density: float) -> str:
    """The `fit` block of a compound with data."""
    rows_of, added = TIED_TO[name]
    rows = known_rows(rows_of, target, atom_density)
    mean, sd = mean_and_sd(rows)
    rms = float(np.sqrt(np.mean([(row.ln - mean) ** 2 for row in rows])))
    basis = f"what is known of {rows_of}, {len(rows)} row{'s' * (len(rows) > 1)}" + (
        f"; a relative of it, {100 * added:.0f} % added to the sd" if added else ""
    )
    text = _fit_lines(
        mean,
        math.hypot(sd, added),
        (rows[0].energy_ev, rows[-1].energy_ev),
        rms=rms,
        basis=basis,
        above=ESTIMATE_ABOVE,
    )
    text += "  rows:\n"
    for row in rows:
        text += (
            f"    - {{ev: {row.energy_ev:g}, atoms_per_ion: {row.atoms_per_ion:.4g}, ln: {row.ln:.3f},"
            f" sd: {row.ln_sd:.3f}, source: {row.source}, seen: {'yes' if row.seen else 'no'}}}\n"
        )
    return text


def estimate_block(name: str, target: EffectiveTarget) -> str:
    """The `fit` block of a compound nothing is known of."""
    ln_factor = float(np.log(tie_of_unmeasured(mean_mass_u=target.m2_u)))
    sd = math.hypot(ESTIMATE_LN_SD, ESTIMATES[name])
    basis = "no trustworthy yield is known; the rule in the mean atomic mass for compounds"
    return _fit_lines(ln_factor, sd, ESTIMATE_RANGE_EV, rms=0.0, basis=basis, above=ESTIMATE_ABOVE) + "  rows: []\n"


def alloy_block(name: str, library: Library) -> str:
    """The `fit` block of a dilute alloy: its host metal's, a little less sure."""
    host_name, added = ALLOYS[name]
    host = library.get(host_name).tie
    assert host is not None
    basis = f"the yields of {host_name}; a dilute alloy of it, {100 * added:.0f} % added to the sd"
    sd = math.hypot(host.ln_sd, added)
    text = _fit_lines(math.log(host.factor), sd, host.range_ev, rms=host.rms, basis=basis, above=host.above_per_efold)
    return text + "  rows: []\n"


def _fit_lines(ln_factor: float, sd: float, span: tuple[float, float], *, rms: float, basis: str, above: float) -> str:
    return (
        f"fit:\n  factor: {math.exp(ln_factor):.4f}\n  exponent: 0\n  at: {REFERENCE_EV:g} eV\n"
        f"  ln_sd: {sd:.3f}\n  range: [{span[0]:g} eV, {span[1]:g} eV]\n"
        f"  below: {ESTIMATE_BELOW:.2f}\n  above: {above:.2f}\n  rms: {rms:.3f}\n  basis: {basis}\n"
    )


def all_texts() -> dict[str, str]:
    """The new text of every compound's entry, by name."""
    library = Library.load()
    texts = {}
    for name in [*TIED_TO, *ALLOYS, *ESTIMATES]:
        material = library.get(name)
        target = target_of(material, library)
        if name in TIED_TO:
            fit = tied_block(name, target, density_of(material, target))
        else:
            fit = alloy_block(name, library) if name in ALLOYS else estimate_block(name, target)
        text = entry_path(name).read_text(encoding="utf-8")
        texts[name] = replaced(replaced(text, "constants", constants_block(target)), "fit", fit)
    return texts


if __name__ == "__main__":
    fitted = rule()
    print(f"rule: offset {fitted.offset:.3f}, slope {fitted.slope:.3f}, scatter {fitted.scatter:.3f}")
    for entry, new_text in all_texts().items():
        entry_path(entry).write_text(new_text, encoding="utf-8")
        print(f"wrote {entry}")
