"""Masses, densities and heats of atomisation against the packages periodictable and chemicals."""

from __future__ import annotations

import chemicals
import periodictable
import pytest
from chemicals import elements as chemical_elements

from stackmill.constants import GASES
from stackmill.materials.library import Library

EV_IN_J_PER_MOL = 96485.33212
LIBRARY = Library.load()
ATOMS = LIBRARY.atoms()
SOLIDS = [name for name in LIBRARY.names() if name in ATOMS]


@pytest.mark.independent
@pytest.mark.parametrize("symbol", list(ATOMS))
def test_atomic_numbers_and_masses(symbol):
    other = periodictable.elements.symbol(symbol)
    assert ATOMS[symbol].z == other.number
    assert ATOMS[symbol].m_u == pytest.approx(other.mass, rel=1e-3)


@pytest.mark.independent
@pytest.mark.parametrize("symbol", list(ATOMS))
def test_heats_of_atomisation(symbol):
    cas = chemical_elements.periodic_table[symbol].CAS
    assert ATOMS[symbol].us_ev == pytest.approx(chemicals.Hfg(cas) / EV_IN_J_PER_MOL, rel=0.015)


@pytest.mark.independent
@pytest.mark.parametrize("symbol", SOLIDS)
def test_elements_of_the_library(symbol):
    material, other = LIBRARY.get(symbol), periodictable.elements.symbol(symbol)
    assert material.density.value == pytest.approx(other.density, rel=0.035)
    assert material.mean_mass_u == pytest.approx(other.mass, rel=1e-3)
    assert material.constants["z2"] == other.number


@pytest.mark.independent
@pytest.mark.parametrize("symbol", [name for name in SOLIDS if LIBRARY.get(name).melting])
def test_melting_points(symbol):
    cas = chemical_elements.periodic_table[symbol].CAS
    assert LIBRARY.get(symbol).melting.value == pytest.approx(chemicals.Tm(cas), abs=1.0)


@pytest.mark.independent
@pytest.mark.parametrize("gas", list(GASES))
def test_beam_gases(gas):
    other = periodictable.elements.symbol(GASES[gas].symbol)
    assert GASES[gas].z == other.number
    assert GASES[gas].mass_u == pytest.approx(other.mass, rel=1e-4)


@pytest.mark.independent
@pytest.mark.parametrize(
    ("name", "cas"),
    [("SiO2", "14808-60-7"), ("SiO2 PECVD", "14808-60-7"), ("TiN", "25583-20-4"), ("GaAs", "1303-00-0")],
)
def test_heats_of_formation(name, cas):
    found = LIBRARY.get(name).formation.value
    assert found == pytest.approx(-chemicals.Hfs(cas) / EV_IN_J_PER_MOL, rel=0.005)
