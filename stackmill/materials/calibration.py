"""What measured rates teach about this mill: Gaussian conditioning of the rate model.

The model of every milling rate is

    ln rate = ln law + ln J + b + c(material) + e(material) u(E) + a(material) g(incidence) [+ dial slope x zero error]

b is the mill's current-density error of the day, c the material's factor, e and a what is not known of its
energy and angular dependence; u and g are zero where the material was measured. All are Gaussian around the
library's values, so that a measured rate, which is linear in them, is taken in exactly.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]


@frozen
class RateBelief:
    """What is believed of the rate model's parameters.

    names (P,): what each parameter is; mean (P,) and cov (P, P): Gaussian belief, in ln rate, except the
    dial's zero error, in degrees.
    """

    names: tuple[str, ...]
    mean: Array
    cov: Array

    @property
    def sd(self) -> Array:
        """Standard deviation of each parameter (P,)."""
        return np.sqrt(np.clip(np.diag(self.cov), 0.0, None))

    def root(self) -> Array:
        """A (P, P) matrix R with R R^T = cov: mean + R z is a draw when z is standard normal.

        The symmetric root is used, so that each parameter keeps to its own z as far as the covariance allows
        and an input that measurements have fixed completely (a zero on the diagonal) does no harm.
        """
        values, vectors = np.linalg.eigh(self.cov)
        root: Array = (vectors * np.sqrt(np.clip(values, 0.0, None))) @ vectors.T
        return root


@frozen
class RateEvidence:
    """One measured rate, as the conditioning sees it.

    design (P,): how ln rate moves with each parameter at the measured setting; residual: ln measured minus
    ln law; noise_sd: of ln measured; what: words for the trail.
    """

    design: Array
    residual: float
    noise_sd: float
    what: str


def condition(prior: RateBelief, evidence: Sequence[RateEvidence]) -> RateBelief:
    """The belief after the evidence: the linear-Gaussian posterior, one measurement at a time.

    Taking the rows one by one is exact (their noises are independent) and needs no matrix inverse. A row with
    no noise fixes its combination of parameters.

    Source: the textbook update of a Gaussian by a linear observation (Rasmussen & Williams, Gaussian
    Processes for Machine Learning, 2006, appendix A.2, from memory).
    """
    mean, cov = prior.mean.copy(), prior.cov.copy()
    for row in evidence:
        leverage = cov @ row.design
        variance = float(row.design @ leverage) + row.noise_sd**2
        if variance <= 0.0:
            continue
        mean = mean + leverage * ((row.residual - float(row.design @ mean)) / variance)
        cov = cov - np.outer(leverage, leverage) / variance
    return RateBelief(prior.names, mean, 0.5 * (cov + cov.T))
