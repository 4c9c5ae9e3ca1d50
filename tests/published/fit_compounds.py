"""Averages the compounds' constants, ties them to what is known, and writes both into the library.

    python -m tests.published.fit_compounds         # after fit_yields; writes stackmill/materials/data/*.yaml

Data: data/compound_ties.csv (yields and ranges of rates), data/oxide_ratios.csv (milling rates relative to
thermal SiO2) and data/compound_check.csv (compositions and heats of formation of the compounds behind the rule).
A compound without data takes the factor of the rule in the mean atomic mass, `laws.compounds.tie_of_unmeasured`,
whose two numbers `rule()` below fits; an alloy of metals with data that of its components' steady state.
Run it twice after a change of SiO2 or an element: ratios and alloys read the library.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from stackmill.constants import GASES, KJ_PER_MOL_PER_EV
from stackmill.laws.compounds import EffectiveTarget, component_steady_state, effective_target, tie_of_unmeasured
from stackmill.laws.sputtering import yamamura_tawara
from stackmill.materials.library import Library
from stackmill.materials.material import Atom, Material
from stackmill.rates.yields import (
    ESTIMATE_ABOVE,
    ESTIMATE_BELOW,
    ESTIMATE_LN_SD,
    ESTIMATE_RANGE_EV,
    NM_PER_S_PER_MA_CM2,
    ln_yield_sd,
    normal_yield,
)
from tests.published.blocks import entry_path, replaced

DATA = Path(__file__).parent / "data"
REFERENCE_EV = 1000.0

TIED_TO = {
    "SiO2": ("SiO2", 0.0),
    "SiO2 PECVD": ("SiO2", 0.10),
    "SiO2 TEOS": ("SiO2", 0.10),
    "SiO2 HDP": ("SiO2", 0.10),
    "BPSG": ("SiO2", 0.15),
    "PSG": ("SiO2", 0.15),
    "spin-on glass": ("SiO2", 0.20),
    "Si3N4 LPCVD": ("Si3N4 LPCVD", 0.0),
    "SiC": ("SiC", 0.0),
    "polyimide": ("polyimide", 0.0),
    "PMMA": ("PMMA", 0.0),
    "Sn": ("Sn", 0.0),
    "Al2O3": ("Al2O3", 0.0),
    "SiN PECVD": ("SiN PECVD", 0.0),
    "novolac resist": ("novolac resist", 0.0),
    "GaAs": ("GaAs", 0.0),
    "diamond": ("diamond", 0.0),
}
"""Which rows tie which entry, and the ln sd added where the rows are a relative's."""
ALLOYS = {"AlCu": ("Al", 0.05), "NiV": ("Ni", 0.08), "SnAg": ("Sn", 0.08), "poly-Si": ("Si", 0.05)}
"""Dilute alloys, and another form of an element: the host's tie, with the ln sd added."""
SETTLED_ALLOYS = ("TiW", "SnPb")
"""Alloys whose elements are in the library: the yield of the components' steady state, told as an estimate."""
RULED_RATIOS = ("HfO2", "Ta2O5", "TiO2", "ITO", "Cr2O3", "CeO2", "Fe2O3", "ZnO")
"""Oxides of which only the ratio to SiO2 is known, weighted with the rule for compounds."""
ESTIMATES = {
    **dict.fromkeys(("SiCN", "SiCOH", "TiN", "TaN", "SiON", "WSi2", "TiSi2", "CoSi2", "NiSi", "InP", "GaN", "Pb"), 0.0),
    **{"porous SiCOH": 0.20, "epoxy mould compound": 0.40, "silver paint": 0.45},
}
"""Entries nothing is known of, and the ln sd added to that of any estimate."""
SETTLED_EV = (300.0, 1000.0, 3000.0)


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


def ratio_rows(name: str, target: EffectiveTarget, atom_density_1e22: float, library: Library) -> list[Row]:
    """The row of data/oxide_ratios.csv for one material, as a yield at the geometric middle of its energies.

    The bounds count as two sds either way of their geometric middle. The sd is that of an absolute yield: the
    reference's own is in it, so that two such materials look more independent than they are.
    """
    rows = []
    with (DATA / "oxide_ratios.csv").open(encoding="utf-8") as file:
        for line in csv.DictReader(file):
            if line["material"] != name:
                continue
            to, low, high = library.get(line["to"]), float(line["ratio_low"]), float(line["ratio_high"])
            energy = math.sqrt(float(line["energy_low_ev"]) * float(line["energy_high_ev"]))
            per_volume = float(normal_yield(to, energy_ev=energy)) / to.atom_density_1e22
            value = math.sqrt(low * high) * per_volume * atom_density_1e22
            own = float(ln_yield_sd(to, energy_ev=energy))
            sd = math.hypot(0.25 * math.log(high / low), own, to.density_rel_sd)
            ln = math.log(value / bare_yield(target, energy))
            rows.append(Row(energy, value, ln, sd, line["source"], line["seen"] == "yes"))
    return rows


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


def tied_block(name: str, target: EffectiveTarget, atom_density: float, library: Library) -> str:
    """The `fit` block of a compound with data."""
    rows_of, added = TIED_TO[name]
    rows = known_rows(rows_of, target, atom_density)
    rows = sorted([*rows, *ratio_rows(rows_of, target, atom_density, library)], key=lambda row: row.energy_ev)
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
    return text + _row_lines(rows)


def ruled_block(name: str, target: EffectiveTarget, atom_density: float, library: Library) -> str:
    """The `fit` block of a compound of which a ratio is known, weighted with the rule."""
    [row] = ratio_rows(name, target, atom_density, library)
    rule_ln = float(np.log(tie_of_unmeasured(mean_mass_u=target.m2_u)))
    weight = np.array([row.ln_sd**-2, ESTIMATE_LN_SD**-2])
    mean = float(np.average([row.ln, rule_ln], weights=weight))
    # Birge's ratio: the sd is wider where the two disagree by more than they should.
    apart = abs(row.ln - rule_ln) / math.hypot(row.ln_sd, ESTIMATE_LN_SD)
    sd = float(np.sum(weight)) ** -0.5 * max(1.0, apart)
    half = math.log(2.0)  # the ratio holds from half to twice the middle energy
    span = (round(row.energy_ev * math.exp(-half)), round(row.energy_ev * math.exp(half)))
    basis = "the rate ratio to thermal SiO2, 1 within a factor 2 as two sds, weighted with the compound rule"
    text = _fit_lines(mean, sd, span, rms=abs(row.ln - mean), basis=basis, above=ESTIMATE_ABOVE)
    return text + _row_lines([row])


def settled_block(name: str, target: EffectiveTarget, library: Library) -> str:
    """The `fit` block of an alloy that leaves in the proportion of its bulk, each element with its own yield."""
    composition = library.get(name).composition
    ln = []
    for energy in SETTLED_EV:
        each = [float(normal_yield(library.get(symbol), energy_ev=energy)) for symbol in composition]
        state = component_steady_state(share=list(composition.values()), component_yield=each)
        ln.append(math.log(state.total_yield / bare_yield(target, energy)))
    mean = float(np.mean(ln))
    rms = float(np.sqrt(np.mean(np.square(np.array(ln) - mean))))
    basis = (
        f"no yield of the alloy is known; steady state of {' and '.join(composition)} with the yields each has alone"
    )
    text = _fit_lines(mean, ESTIMATE_LN_SD, ESTIMATE_RANGE_EV, rms=rms, basis=basis, above=ESTIMATE_ABOVE)
    return text + "  rows: []\n"


def _row_lines(rows: Sequence[Row]) -> str:
    return "  rows:\n" + "".join(
        f"    - {{ev: {row.energy_ev:g}, atoms_per_ion: {row.atoms_per_ion:.4g}, ln: {row.ln:.3f},"
        f" sd: {row.ln_sd:.3f}, source: {row.source}, seen: {'yes' if row.seen else 'no'}}}\n"
        for row in rows
    )


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
    form = "a dilute alloy of it" if len(library.get(name).composition) > 1 else "another form of it"
    basis = f"the yields of {host_name}; {form}, {100 * added:.0f} % added to the sd"
    sd = math.hypot(host.ln_sd, added)
    text = _fit_lines(math.log(host.factor), sd, host.range_ev, rms=host.rms, basis=basis, above=host.above_per_efold)
    return text.replace("exponent: 0\n", f"exponent: {host.exponent:g}\n") + "  rows: []\n"


def _fit_lines(ln_factor: float, sd: float, span: tuple[float, float], *, rms: float, basis: str, above: float) -> str:
    return (
        f"fit:\n  factor: {math.exp(ln_factor):.4f}\n  exponent: 0\n  at: {REFERENCE_EV:g} eV\n"
        f"  ln_sd: {sd:.3f}\n  range: [{span[0]:g} eV, {span[1]:g} eV]\n"
        f"  below: {ESTIMATE_BELOW:.2f}\n  above: {above:.2f}\n  rms: {rms:.3f}\n  basis: {basis}\n"
    )


def fit_text(name: str, target: EffectiveTarget, library: Library) -> str:
    """The `fit` block of one compound, by what is known of it."""
    density = density_of(library.get(name), target)
    if name in TIED_TO:
        return tied_block(name, target, density, library)
    if name in RULED_RATIOS:
        return ruled_block(name, target, density, library)
    if name in ALLOYS:
        return alloy_block(name, library)
    return settled_block(name, target, library) if name in SETTLED_ALLOYS else estimate_block(name, target)


def all_texts() -> dict[str, str]:
    """The new text of every compound's entry, by name."""
    library = Library.load()
    texts = {}
    for name in [*TIED_TO, *RULED_RATIOS, *ALLOYS, *SETTLED_ALLOYS, *ESTIMATES]:
        target = target_of(library.get(name), library)
        text = replaced(entry_path(name).read_text(encoding="utf-8"), "constants", constants_block(target))
        texts[name] = replaced(text, "fit", fit_text(name, target, library))
    return texts


if __name__ == "__main__":
    fitted = rule()
    print(f"rule: offset {fitted.offset:.3f}, slope {fitted.slope:.3f}, scatter {fitted.scatter:.3f}")
    for entry, new_text in all_texts().items():
        entry_path(entry).write_text(new_text, encoding="utf-8")
        print(f"wrote {entry}")
