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
ENERGIES = [100.0, 200.0, 500.0, 1000.0, 2000.0, 5000.0, 10000.0]
DENSITY_LIMITS = {  # g/cm3
    "metal": (1.7, 23.0),
    "semiconductor": (2.0, 6.0),
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
SOURCES = read_document(SourcesFile, DATA / "tables" / "sources.yaml").model.sources
FILES = sorted(DATA.glob("*.yaml"))
TIES = Path(__file__).parents[1] / "published" / "data" / "compound_ties.csv"


def test_the_materials_of_the_main_job_are_there():
    assert set(STEP_ONE) <= set(NAMES)
    assert len(NAMES) == len(FILES) >= 41


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
    assert 0.4 < material.tie.factor < 5.0
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


@pytest.mark.parametrize("name", ["Be", "Ni", "Co", "Cr", "Os", "GaAs"])
def test_toxic_materials_carry_a_caution(name):
    assert LIBRARY.get(name).toxicity.note


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
