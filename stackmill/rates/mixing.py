"""How a mixture of materials mills: the parts' thicknesses, one after the other.

    1/R = sum_i v_i/R_i          v_i: share of the volume, R_i: milling rate of the part alone

For a laminate thin against what is milled this is plain arithmetic: the beam spends v_i t/R_i in each part. For a
uniform mixture it is the steady state: the slow part gathers on the surface until all leave in the proportion of
the bulk (laws.compounds.component_steady_state), so that part i covers v_i R/R_i of the surface. Grains larger
than the depth milled do neither; they stand out as relief. Source: mass balance, as in laws/compounds.py.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def mixed_rate(*, share: ArrayLike, rate: ArrayLike) -> Array:
    """Milling rate of a mixture; share (n,), sum 1; rate (n, ...) of the parts, any unit. 0 where one is 0."""
    return np.asarray(1.0 / np.sum(_times(share, rate), axis=0))


def time_shares(*, share: ArrayLike, rate: ArrayLike) -> Array:
    """The share of the milling time that goes into each part (n, ...): how ln R moves with each ln R_i."""
    times = _times(share, rate)
    return np.asarray(times / np.sum(times, axis=0))


def _times(share: ArrayLike, rate: ArrayLike) -> Array:
    rates = np.asarray(rate, dtype=np.float64)
    shares = np.asarray(share, dtype=np.float64).reshape((-1,) + (1,) * (rates.ndim - 1))
    # A part that does not mill at all stops the whole; the smallest number stands for its zero.
    return np.asarray(shares / np.maximum(rates, 1e-300))
