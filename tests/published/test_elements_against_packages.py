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
    [
        ("SiO2", "14808-60-7"),
        ("SiO2 PECVD", "14808-60-7"),
        ("SiO2 TEOS", "14808-60-7"),
        ("SiO2 HDP", "14808-60-7"),
        ("TiN", "25583-20-4"),
        ("GaAs", "1303-00-0"),
        ("Si3N4 LPCVD", "12033-89-5"),
        ("SiC", "409-21-2"),
        ("Al2O3", "1344-28-1"),
        ("HfO2", "12055-23-1"),
        ("Ta2O5", "1314-61-0"),
        ("TiO2", "1317-80-2"),
        ("Cr2O3", "1308-38-9"),
        ("CeO2", "1306-38-3"),
        ("Fe2O3", "1309-37-1"),
        ("ZnO", "1314-13-2"),
        ("InP", "22398-80-7"),
        ("GaN", "25617-97-4"),
    ],
)
def test_heats_of_formation(name, cas):
    found = LIBRARY.get(name).formation.value
    assert found == pytest.approx(-chemicals.Hfs(cas) / EV_IN_J_PER_MOL, rel=0.005)


@pytest.mark.independent
@pytest.mark.parametrize(
    ("name", "parts"),
    [
        ("ITO", {"1312-43-2": 0.5 * 35.6, "18282-10-5": 3.65}),
        ("SiON", {"14808-60-7": 12.5, "12033-89-5": 25.0 / 4.0}),
        ("spin-on glass", {"14808-60-7": 30.0}),
        ("epoxy mould compound", {"14808-60-7": 23.3}),
    ],
)
def test_weighted_heats_of_formation(name, parts):
    """Formula units of the binary compounds in a formula unit of the entry."""
    sum_of_parts = sum(-chemicals.Hfs(cas) * n for cas, n in parts.items()) / EV_IN_J_PER_MOL
    assert LIBRARY.get(name).formation.value == pytest.approx(sum_of_parts, rel=0.005)


@pytest.mark.independent
@pytest.mark.parametrize(
    ("name", "cas"),
    [
        ("Si3N4 LPCVD", "12033-89-5"),
        ("SiC", "409-21-2"),
        ("WSi2", "12039-88-2"),
        ("TiSi2", "12039-83-7"),
        ("CoSi2", "12017-12-8"),
        ("Al2O3", "1344-28-1"),
        ("HfO2", "12055-23-1"),
        ("Ta2O5", "1314-61-0"),
        ("TiO2", "1317-80-2"),
        ("Cr2O3", "1308-38-9"),
        ("CeO2", "1306-38-3"),
        ("Fe2O3", "1309-37-1"),
        ("ZnO", "1314-13-2"),
        ("InP", "22398-80-7"),
    ],
)
def test_melting_points_of_compounds(name, cas):
    assert LIBRARY.get(name).melting.value == pytest.approx(chemicals.Tm(cas), abs=0.5)
    assert LIBRARY.get(name).melting.sd > 0.0
