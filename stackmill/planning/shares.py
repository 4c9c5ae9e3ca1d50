"""Which uncertain inputs widen the answer most: each one's share of the variance, read off the draws."""

from __future__ import annotations

import numpy as np

from stackmill.ensemble.run import Ensemble
from stackmill.frozen import frozen
from stackmill.planning.windows import Window


@frozen
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
    shares: dict[str, float] = {}
    for name, share in zip(
        ensemble.inputs.names, (away @ off) ** 2 / ((away**2).sum(axis=1) * (off @ off)), strict=True
    ):
        group = _group(name, ensemble)
        shares[group] = shares.get(group, 0.0) + float(share)
    return tuple(Share(name, shares[name]) for name in sorted(shares, key=lambda name: -shares[name]))


def _group(name: str, ensemble: Ensemble) -> str:
    """A material's unknowns count together: a measured rate ties them, so that none moves alone."""
    material, colon, _ = name.partition(": ")
    return f"{material}: rate" if colon and material in ensemble.inputs.model.materials else name
