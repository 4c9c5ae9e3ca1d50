"""Physical constants, each with its year and source. Nothing here is fitted or measured by us."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

# CODATA 2022 recommended values (NIST SP 961, 2024); the first three are exact since the SI of 2019.
ELEMENTARY_CHARGE_C = 1.602176634e-19
AVOGADRO_PER_MOL = 6.02214076e23
ATOMIC_MASS_KG = 1.66053906892e-27
BOLTZMANN_EV_PER_K = 8.617333262e-5
BOHR_RADIUS_A = 0.529177210544
COULOMB_EV_A = 14.3996454785
"""e^2/(4 pi eps0) in eV Angstrom (CODATA 2022)."""

ATOMS_1E22_PER_MOL_CM3 = AVOGADRO_PER_MOL / 1e22
"""n [1e22 atoms/cm3] = this x density [g/cm3] / mean atomic mass [u]."""

NM_PER_S_PER_MA_CM2 = 1e-3 / ELEMENTARY_CHARGE_C / 1e22 * 1e7
"""R [nm/s] = this x J [mA/cm2] x Y [atoms/ion] x cos(incidence) / n [1e22 atoms/cm3]: 6.2415.

1 mA/cm2 of singly charged ions is 1e-3/e ions per cm2 and second; dividing by n gives cm/s, 1e7 nm each.
"""

J_PER_EV = ELEMENTARY_CHARGE_C
KJ_PER_MOL_PER_EV = ELEMENTARY_CHARGE_C * AVOGADRO_PER_MOL / 1e3


@dataclass(frozen=True, slots=True)
class Gas:
    """A beam species: atomic number and standard atomic weight in u."""

    name: str
    symbol: str
    z: int
    mass_u: float


# Standard atomic weights: IUPAC 2021 (Prohaska et al., Pure Appl. Chem. 94, 573 (2022)), abridged;
# argon is given there as 39.95 and used with the older conventional value 39.948 (IUPAC 2007),
# the one behind every argon yield table held here.
GASES: Mapping[str, Gas] = MappingProxyType(
    {
        "neon": Gas("neon", "Ne", 10, 20.1797),
        "argon": Gas("argon", "Ar", 18, 39.948),
        "krypton": Gas("krypton", "Kr", 36, 83.798),
        "xenon": Gas("xenon", "Xe", 54, 131.293),
    }
)
