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
from stackmill.laws.incidence import (
    AngularShape,
    ep_constants,
    incidence_nodes,
    root_of_closeness,
)
from stackmill.materials.material import Material
from stackmill.rates.mixing import mixed_rate, time_shares
from stackmill.rates.tying import (
    ESTIMATE_ABOVE,
    ESTIMATE_BELOW,
    ESTIMATE_LN_SD,
    ESTIMATE_RANGE_EV,
    OTHER_GAS_LN_SD,
    REFERENCE_GAS,
    ion_of,
    tied_law,
)

__all__ = [
    "ESTIMATE_ABOVE",
    "ESTIMATE_BELOW",
    "ESTIMATE_LN_SD",
    "ESTIMATE_RANGE_EV",
    "OTHER_GAS_LN_SD",
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

REFERENCE_ANGLE_RAD = np.radians(60.0)
SMALLEST_B = 0.05
ZERO_CELSIUS_K = 273.15


def normal_yield(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> Array:
    """Yield at normal incidence, best value [atoms/ion]; shape of energy_ev.

    law x factor x (E/E0)^exponent; the power is held at its end values outside the measured energies. A
    material known relative to another has that one's yield times the multiple; a mixture has the yield that
    belongs to its milling rate (rates.mixing).
    """
    energy = np.asarray(energy_ev, dtype=np.float64)
    if material.mixture:
        parts = _part_speeds(material, energy, gas)
        return _multiple(material) * material.atom_density_1e22 * mixed_rate(share=_shares(material), rate=parts)
    tied = tied_law(material, gas)
    bare = tied.law.function(energy_ev=energy, **ion_of(gas), **_pick(tied.constants, tied.law.needs))
    held = np.clip(energy, *tied.range_ev)
    return np.asarray(_multiple(material) * bare * tied.factor * (held / tied.at_ev) ** tied.exponent)


def threshold_ev(material: Material, gas: str = REFERENCE_GAS) -> float:
    """Energy below which nothing leaves [eV]; for a mixture, below which one of its parts stays."""
    if material.mixture:
        return max(threshold_ev(part.material, gas) for part in material.mixture)
    tied = tied_law(material, gas)
    known = {**tied.constants, "m1_u": GASES[gas].mass_u}
    return float(tied.law.threshold(**_pick(known, tied.law.threshold_needs)))


def angular_shape(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> AngularShape:
    """Y(incidence)/Y(0); f, b and c have the shape of energy_ev.

    The material's own constants where it has them, else the rule in the mass ratio. Own constants belong to
    argon: for another gas the rule's step from argon to that gas is added to them. A mixture's are its parts'
    means, weighted by milling time: within a few per cent of what `rate_nm_per_s` takes part by part.
    """
    energy = np.asarray(energy_ev, dtype=np.float64)
    if material.mixture:
        weight = _time_shares(material, energy, gas)
        shapes = [angular_shape(part.material, energy_ev=energy, gas=gas) for part in material.mixture]
        f, b, c = (sum(w * getattr(s, key) for w, s in zip(weight, shapes, strict=True)) for key in "fbc")
        return AngularShape(f=np.asarray(f), b=np.asarray(b), c=np.asarray(c))
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
    """Sd of ln(yield at normal incidence); shape of energy_ev. The density's sd is not in it.

    The sd of a multiple, or of mixing, is; the parts of a mixture are taken to be off together.
    """
    outside = outside_ln_sd(material, energy_ev=energy_ev, gas=gas)
    return np.asarray(np.hypot(_inside_ln_sd(material, np.asarray(energy_ev, dtype=np.float64), gas), outside))


def _inside_ln_sd(material: Material, energy: Array, gas: str) -> Array:
    """Sd of ln yield within the measured energies."""
    own = material.relative.ln_sd if material.relative else 0.0
    if material.mixture:
        parts = [_inside_ln_sd(part.material, energy, gas) for part in material.mixture]
        known = np.sum(_time_shares(material, energy, gas) * np.array(parts), axis=0)
    else:
        known = np.full(energy.shape, tied_law(material, gas).ln_sd)
    return np.asarray(np.sqrt(known**2 + material.mixing_ln_sd**2 + own**2))


def outside_ln_sd(material: Material, *, energy_ev: ArrayLike, gas: str = REFERENCE_GAS) -> Array:
    """The part of `ln_yield_sd` that comes from leaving the measured energies: 0 between them."""
    if material.mixture:
        energy = np.asarray(energy_ev, dtype=np.float64)
        parts = [outside_ln_sd(part.material, energy_ev=energy, gas=gas) for part in material.mixture]
        return np.asarray(np.sum(_time_shares(material, energy, gas) * np.array(parts), axis=0))
    tied = tied_law(material, gas)
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
    flux = _Flux(energy_ev, doubly_charged, gas, angular_deviation)
    incidence = np.asarray(incidence_rad, dtype=np.float64)
    nodes = _nodes(tuple(incidence.ravel().tolist()), divergence_rad, rocking_rad)
    removed = _removal(material, nodes, flux)
    return np.asarray(NM_PER_S_PER_MA_CM2 * current_density_ma_per_cm2 * removed.reshape(incidence.shape))


@frozen
class _Flux:
    """What arrives: energy [eV], share of doubly charged current, gas; and by how many sds the shape is off."""

    energy_ev: float
    doubly_charged: float
    gas: str
    deviation: float


def _removal(material: Material, nodes: _Nodes, flux: _Flux) -> Array:
    """Volume removed for each charge that arrives [1e-22 cm3], an entry an incidence; a mixture part by part."""
    if material.mixture:
        parts = [_removal(part.material, nodes, flux) for part in material.mixture]
        return _multiple(material) * mixed_rate(share=_shares(material), rate=np.array(parts))
    charges = ((flux.energy_ev, 1.0 - flux.doubly_charged), (2.0 * flux.energy_ev, 0.5 * flux.doubly_charged))
    total = np.zeros(nodes.first.size)
    for energy, ions_per_charge in charges:
        if ions_per_charge == 0.0:
            continue
        y0 = float(normal_yield(material, energy_ev=energy, gas=flux.gas))
        shape = _deviated(angular_shape(material, energy_ev=energy, gas=flux.gas), material, flux.deviation)
        total += ions_per_charge * y0 * np.add.reduceat(nodes.weight * shape(nodes.incidence_rad), nodes.first)
    return np.asarray(total / material.atom_density_1e22)


def milling_time_shares(material: Material, *, energy_ev: float, gas: str = REFERENCE_GAS) -> Array:
    """The share of the milling time that goes into each part of a mixture (n,), straight down."""
    return _time_shares(material, np.asarray(energy_ev, dtype=np.float64), gas)


def _multiple(material: Material) -> float:
    return material.relative.factor if material.relative else 1.0


def _shares(material: Material) -> tuple[float, ...]:
    return tuple(part.share for part in material.mixture)


def _part_speeds(material: Material, energy: Array, gas: str) -> Array:
    """Volume that an ion removes from each part alone, straight down [1e-22 cm3], (n, ...)."""
    return np.array(
        [
            normal_yield(part.material, energy_ev=energy, gas=gas) / part.material.atom_density_1e22
            for part in material.mixture
        ]
    )


def _time_shares(material: Material, energy: Array, gas: str) -> Array:
    return time_shares(share=_shares(material), rate=_part_speeds(material, energy, gas))


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
    sd = float(ln_yield_sd(material, energy_ev=energy_ev, gas=gas))
    return [
        f"{material.name}: {material.title}",
        *_estimate_line(material),
        f"yield at {energy_ev:g} eV {gas}: {float(normal_yield(material, energy_ev=energy_ev, gas=gas)):.3g}"
        f" atoms/ion ± {100 * sd:.0f} %",
        *_relative_line(material),
        *(_mixture_lines(material, energy_ev, gas, citation) or _law_lines(material, gas, citation)),
        *(
            f"sources differ on {clash.what}: {clash.taken} taken, not {clash.other}: {clash.why}"
            for clash in material.disagreements
        ),
        *(
            f"alarm: {alarm.what} from {alarm.temperature.value - ZERO_CELSIUS_K:.0f} ± {alarm.temperature.sd:.2g} degC"
            f" ({_told(alarm.temperature.source, alarm.temperature.seen, citation)})"
            for alarm in material.alarms
        ),
        *(f"caution: {material.toxicity.note}" for _ in [0] if material.toxicity),
    ]


def _relative_line(material: Material) -> list[str]:
    """What a rate known relative to another material says of itself."""
    told = material.relative
    if told is None:
        return []
    return [
        f"relative: mills as {told}, at every energy and angle ({material.origin}); its ± comes on top of that of"
        f" {told.material}, whose law follows, and whatever is measured of it"
    ]


def _mixture_lines(material: Material, energy_ev: float, gas: str, citation: Callable[[str], str]) -> list[str]:
    """A mixture's rule and shares, then the trail of each part; empty for anything else."""
    if not material.mixture:
        return []
    times = _time_shares(material, np.asarray(energy_ev), gas)
    parts = ", ".join(
        f"{100 * part.share:.3g} % {part.material.name} ({100 * time:.0f} % of the time)"
        for part, time in zip(material.mixture, times, strict=True)
    )
    return [
        f"mixture by volume ({material.origin}): {parts}",
        "rule: 1/rate = sum of share/rate, true of thin laminates and, once the surface has settled, of uniform"
        f" mixtures; parts off together, and {100 * material.mixing_ln_sd:.0f} % for mixing",
        *(
            f"part {line}" if k == 0 else f"  {line}"
            for part in material.mixture
            for k, line in enumerate(trail(part.material, energy_ev=energy_ev, gas=gas, citation=citation))
        ),
    ]


def _law_lines(material: Material, gas: str, citation: Callable[[str], str]) -> list[str]:
    tied, density = tied_law(material, gas), material.density
    return [
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
    ]


def _estimate_line(material: Material) -> list[str]:
    if not material.estimate:
        return []
    return ["ESTIMATE: no trustworthy yield is known; good to a factor 1.5 at best; mill a coupon"]


def _told(source: str, seen: bool, citation: Callable[[str], str]) -> str:
    return citation(source) if seen else f"{citation(source)}; from memory"


def _pick(constants: Mapping[str, float], names: tuple[str, ...]) -> dict[str, float]:
    return {name: constants[name] for name in names}


def _mass_rule(material: Material, energy: Array, gas: str) -> AngularShape:
    return ep_constants(
        mass_ratio=GASES[gas].mass_u / material.mean_mass_u, eth_over_e=threshold_ev(material, gas) / energy
    )
