"""The rates of a job's recipe: one curve a step and material, and what is believed of its parameters.

    rate = law(E, incidence + zero error) x exp(b + c + e u(E) + a g(incidence))

c, e and a are one each for a material, b one for the mill; see materials/calibration.py. Doubly charged ions
carry a share d of the current and mill as d/2 ions of twice the energy:
rate = (1 - d) rate(E) + d/2 rate(2E), each as if all ions were singly charged.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.calibration import CouponRate
from stackmill.documents.mill import Mill
from stackmill.documents.recipe import Beam
from stackmill.frozen import frozen
from stackmill.materials.calibration import RateBelief, RateEvidence, condition
from stackmill.materials.material import LabRate, Material
from stackmill.rates import yields
from stackmill.units import Measure

Array = NDArray[np.float64]

_SHARED = 3  # parameters that all materials share: current, dial, charge
_NODES = 9  # Chebyshev nodes across the dial's error, where ln rate is smooth there: good to 1e-6
_SMOOTH_TO_DEG = 65.0  # beyond, and about straight down, ln rate bends too much for that
_GRID_DEG = 0.25
_ZERO_ERROR_REACH_SD = 5.0
_LEAST_REACH_DEG = 0.5
_STEEPEST_DEG = 89.5
_ANY_EV = 1000.0  # the sd inside the measured energies is the same at all of them
_PER_MATERIAL = ("rate", "energy", "angle")


@frozen
class BeamRates:
    """The rate curves of one beam step, near its setting of the dial, for all M materials.

    single, double (M, 9 or G): ln rate (nm/s) as if all current were carried by singly charged ions of the step's
    energy, and of twice that energy: Chebyshev series in the zero error where the curve is smooth, else values on
    grid_deg (G,), true incidences. incidence_deg: as set; reach_deg: the series hold for zero errors up to this;
    terms (M, 3): how ln rate moves with each material's unknowns.
    """

    single: Array
    double: Array
    incidence_deg: float
    reach_deg: float
    grid_deg: Array | None
    terms: Array

    def rate_nm_per_s(self, zero_error_deg: Array, doubly_charged: Array) -> Array:
        """Milling rate (M, D) in nm/s at zero errors (D,) in degrees, for charge shares (D,)."""
        single = np.exp(self._curve(self.single, zero_error_deg))
        double = np.exp(self._curve(self.double, zero_error_deg))
        rate: Array = (1.0 - doubly_charged) * single + 0.5 * doubly_charged * double
        return rate

    def _curve(self, values: Array, zero_error_deg: Array) -> Array:
        if self.grid_deg is not None:
            incidence = np.minimum(np.abs(self.incidence_deg + zero_error_deg), _STEEPEST_DEG)
            return np.stack([np.interp(incidence, self.grid_deg, row) for row in values])
        x = np.clip(zero_error_deg / self.reach_deg, -1.0, 1.0)
        series: Array = values @ np.polynomial.chebyshev.chebvander(x, _NODES - 1).T
        return series


@frozen
class RateModel:
    """All beam steps' curves (None for steps without a beam), with the belief about their parameters.

    The belief's parameters are `current density` (ln), `dial zero error` (deg), `doubly charged share` (off its
    value), then for each material `NAME: rate`, `NAME: energy`, `NAME: angle` (ln), then `current density of VALUE`
    (ln) for each current that a step states with an error of its own. current: which parameter each step's
    current is off by; charged: the mill's share of doubly charged ions.
    """

    materials: tuple[str, ...]
    steps: tuple[BeamRates | None, ...]
    current: tuple[int, ...]
    charged: float
    belief: RateBelief
    evidence: tuple[RateEvidence, ...]

    def rate_nm_per_s(self, step: int, parameters: Array) -> Array:
        """Milling rates (M, D) in nm/s in a beam step, for parameters (P, D)."""
        ln_factor = parameters[self.current[step]] + self._ln_material(step, parameters)
        charged = np.clip(self.charged + parameters[2], 0.0, 1.0)
        rate: Array = self.beam(step).rate_nm_per_s(parameters[1], charged) * np.exp(ln_factor)
        return rate

    def ln_factor(self, step: int) -> Array:
        """What is believed of each material's ln rate over its law's (M,), in a beam step."""
        return self._ln_material(step, self.belief.mean[:, None])[:, 0]

    def _ln_material(self, step: int, parameters: Array) -> Array:
        count = len(_PER_MATERIAL) * len(self.materials)
        each = parameters[_SHARED : _SHARED + count].reshape(len(self.materials), len(_PER_MATERIAL), -1)
        ln: Array = np.einsum("mk,mkd->md", self.beam(step).terms, each)
        return ln

    def beam(self, step: int) -> BeamRates:
        """The curves of a step that mills with the beam."""
        beam = self.steps[step]
        assert beam is not None
        return beam

    def best_nm_per_s(self, step: int) -> Array:
        """The best values of the milling rates (M,) in a beam step, in nm/s."""
        return self.rate_nm_per_s(step, self.belief.mean[:, None])[:, 0]

    def ln_rate_sd(self, step: int) -> Array:
        """Sd of ln rate (M,) in a beam step, to first order in everything that is believed of mill and materials."""
        sd = np.maximum(self.belief.sd, 1e-9)
        around = self.belief.mean[:, None] + 0.5 * sd[:, None] * np.concatenate([np.eye(len(sd)), -np.eye(len(sd))], 1)
        ln = np.log(self.rate_nm_per_s(step, around))
        slope = (ln[:, : len(sd)] - ln[:, len(sd) :]) / sd
        found: Array = np.sqrt(np.einsum("mp,pq,mq->m", slope, self.belief.cov, slope))
        return found


def rate_model(
    mill: Mill, steps: Sequence[object], materials: Mapping[str, Material], coupons: Sequence[CouponRate] = ()
) -> RateModel:
    """The rate model of a recipe on a mill, with every measured rate of the materials and every coupon taken in.

    A material known as a multiple of another's rate learns from the other's measured rates where that one is
    among the materials too. coupons: of this mill and day; their materials must be among `materials`.
    """
    names = tuple(materials)
    known: dict[tuple[object, ...], BeamRates] = {}
    for step in steps:
        if isinstance(step, Beam) and setting(step) not in known:
            known[setting(step)] = _beam_rates(mill, step, materials)
    beams = tuple(known[setting(step)] if isinstance(step, Beam) else None for step in steps)
    stated = (step.current_density for step in steps if isinstance(step, Beam))
    own = list(dict.fromkeys(current for current in stated if current and current.sd))
    prior = _prior(mill, materials, own)
    after = len(prior.names) - len(own)
    own_at = {current: after + k for k, current in enumerate(own)}
    current = tuple(
        own_at.get(step.current_density, 0) if isinstance(step, Beam) and step.current_density else 0 for step in steps
    )
    at_value = {current.value: k for current, k in own_at.items()}
    evidence = tuple(
        _evidence(mill, material, names, measured, len(prior.names), at_value)
        for material in materials.values()
        for measured in material.measured_rates
    )
    evidence += tuple(
        coupon_evidence(mill, materials[coupon.material], names, coupon, len(prior.names)) for coupon in coupons
    )
    return RateModel(names, beams, current, mill.doubly_charged.value, condition(prior, evidence), evidence)


def coupon_evidence(
    mill: Mill, material: Material, names: Sequence[str], coupon: CouponRate, parameters: int
) -> RateEvidence:
    """A coupon as one row: milled with the very current, dial and charge share of the day."""
    current = Measure(coupon.current_density.value)
    told = LabRate(coupon.rate, coupon.energy, coupon.incidence, current, same_day=True)
    row = _evidence(mill, material, names, told, parameters, {})
    what = f"coupon {coupon.name}: {row.what.removesuffix(' %')} %"
    return RateEvidence(row.design, row.residual, row.noise_sd / float(np.sqrt(coupon.weight)), what)


def setting(step: Beam) -> tuple[object, ...]:
    """What the rates of a step depend on: steps of one setting share their curves."""
    return step.energy, step.incidence, step.motion, step.current_density


def parameter_names(materials: Sequence[str], own_current: Sequence[str] = ()) -> tuple[str, ...]:
    """The names of the parameters, in their order; own_current: currents that steps state with a ±."""
    each = (f"{name}: {what}" for name in materials for what in _PER_MATERIAL)
    return (
        "current density",
        "dial zero error",
        "doubly charged share",
        *each,
        *(f"current density of {current}" for current in own_current),
    )


def energy_term(material: Material, energy_ev: float, gas: str) -> float:
    """How far ln rate may be off for leaving the material's measured energies, signed: 0 inside them."""
    outside = float(yields.outside_ln_sd(material, energy_ev=energy_ev, gas=gas))
    higher = float(yields.outside_ln_sd(material, energy_ev=1.01 * energy_ev, gas=gas)) > outside
    return outside if higher else -outside


def _terms(material: Material, energy_ev: float, incidence_deg: float, gas: str) -> tuple[float, float, float]:
    """How ln rate moves with the material's three unknowns at one setting."""
    angle = float(yields.angular_leverage(np.radians(incidence_deg)))
    return 1.0, energy_term(material, energy_ev, gas), angle


def _prior(mill: Mill, materials: Mapping[str, Material], own_current: Sequence[Measure]) -> RateBelief:
    sd = [mill.current_density.rel_sd, mill.stage.zero_error.sd, mill.doubly_charged.sd]
    for material in materials.values():
        # The energy term carries its own size, so that its unknown has an sd of one.
        sd += [_rate_sd(material, mill.gas), 1.0, material.angular_sd]
    sd += [current.rel_sd for current in own_current]
    names = parameter_names(tuple(materials), [f"{current.value:g} mA/cm2" for current in own_current])
    spread, own_sd = _follow(materials, np.array(sd), mill.gas)
    return RateBelief(names, np.zeros(len(sd)), spread @ np.diag(np.square(own_sd)) @ spread.T)


def _follow(materials: Mapping[str, Material], sd: Array, gas: str) -> tuple[Array, Array]:
    """How the parameters hang together (P, P), and what each has to itself (P,).

    What is not known of a material is not known of its multiples and mixtures either: a multiple's unknowns are
    the other's, a mixture's its parts', by the share of the milling time each takes; only what the multiple, or
    mixing, is worth is their own.
    """
    names = list(materials)
    spread, own_sd = np.eye(len(sd)), sd.copy()

    def rows(name: str) -> slice:
        k = _SHARED + len(_PER_MATERIAL) * names.index(name)
        return slice(k, k + len(_PER_MATERIAL))

    done: set[str] = set()

    def hang(name: str) -> None:
        material = materials[name]
        parts = [(material.follows, 1.0)] if material.follows else _parts(material, gas)
        if name in done or not parts or any(part not in materials for part, _ in parts):
            return
        done.add(name)
        for part, share in parts:
            hang(part)
            spread[rows(name)] += share * spread[rows(part)]
        own_sd[rows(name)] = (material.follows_ln_sd if material.follows else material.mixing_ln_sd), 0.0, 0.0

    for name in names:
        hang(name)
    return spread, own_sd


def _parts(material: Material, gas: str) -> list[tuple[str, float]]:
    """The parts of a mixture, with the share of the milling time each takes."""
    if not material.mixture:
        return []
    times = yields.milling_time_shares(material, energy_ev=_ANY_EV, gas=gas)
    return [(part.material.name, float(time)) for part, time in zip(material.mixture, times, strict=True)]


def _rate_sd(material: Material, gas: str) -> float:
    """Sd of ln rate straight down, at the energies where the material was measured."""
    whole = float(yields.ln_yield_sd(material, energy_ev=_ANY_EV, gas=gas))
    outside = float(yields.outside_ln_sd(material, energy_ev=_ANY_EV, gas=gas))
    return float(np.sqrt(whole**2 - outside**2 + material.density_rel_sd**2))


def _beam_rates(mill: Mill, step: Beam, materials: Mapping[str, Material]) -> BeamRates:
    reach = max(_ZERO_ERROR_REACH_SD * mill.stage.zero_error.sd, _LEAST_REACH_DEG)
    current = (step.current_density or mill.current_density).value
    smooth = step.incidence >= reach and step.incidence + reach <= _SMOOTH_TO_DEG
    angle = np.pi * (np.arange(_NODES) + 0.5) / _NODES
    low, high = max(step.incidence - reach, 0.0), min(step.incidence + reach, _STEEPEST_DEG)
    grid = None if smooth else np.linspace(low, high, int(np.ceil((high - low) / _GRID_DEG)) + 2)
    incidence_deg = step.incidence + reach * np.cos(angle) if grid is None else grid
    # The Chebyshev transform, written out: chebfit would solve a least-squares problem for the same numbers.
    transform = np.cos(np.outer(np.arange(_NODES), angle)) * (2.0 / _NODES)
    transform[0] *= 0.5

    def curves(energy_ev: float) -> Array:
        swing = step.motion.half_angle
        ln = np.log([_law_rate(mill, m, energy_ev, incidence_deg, current, swing) for m in materials.values()])
        return ln if grid is not None else ln @ transform.T

    terms = np.array([_terms(m, step.energy, step.incidence, mill.gas) for m in materials.values()])
    return BeamRates(curves(step.energy), curves(2.0 * step.energy), step.incidence, reach, grid, terms)


def _law_rate(
    mill: Mill,
    material: Material,
    energy_ev: float,
    incidence_deg: Array,
    current: float,
    rocking_deg: float = 0.0,
) -> Array:
    """What the laws give with the library's best values, all ions singly charged, in nm/s."""
    return yields.rate_nm_per_s(
        material,
        energy_ev=energy_ev,
        incidence_rad=np.radians(incidence_deg),
        current_density_ma_per_cm2=current,
        doubly_charged=0.0,
        divergence_rad=float(np.radians(mill.divergence)),
        rocking_rad=float(np.radians(rocking_deg)),
        gas=mill.gas,
    )


def _evidence(
    mill: Mill,
    material: Material,
    names: Sequence[str],
    measured: LabRate,
    parameters: int,
    currents: Mapping[float, int],
) -> RateEvidence:
    """A lab's own rate, as one row: it fixes b + c at its stated current.

    The current's error (and the dial's) counts again on another day, so only a rate of the same day may tell
    about them.
    """
    incidence = measured.incidence_deg + np.array([0.0, -0.5, 0.5])
    current, charged = measured.current_density.value, mill.doubly_charged.value
    single, double = (
        _law_rate(mill, material, energy, np.clip(np.abs(incidence), 0.0, _STEEPEST_DEG), current)
        for energy in (measured.energy_ev, 2.0 * measured.energy_ev)
    )
    rates = (1.0 - charged) * single + 0.5 * charged * double
    ln_rate = np.log(rates)
    design = np.zeros(parameters)
    k = _SHARED + len(_PER_MATERIAL) * names.index(material.name)
    design[k : k + len(_PER_MATERIAL)] = _terms(material, measured.energy_ev, measured.incidence_deg, mill.gas)
    if measured.same_day:
        design[1:_SHARED] = ln_rate[2] - ln_rate[1], (0.5 * double[0] - single[0]) / rates[0]
        design[currents.get(current, 0)] = 1.0  # it tells of the very current it was milled with
    rate = measured.rate
    what = f"{material.name}: measured {rate.value * 60:.3g} nm/min ± {100 * rate.rel_sd:.2g} %"
    noise = rate.rel_sd if measured.same_day else float(np.hypot(rate.rel_sd, measured.current_density.rel_sd))
    return RateEvidence(design, float(np.log(rate.value) - ln_rate[0]), noise, what)
