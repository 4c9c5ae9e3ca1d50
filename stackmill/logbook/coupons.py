"""Coupons to a calibration: what the rates of this mill on this day are, and how far each coupon is to be trusted.

The model is that of materials/calibration.py; all is Gaussian, so the posterior is exact. A coupon that is out of
line with the library and all the others is not believed as it stands: it counts with a weight below one. How far
out it is, is judged without it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.calibration import CouponRate
from stackmill.documents.coupons import Coupon
from stackmill.documents.mill import Mill
from stackmill.frozen import frozen
from stackmill.materials.calibration import RateBelief, RateEvidence, condition
from stackmill.materials.material import Material
from stackmill.rates.model import coupon_evidence, rate_model
from stackmill.units import Measure

Array = NDArray[np.float64]

IN_LINE_SD = 2.5  # a coupon farther off than this, judged without it, counts less
HALF_TRUSTED = 0.5  # a coupon of less weight is called wild
_REFUSED_CHI2, _DOUBTFUL_CHI2 = 9.0, 3.0  # reduced: all residuals three times, or 1.7 times, what they should be
_ROUNDS = 50
_SETTLED = 1e-6


@frozen
class CouponFit:
    """How one coupon sits in the fit.

    rate_nm_per_s; fitted_nm_per_s: what all coupons together say at its setting; off_sd: its distance from what
    the library and the other coupons say, in sds of the two; weight (0..1); leverage (0..1): how much of the fit
    at its setting is its own doing.
    """

    coupon: Coupon
    rate_nm_per_s: Measure
    fitted_nm_per_s: float
    off_sd: float
    weight: float
    leverage: float


@frozen
class Learnt:
    """What was learnt of one thing: factor on the library's (or the mill's) value, and ln sd before and after."""

    what: str
    factor: float
    sd_before: float
    sd_after: float


@frozen
class CalibrationFit:
    """What coupons say.

    fits: one a coupon; learnt: the current, then each material's rate where its coupons were milled, then a
    material without any; belief: the posterior of every parameter, prior: before; reduced_chi_square: of the
    coupons against the library and each other; verdict and why.
    """

    fits: tuple[CouponFit, ...]
    learnt: tuple[Learnt, ...]
    prior: RateBelief
    belief: RateBelief
    reduced_chi_square: float
    verdict: Literal["good", "doubtful", "refused"]
    why: str

    def rates(self, mill: Mill) -> tuple[CouponRate, ...]:
        """The coupons as a calibration file holds them."""
        return tuple(
            CouponRate(
                name=fit.coupon.name,
                material=fit.coupon.material,
                energy=f"{fit.coupon.energy_ev!r} eV",
                incidence=f"{fit.coupon.incidence_deg!r} deg",
                current_density=f"{_current(fit.coupon, mill)!r} mA/cm2",
                rate=f"{60.0 * fit.rate_nm_per_s.value!r} nm/min ± {60.0 * fit.rate_nm_per_s.sd!r} nm/min",
                weight=f"{100.0 * max(fit.weight, 1e-4):.6g} %",
                out_of_line=f"{fit.off_sd:+.1f} sd",
            )
            for fit in self.fits
        )


def fit_coupons(mill: Mill, coupons: Sequence[Coupon], materials: Mapping[str, Material]) -> CalibrationFit:
    """Fit coupons. materials: those of the coupons by name, and whatever else is to learn from them.

    Materials known as multiples or mixtures of others learn from them where those are among the materials.
    """
    model = rate_model(mill, (), materials)
    names = model.materials
    rows = [
        coupon_evidence(mill, materials[coupon.material], names, _as_told(coupon, mill), len(model.belief.names))
        for coupon in coupons
    ]
    weights = _weights(model.belief, rows)
    belief = condition(model.belief, _weighted(rows, weights))
    off = _off_sd(model.belief, rows, weights)
    fits = tuple(
        CouponFit(
            coupon,
            coupon.rate,
            float(np.exp(np.log(coupon.rate.value) - row.residual + row.design @ belief.mean)),
            float(z),
            float(w),
            _leverage(belief, row, w),
        )
        for coupon, row, z, w in zip(coupons, rows, off, weights, strict=True)
    )
    chi2 = _reduced_chi_square(model.belief, rows)
    verdict, why = _verdict(fits, chi2)
    return CalibrationFit(
        fits, _learnt(model.belief, belief, rows, fits, names), model.belief, belief, chi2, verdict, why
    )


def _as_told(coupon: Coupon, mill: Mill) -> CouponRate:
    return CouponRate(
        name=coupon.name,
        material=coupon.material,
        energy=f"{coupon.energy_ev!r} eV",
        incidence=f"{coupon.incidence_deg!r} deg",
        current_density=f"{_current(coupon, mill)!r} mA/cm2",
        rate=f"{60.0 * coupon.rate.value!r} nm/min ± {60.0 * coupon.rate.sd!r} nm/min",
    )


def _current(coupon: Coupon, mill: Mill) -> float:
    return coupon.current_density if coupon.current_density is not None else mill.current_density.value


def _weighted(rows: Sequence[RateEvidence], weights: Array) -> list[RateEvidence]:
    return [
        RateEvidence(row.design, row.residual, row.noise_sd / float(np.sqrt(w)), row.what)
        for row, w in zip(rows, weights, strict=True)
    ]


def _weights(prior: RateBelief, rows: Sequence[RateEvidence]) -> Array:
    """Weights (K,) of coupons: 1 in line, falling with the square of how far out one is, judged without it.

    One coupon alone is judged against the library, whose own sd holds it in line.
    """
    weights = np.ones(len(rows))
    for _ in range(_ROUNDS):
        off = np.abs(_off_sd(prior, rows, weights))
        wanted = np.minimum(1.0, np.square(IN_LINE_SD / np.maximum(off, 1e-12)))
        if np.abs(wanted - weights).max(initial=0.0) < _SETTLED:
            break
        weights = 0.5 * (weights + wanted)
    return weights


def _off_sd(prior: RateBelief, rows: Sequence[RateEvidence], weights: Array) -> Array:
    """How far (K,) each coupon is from what the library and the other, weighted, coupons say, in sds of both."""
    found = []
    weighted = _weighted(rows, weights)
    for k, row in enumerate(rows):
        others = condition(prior, weighted[:k] + weighted[k + 1 :])
        variance = float(row.design @ others.cov @ row.design) + row.noise_sd**2
        found.append((row.residual - float(row.design @ others.mean)) / np.sqrt(variance))
    return np.array(found)


def _leverage(belief: RateBelief, row: RateEvidence, weight: float) -> float:
    """The share of the fit at a coupon's setting that is the coupon's own: posterior variance over its noise."""
    variance = float(row.design @ belief.cov @ row.design)
    return min(weight * variance / row.noise_sd**2, 1.0)


def _reduced_chi_square(prior: RateBelief, rows: Sequence[RateEvidence]) -> float:
    """The coupons' squared distance from the prior, in units of what both leave open, per coupon."""
    design = np.stack([row.design for row in rows])
    residual = np.array([row.residual for row in rows]) - design @ prior.mean
    noise = np.diag(np.square([row.noise_sd for row in rows]))
    return float(residual @ np.linalg.solve(design @ prior.cov @ design.T + noise, residual)) / len(rows)


def _verdict(fits: Sequence[CouponFit], chi2: float) -> tuple[Literal["good", "doubtful", "refused"], str]:
    wild = [fit for fit in fits if fit.weight < HALF_TRUSTED]
    if len(fits) > 1 and 2 * len(wild) >= len(fits):
        return "refused", f"{len(wild)} of {len(fits)} coupons contradict each other: there is nothing to believe"
    if chi2 > _REFUSED_CHI2 and not wild:
        return "refused", f"the coupons are far from library and each other (reduced chi-square {chi2:.1f})"
    if wild:
        names = ", ".join(repr(fit.coupon.name) for fit in wild)
        return "doubtful", f"{names} out of line with the rest: mill {'it' if len(wild) == 1 else 'them'} again"
    if chi2 > _DOUBTFUL_CHI2:
        return "doubtful", f"the coupons are farther from library and each other than they should be ({chi2:.1f})"
    return "good", "the coupons agree with the library and each other"


def _learnt(
    prior: RateBelief,
    belief: RateBelief,
    rows: Sequence[RateEvidence],
    fits: Sequence[CouponFit],
    names: Sequence[str],
) -> tuple[Learnt, ...]:
    """What was learnt: the current; each material with coupons, at its first one's setting; materials without."""
    current = np.zeros(len(prior.names))
    current[0] = 1.0
    found = [_one("current density", current, prior, belief)]
    seen: set[str] = set()
    for row, fit in zip(rows, fits, strict=True):
        if fit.coupon.material not in seen:
            seen.add(fit.coupon.material)
            found.append(_one(fit.coupon.material, row.design, prior, belief))
    for name in names:
        if name not in seen:
            design = np.zeros(len(prior.names))
            design[[0, prior.names.index(f"{name}: rate")]] = 1.0
            found.append(_one(name, design, prior, belief))
    return tuple(found)


def _one(what: str, design: Array, prior: RateBelief, belief: RateBelief) -> Learnt:
    before, after = (float(np.sqrt(max(float(design @ b.cov @ design), 0.0))) for b in (prior, belief))
    return Learnt(what, float(np.exp(design @ (belief.mean - prior.mean))), before, after)
