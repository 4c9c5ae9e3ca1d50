"""Walks the whole library: every entry complete, sourced, within plausible limits, and able to mill."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from stackmill.constants import GASES
from stackmill.documents.material import LibraryEntry, SourcesFile
from stackmill.documents.reading import read_document
from stackmill.laws.sputtering import LAWS
from stackmill.materials.library import DATA, Library
from stackmill.rates.yields import (
    angular_shape,
    ln_yield_sd,
    normal_yield,
    rate_nm_per_s,
    threshold_ev,
    trail,
)

LIBRARY = Library.load()
NAMES = LIBRARY.names()
STEP_ONE = (
    "Si",
    "SiO2",
    "SiO2 PECVD",
    "BPSG",
    "SiN PECVD",
    "SiCN",
    "SiCOH",
    "novolac resist",
    "Al",
    "AlCu",
    "W",
    "Ti",
    "TiN",
    "Ta",
    "TaN",
    "Cu",
    "Co",
    "Ru",
    "Cr",
    "Ni",
    "Au",
    "GaAs",
    "diamond",
    "silver paint",
)
WHOLE_TRADE = (
    "poly-Si",
    "SiO2 TEOS",
    "SiO2 HDP",
    "PSG",
    "spin-on glass",
    "Si3N4 LPCVD",
    "SiON",
    "SiC",
    "porous SiCOH",
    "polyimide",
    "PMMA",
    "epoxy mould compound",
    "WSi2",
    "TiSi2",
    "CoSi2",
    "NiSi",
    "TiW",
    "NiV",
    "Mo",
    "Ag",
    "Pt",
    "Pd",
    "Sn",
    "SnAg",
    "SnPb",
    "Pb",
    "Al2O3",
    "HfO2",
    "Ta2O5",
    "TiO2",
    "Cr2O3",
    "CeO2",
    "Fe2O3",
    "ZnO",
    "ITO",
    "InP",
    "GaN",
    "graphite",
)
ENERGIES = [100.0, 200.0, 500.0, 1000.0, 2000.0, 5000.0, 10000.0]
DENSITY_LIMITS = {  # g/cm3
    "metal": (1.7, 23.0),
    "semiconductor": (2.0, 7.5),
    "dielectric": (0.9, 10.0),
    "organic": (0.9, 1.6),
    "carbon": (1.5, 3.6),
    "composite": (1.0, 11.0),
}
YIELD_LIMITS_500_EV = {  # atoms/ion
    "metal": (0.15, 7.0),
    "semiconductor": (0.2, 4.0),
    "dielectric": (0.2, 3.0),
    "organic": (0.2, 5.0),
    "carbon": (0.05, 0.5),
    "composite": (0.2, 4.0),
}
FACTOR_LIMITS = {  # of the tie; chains of PMMA come apart by themselves, so that it mills far above the law
    "organic": (0.4, 12.0)
}
SOURCES = read_document(SourcesFile, DATA / "tables" / "sources.yaml").model.sources
FILES = sorted(DATA.glob("*.yaml"))
TIES = Path(__file__).parents[1] / "published" / "data" / "compound_ties.csv"
CAUTIONED = LIBRARY.cautions()
WITH_ALARMS = [name for name in NAMES if LIBRARY.get(name).alarms]


def test_the_materials_of_the_main_job_are_there():
    assert set(STEP_ONE) <= set(NAMES)
    assert len(NAMES) == len(FILES) >= 55


@pytest.mark.parametrize("name", WHOLE_TRADE)
def test_the_materials_of_the_trade_are_there(name):
    assert name in LIBRARY
    assert LIBRARY.get(name).title


@pytest.mark.parametrize("name", NAMES)
def test_every_source_is_told(name):
    material = LIBRARY.get(name)
    assert material.source_keys
    for key in material.source_keys:
        assert key in SOURCES, f"{name}: no citation for {key}"
    for clash in material.disagreements:
        assert clash.taken != clash.other
        assert len(clash.sources) >= 2
        assert clash.why


def test_no_source_is_an_orphan():
    used = {key for name in NAMES for key in LIBRARY.get(name).source_keys}
    used |= {atom.source for atom in LIBRARY.atoms().values()}
    used |= {caution.source for caution in CAUTIONED.values()}
    with TIES.open(encoding="utf-8") as file:  # the compounds behind the rule for estimates
        used |= {line["source"] for line in csv.DictReader(file)}
    assert set(SOURCES) == used


@pytest.mark.parametrize("name", NAMES)
def test_every_number_has_its_sd_and_conditions(name):
    material = LIBRARY.get(name)
    density = material.density
    assert density.unit == "g/cm3"
    assert 0.002 < density.sd / density.value < 0.3
    assert density.conditions
    assert material.angular.conditions
    assert 0.1 <= material.angular_sd <= 0.6
    assert material.tie.basis
    assert 0.09 <= material.tie.ln_sd < 1.0
    assert material.tie.range_ev[0] <= material.tie.range_ev[1]
    if len(material.composition) > 1:
        assert material.formation.conditions
    if material.melting is not None:
        assert material.melting.unit == "K"
        assert 0.0 < material.melting.sd < 0.05 * material.melting.value


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.common_practice
def test_values_are_plausible_for_their_kind(name):
    material = LIBRARY.get(name)
    low, high = DENSITY_LIMITS[material.kind]
    assert low < material.density.value < high
    low, high = YIELD_LIMITS_500_EV[material.kind]
    assert low < float(normal_yield(material, energy_ev=500.0)) < high
    assert 1.0 < material.atom_density_1e22 < 20.0
    assert 5.0 < threshold_ev(material) < 80.0
    low, high = FACTOR_LIMITS.get(material.kind, (0.4, 5.0))
    assert low < material.tie.factor < high
    assert abs(material.tie.exponent) < 0.3


@pytest.mark.parametrize("name", NAMES)
def test_the_law_has_all_it_needs(name):
    material = LIBRARY.get(name)
    assert set(material.constants) == set(LAWS[material.law].needs)
    if "krypton" not in LAWS[material.law].gases:
        assert set(material.other_gases.constants) == set(LAWS["yamamura_tawara"].needs)


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.closed_form
def test_the_mean_mass_is_that_of_the_composition(name):
    material, atoms = LIBRARY.get(name), LIBRARY.atoms()
    total = sum(material.composition.values())
    mean = sum(n * atoms[symbol].m_u for symbol, n in material.composition.items()) / total
    assert material.mean_mass_u == pytest.approx(mean, rel=1e-3)


@pytest.mark.common_practice
@pytest.mark.parametrize("gas", list(GASES))
@pytest.mark.parametrize("name", NAMES)
def test_every_material_mills_in_every_gas(name, gas):
    material = LIBRARY.get(name)
    energies = [e for e in ENERGIES if e > 1.5 * threshold_ev(material, gas)]
    assert len(energies) >= 5
    yields = normal_yield(material, energy_ev=energies, gas=gas)
    assert np.all(yields > 0.0)
    assert np.all(np.diff(yields[:-1]) > 0.0)  # light targets turn down near 10 keV
    assert np.all(ln_yield_sd(material, energy_ev=energies, gas=gas) >= 0.09)
    ratio = angular_shape(material, energy_ev=energies, gas=gas).ratio(np.radians(np.arange(0, 91, 1.0))[:, None])
    assert np.all(np.isfinite(ratio))
    assert ratio[0] == pytest.approx(np.ones(len(energies)))
    assert ratio[-1] == pytest.approx(np.zeros(len(energies)))
    for energy in (500.0, 5000.0):
        rate = rate_nm_per_s(
            material,
            energy_ev=energy,
            incidence_rad=np.radians([0, 45, 80]),
            current_density_ma_per_cm2=0.5,
            gas=gas,
        )
        assert np.all(rate > 0.0)


@pytest.mark.parametrize("name", NAMES)
def test_estimates_say_so_and_are_wide(name):
    material = LIBRARY.get(name)
    lines = trail(material, energy_ev=500.0, citation=LIBRARY.citation)
    assert material.estimate == any(line.startswith("ESTIMATE") for line in lines)
    if material.estimate:
        assert not material.tie.rows
        assert float(ln_yield_sd(material, energy_ev=500.0)) >= np.log(1.5) - 5e-4


@pytest.mark.parametrize("name", NAMES)
def test_the_trail_cites_and_says_from_memory_where_it_is(name):
    material = LIBRARY.get(name)
    text = "\n".join(trail(material, energy_ev=500.0, citation=LIBRARY.citation))
    assert LAWS[material.law].citation in text
    assert LIBRARY.citation(material.density.source) in text
    assert ("from memory" in text) >= (not material.density.seen)
    assert (material.toxicity is None) or material.toxicity.note in text


@pytest.mark.parametrize("symbol", ["As", "Be", "Pb", "Se", "Cd", "Ni", "Co", "Os"])
def test_toxic_elements_carry_a_caution(symbol):
    assert CAUTIONED[symbol].note


@pytest.mark.parametrize("name", NAMES)
def test_materials_with_a_toxic_element_carry_a_caution(name):
    material = LIBRARY.get(name)
    if set(material.composition) & set(CAUTIONED):
        assert material.toxicity.note


@pytest.mark.common_practice
@pytest.mark.parametrize(
    ("name", "word"),
    [
        ("epoxy mould compound", "crystalline silica"),
        ("InP", "phosphine"),
        ("ITO", "lung"),
        ("Cr2O3", "hexavalent chromium"),
        ("NiSi", "nickel"),
        ("SnPb", "lead"),
        ("GaAs", "arsine"),
    ],
)
def test_cautions_name_the_danger(name, word):
    assert word in LIBRARY.get(name).toxicity.note


@pytest.mark.parametrize("name", WITH_ALARMS)
def test_alarms_have_sd_and_source_and_come_before_melting(name):
    material = LIBRARY.get(name)
    for alarm in material.alarms:
        assert alarm.what
        assert alarm.temperature.unit == "K"
        assert 350.0 < alarm.temperature.value < 1100.0
        assert 0.1 <= alarm.temperature.sd <= 60.0
        assert alarm.temperature.source in SOURCES
        if material.melting is not None:
            assert alarm.temperature.value < material.melting.value + 1.0
        [line] = [line for line in trail(material, energy_ev=500.0) if line.startswith(f"alarm: {alarm.what}")]
        assert ("from memory" in line) == (not alarm.temperature.seen)


@pytest.mark.common_practice
@pytest.mark.parametrize(
    ("name", "low_degc", "high_degc"),
    [
        ("novolac resist", 110.0, 150.0),
        ("SnPb", 182.0, 184.0),
        ("SnAg", 214.0, 222.0),
        ("Al", 280.0, 320.0),
        ("AlCu", 280.0, 320.0),
        ("SiCOH", 180.0, 220.0),
        ("porous SiCOH", 180.0, 220.0),
        ("epoxy mould compound", 180.0, 220.0),
    ],
)
def test_alarm_temperatures_are_those_of_the_trade(name, low_degc, high_degc):
    """Common practice, from memory."""
    assert low_degc <= LIBRARY.get(name).alarms[0].temperature.value - 273.15 <= high_degc


@pytest.mark.parametrize("path", FILES, ids=[path.stem for path in FILES])
def test_the_head_of_a_file_is_what_its_yaml_says(path: Path):
    entry = read_document(LibraryEntry, path).model
    assert LIBRARY.get(entry.name).name == entry.name
    assert entry.aliases
    for alias in entry.aliases:
        assert LIBRARY.get(alias).name == entry.name


def test_no_alias_is_used_twice():
    words = [word for path in FILES for word in _names_of(path)]
    assert len(words) == len(set(words))


def _names_of(path: Path) -> list[str]:
    entry = read_document(LibraryEntry, path).model
    return [entry.name, *entry.aliases]
