"""Which law a material takes under a gas, with its constants, its tie and how well that is known."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

import numpy as np

from stackmill.constants import GASES
from stackmill.frozen import frozen
from stackmill.laws.compounds import effective_target, tie_of_unmeasured
from stackmill.laws.sputtering import LAWS, YieldLaw
from stackmill.materials.material import Material

REFERENCE_GAS = "argon"
# What an estimate is worth: a factor 1.5 either way, held to be so where compounds were measured.
ESTIMATE_LN_SD = float(np.log(1.5))
ESTIMATE_RANGE_EV = (200.0, 5000.0)
ESTIMATE_BELOW, ESTIMATE_ABOVE = 0.40, 0.20
# Seah, Nucl. Instrum. Meth. B 229, 348 (2005), abstract: 14 % for Ne and Xe where argon has 9 %.
OTHER_GAS_LN_SD = 0.15


@frozen
class Tied:
    """A law, its constants and its tie for one material under one gas."""

    law: YieldLaw
    constants: Mapping[str, float]
    factor: float
    exponent: float
    at_ev: float
    range_ev: tuple[float, float]
    ln_sd: float
    below: float
    above: float


def tied_law(material: Material, gas: str) -> Tied:
    """The law of a material under a gas; Raises ValueError for a gas that is not known. Not for mixtures."""
    ion_of(gas)
    tie = material.tie
    if tie is None:
        return _estimated(material, gas)
    law, constants, factor, gas_sd = LAWS[material.law], material.constants, tie.factor, 0.0
    if gas != REFERENCE_GAS:
        gas_sd = OTHER_GAS_LN_SD
    if gas not in law.gases and material.other_gases is not None:
        other = material.other_gases
        law, constants, factor, gas_sd = LAWS["yamamura_tawara"], other.constants, other.factor, other.ln_sd
    return Tied(
        law,
        constants,
        factor,
        tie.exponent,
        tie.at_ev,
        tie.range_ev,
        float(np.hypot(tie.ln_sd, gas_sd)),
        tie.below_per_efold,
        tie.above_per_efold,
    )


def _estimated(material: Material, gas: str) -> Tied:
    factor = float(tie_of_unmeasured(mean_mass_u=material.mean_mass_u))
    gas_sd = 0.0 if gas == REFERENCE_GAS else OTHER_GAS_LN_SD
    return Tied(
        LAWS["yamamura_tawara"],
        _effective_constants(material),
        factor,
        0.0,
        1000.0,
        ESTIMATE_RANGE_EV,
        float(np.hypot(ESTIMATE_LN_SD, gas_sd)),
        ESTIMATE_BELOW,
        ESTIMATE_ABOVE,
    )


def _effective_constants(material: Material) -> Mapping[str, float]:
    atoms = material.atoms
    return _averaged(
        tuple(material.composition[atom.symbol] for atom in atoms),
        tuple((float(atom.z), atom.m_u, atom.us_ev, atom.q, atom.w_ev, atom.s) for atom in atoms),
        material.formation_ev_per_atom,
    )


@lru_cache(maxsize=64)
def _averaged(shares: tuple[float, ...], rows: tuple[tuple[float, ...], ...], formation: float) -> Mapping[str, float]:
    z, m_u, us_ev, q, w_ev, s = np.array(rows).T
    target = effective_target(
        share=shares, z=z, m_u=m_u, us_ev=us_ev, q=q, w_ev=w_ev, s=s, formation_ev_per_atom=formation
    )
    return {
        "z2": target.z2,
        "m2_u": target.m2_u,
        "us_ev": target.us_ev,
        "q": target.q,
        "w_ev": target.w_ev,
        "s": target.s,
    }


def ion_of(gas: str) -> dict[str, float]:
    """Atomic number and mass [u] of the gas's ion, by the laws' names. Raises ValueError for an unknown gas."""
    if gas not in GASES:
        raise ValueError(f"'{gas}' is no beam gas known here; use one of {', '.join(GASES)}")
    return {"z1": float(GASES[gas].z), "m1_u": GASES[gas].mass_u}
