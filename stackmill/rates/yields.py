"""The only place where a law meets a material: yields, shapes, milling rates, their sd and their trail.

Energies in eV, incidence in rad from the surface normal, current density in mA/cm2 through a plane normal to
the beam, milling rates in nm/s. `gas` is a name in constants.GASES.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stackmill.constants import GASES, NM_PER_S_PER_MA_CM2
from stackmill.frozen import frozen
from stackmill.laws.compounds import effective_target, tie_of_unmeasured
from stackmill.laws.incidence import (
    AngularShape,
    ep_constants,
    incidence_nodes,
    root_of_closeness,
)
from stackmill.laws.sputtering import LAWS, YieldLaw
from stackmill.materials.material import Material

__all__ = [
    "AngularShape",
    "angular_leverage",
    "angular_shape",
    "ln_yield_sd",
    "normal_yield",
    "outside_ln_sd",
    "rate_nm_per_s",
    "threshold_ev",
    "trail",
]

Array = NDArray[np.float64]

REFERENCE_GAS = "argon"
REFERENCE_ANGLE_RAD = np.radians(60.0)
# What an estimate is worth: a factor 1.5 either way, held to be so where compounds were measured.
ESTIMATE_LN_SD = float(np.log(1.5))
ESTIMATE_RANGE_EV = (200.0, 5000.0)
ESTIMATE_BELOW, ESTIMATE_ABOVE = 0.40, 0.20
# Seah, Nucl. Instrum. Meth. B 229, 348 (2005), abstract: 14 % for Ne and Xe where argon has 9 %.
OTHER_GAS_LN_SD = 0.15
SMALLEST_B = 0.05


@frozen
class _Tied:
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


def normal_yield(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> Array:
    """Yield at normal incidence, best value [atoms/ion]; shape of energy_ev.

    law x factor x (E/E0)^exponent; the power is held at its end values outside the measured energies.
    """
    tied = _tied(material, gas)
    energy = np.asarray(energy_ev, dtype=np.float64)
    bare = tied.law.function(energy_ev=energy, **_ion(gas), **_pick(tied.constants, tied.law.needs))
    held = np.clip(energy, *tied.range_ev)
    return np.asarray(bare * tied.factor * (held / tied.at_ev) ** tied.exponent)


def threshold_ev(material: Material, gas: str = REFERENCE_GAS) -> float:
    """Energy below which nothing leaves [eV]."""
    tied = _tied(material, gas)
    known = {**tied.constants, "m1_u": GASES[gas].mass_u}
    return float(tied.law.threshold(**_pick(known, tied.law.threshold_needs)))


def angular_shape(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> AngularShape:
    """Y(incidence)/Y(0); f, b and c have the shape of energy_ev.

    The material's own constants where it has them, else the rule in the mass ratio. Own constants belong to
    argon: for another gas the rule's step from argon to that gas is added to them.
    """
    energy = np.asarray(energy_ev, dtype=np.float64)
    rule = _mass_rule(material, energy, gas)
    own = material.angular
    if not own.f:
        return rule
    s = root_of_closeness(eth_over_e=threshold_ev(material, REFERENCE_GAS) / energy)
    f, b, c = (np.polynomial.polynomial.polyval(s, p) for p in (own.f, own.b, own.c))
    if gas != REFERENCE_GAS:
        argon = _mass_rule(material, energy, REFERENCE_GAS)
        f, b, c = f + rule.f - argon.f, b + rule.b - argon.b, c + rule.c - argon.c
    return AngularShape(f=np.asarray(f, float), b=np.maximum(b, SMALLEST_B), c=np.asarray(c, float))


def ln_yield_sd(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> Array:
    """Sd of ln(yield at normal incidence); shape of energy_ev. The density's sd is not in it."""
    return np.asarray(np.hypot(_tied(material, gas).ln_sd, outside_ln_sd(material, energy_ev=energy_ev, gas=gas)))


def outside_ln_sd(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> Array:
    """The part of `ln_yield_sd` that comes from leaving the measured energies: 0 between them."""
    tied = _tied(material, gas)
    ln_e = np.log(np.asarray(energy_ev, dtype=np.float64))
    below = np.clip(np.log(tied.range_ev[0]) - ln_e, 0.0, None)
    above = np.clip(ln_e - np.log(tied.range_ev[1]), 0.0, None)
    return np.asarray(tied.below * below + tied.above * above)


def angular_leverage(incidence_rad: ArrayLike) -> Array:
    """sin^2(incidence)/sin^2(60 deg): how the shape's sd at 60 degrees acts elsewhere [no unit]."""
    return np.asarray((np.sin(np.asarray(incidence_rad)) / np.sin(REFERENCE_ANGLE_RAD)) ** 2)


def rate_nm_per_s(
    material: Material,
    *,
    energy_ev: float,
    incidence_rad: ArrayLike,
    current_density_ma_per_cm2: float,
    doubly_charged: float = 0.0,
    divergence_rad: float = 0.0,
    rocking_rad: float = 0.0,
    gas: str = REFERENCE_GAS,
    angular_deviation: float = 0.0,
) -> Array:
    """Milling rate of a flat surface, best value [nm/s]; shape of incidence_rad.

        R = J/(e n) sum over charges of share x <Y(g) cos g>

    doubly_charged: share of the current, d: (1 - d) J/e ions arrive at E and d/2 J/e at 2 E. divergence_rad:
    half-angle that holds 63 % of the current. rocking_rad: half-angle of the stage's swing.
    angular_deviation: sds by which the angular shape is off; ln(Y/Y0) moves by that times the material's sd
    at 60 degrees times `angular_leverage`.
    """
    if not 0.0 <= doubly_charged < 1.0:
        raise ValueError(f"doubly_charged must be a share of the current from 0 to below 1, not {doubly_charged:g}")
    incidence = np.asarray(incidence_rad, dtype=np.float64)
    charges = ((energy_ev, 1.0 - doubly_charged), (2.0 * energy_ev, 0.5 * doubly_charged))
    total = np.zeros(incidence.size)
    for energy, ions_per_charge in charges:
        if ions_per_charge == 0.0:
            continue
        y0 = float(normal_yield(material, energy_ev=energy, gas=gas))
        shape = _deviated(angular_shape(material, energy_ev=energy, gas=gas), material, angular_deviation)
        nodes = _nodes(tuple(incidence.ravel().tolist()), divergence_rad, rocking_rad)
        total += ions_per_charge * y0 * np.add.reduceat(nodes.weight * shape(nodes.incidence_rad), nodes.first)
    speed = NM_PER_S_PER_MA_CM2 * current_density_ma_per_cm2 / material.atom_density_1e22
    return np.asarray(speed * total.reshape(incidence.shape))


@frozen
class _Nodes:
    """The nodes of several incidences in one row; `first` is where each incidence's own begin."""

    incidence_rad: Array
    weight: Array
    first: NDArray[np.intp]


@lru_cache(maxsize=64)
def _nodes(incidence_rad: tuple[float, ...], divergence_rad: float, rocking_rad: float) -> _Nodes:
    """The same nodes serve every material of a step."""
    each = [
        incidence_nodes(incidence_rad=angle, divergence_rad=divergence_rad, rocking_rad=rocking_rad)
        for angle in incidence_rad
    ]
    first = np.cumsum([0, *(nodes.weight.size for nodes in each[:-1])])
    return _Nodes(
        np.concatenate([nodes.incidence_rad for nodes in each]), np.concatenate([nodes.weight for nodes in each]), first
    )


def _deviated(shape: AngularShape, material: Material, sds: float) -> Callable[[Array], Array]:
    if sds == 0.0:
        return shape.ratio
    return lambda angle: shape.ratio(angle) * np.exp(sds * material.angular_sd * angular_leverage(angle))


def trail(
    material: Material,
    *,
    energy_ev: float,
    gas: str = REFERENCE_GAS,
    citation: Callable[[str], str] = str,
) -> list[str]:
    """Where a rate of this material comes from, line by line. citation: source key to full citation."""
    tied = _tied(material, gas)
    sd = float(ln_yield_sd(material, energy_ev=energy_ev, gas=gas))
    density = material.density
    return [
        f"{material.name}: {material.title}",
        *_estimate_line(material),
        f"yield at {energy_ev:g} eV {gas}: {float(normal_yield(material, energy_ev=energy_ev, gas=gas)):.3g}"
        f" atoms/ion ± {100 * sd:.0f} %",
        f"law: {tied.law.name}, {tied.law.citation}",
        "constants: "
        + ", ".join(f"{k} {v:g}" for k, v in tied.constants.items())
        + f" ({_told(material.constants_source, material.constants_seen, citation)})",
        f"tie: factor {tied.factor:.3g}, exponent {tied.exponent:+.3f} in E/{tied.at_ev:g} eV, known"
        f" from {tied.range_ev[0]:g} to {tied.range_ev[1]:g} eV"
        f" ({material.tie.basis if material.tie else 'compound rule'})",
        f"density: {density.value:g} ± {density.sd:.2g} g/cm3, {density.conditions}"
        f" ({_told(density.source, density.seen, citation)})",
        f"angular shape: {material.angular.conditions}, sd {100 * material.angular_sd:.0f} % at 60 deg"
        f" ({_told(material.angular.source, material.angular.seen, citation)})",
        *(
            f"sources differ on {clash.what}: {clash.taken} taken, not {clash.other}: {clash.why}"
            for clash in material.disagreements
        ),
        *(f"caution: {material.toxicity.note}" for _ in [0] if material.toxicity),
    ]


def _estimate_line(material: Material) -> list[str]:
    if not material.estimate:
        return []
    return ["ESTIMATE: no trustworthy yield is known; good to a factor 1.5 at best; mill a coupon"]


def _told(source: str, seen: bool, citation: Callable[[str], str]) -> str:
    return citation(source) if seen else f"{citation(source)}; from memory"


def _ion(gas: str) -> dict[str, float]:
    if gas not in GASES:
        raise ValueError(f"'{gas}' is no beam gas known here; use one of {', '.join(GASES)}")
    return {"z1": float(GASES[gas].z), "m1_u": GASES[gas].mass_u}


def _pick(constants: Mapping[str, float], names: tuple[str, ...]) -> dict[str, float]:
    return {name: constants[name] for name in names}


def _mass_rule(material: Material, energy: Array, gas: str) -> AngularShape:
    return ep_constants(
        mass_ratio=GASES[gas].mass_u / material.mean_mass_u, eth_over_e=threshold_ev(material, gas) / energy
    )


def _tied(material: Material, gas: str) -> _Tied:
    _ion(gas)
    tie = material.tie
    if tie is None:
        return _estimated(material, gas)
    law, constants, factor, gas_sd = LAWS[material.law], material.constants, tie.factor, 0.0
    if gas != REFERENCE_GAS:
        gas_sd = OTHER_GAS_LN_SD
    if gas not in law.gases and material.other_gases is not None:
        other = material.other_gases
        law, constants, factor, gas_sd = LAWS["yamamura_tawara"], other.constants, other.factor, other.ln_sd
    return _Tied(
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


def _estimated(material: Material, gas: str) -> _Tied:
    factor = float(tie_of_unmeasured(mean_mass_u=material.mean_mass_u))
    gas_sd = 0.0 if gas == REFERENCE_GAS else OTHER_GAS_LN_SD
    return _Tied(
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
