"""Which uncertain inputs widen the answer most: each one's share of the variance, read off the draws."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from stackmill.ensemble.run import Ensemble
from stackmill.planning.windows import Window


@dataclass(frozen=True)
class Share:
    """One input's share (0..1) of the variance of the moment the goal is exposed."""

    name: str
    share: float


def variance_shares(ensemble: Ensemble, window: Window) -> tuple[Share, ...]:
    """The inputs by their share of the variance of the exposed moment, counted from the window's leg.

    The inputs are independent standard normals, so each one's squared correlation with the moment is its
    first-order share (Saltelli et al., Global Sensitivity Analysis, 2008, chapter 1, from memory), as far as
    the moment is linear in it. Draws in which the goal is never exposed are left out.
    """
    start = ensemble.outcome.leg_start_s[window.leg]
    moment = ensemble.outcome.exposed_s - start
    met = np.isfinite(moment)
    z, moment = ensemble.z[:, met], moment[met]
    if not moment.size or moment.std() == 0.0:
        return ()
    away = z - z.mean(axis=1, keepdims=True)
    off = moment - moment.mean()
    share = (away @ off) ** 2 / ((away**2).sum(axis=1) * (off @ off))
    order = np.argsort(-share)
    return tuple(Share(ensemble.inputs.names[k], float(share[k])) for k in order)
