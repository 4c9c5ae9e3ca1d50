"""Ions on their way: how fast they fly."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stackmill.constants import ATOMIC_MASS_KG, ELEMENTARY_CHARGE_C
from stackmill.laws.checks import positive

Array = NDArray[np.float64]


def ion_speed_m_per_s(*, energy_ev: ArrayLike, mass_u: ArrayLike) -> Array:
    """Speed of an ion [m/s]; shape of the inputs broadcast together.

    energy_ev: kinetic energy [eV], usually 100 to 10 000; mass_u: mass [u], 39.95 for argon.

        v = sqrt(2 E / m)

    Not relativistic: at 10 keV argon the correction is 1e-7. Source: mechanics.
    """
    energy_j = positive("energy_ev", energy_ev) * ELEMENTARY_CHARGE_C
    return np.asarray(np.sqrt(2.0 * energy_j / (positive("mass_u", mass_u) * ATOMIC_MASS_KG)))
