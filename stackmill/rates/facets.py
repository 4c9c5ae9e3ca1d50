"""How fast sloped ground comes down under the beam: the vertical speed of a facet, averaged over rotation.

A facet tilted by b from the sample's plane, facing azimuth p, meets the beam at g with
cos g = cos b cos th + sin b sin th cos p. It recedes along its normal at J Y(g) cos g / (e n), which is
1 / cos b times as much straight down. Facets turned away from the beam do not mill.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam
from stackmill.frozen import frozen
from stackmill.rates.yields import AngularShape

Array = NDArray[np.float64]

_AZIMUTHS = 48
_COSINES = 32768
_ROCKING_NODES = 9
_SLOPES = 160
_STEEPEST_DEG = 89.8


class Shape(Protocol):
    """Anything that knows Y(incidence)/Y(0)."""

    def ratio(self, incidence_rad: Array) -> Array:
        """Y(incidence)/Y(0) at incidences (rad) of any shape."""
        ...


def slope_grid() -> Array:
    """Tangents (Q,) of slope angles from 0 to 89.8 degrees, even in q/(1+q), where steep walls stay resolved."""
    steepest = np.tan(np.radians(_STEEPEST_DEG))
    t = np.linspace(0.0, steepest / (1.0 + steepest), _SLOPES)
    return t / (1.0 - t)


def vertical_speed_ratio(shape: AngularShape, step: Beam, slope: Array) -> Array:
    """Vertical speed of slopes, as a multiple of flat ground's (which is 1): (sides, Q).

    Rotating: one side, the average over azimuth. Still or rocking: the sides that face to and from the beam,
    averaged over the swing. The divergence is left out: it blurs a facet's speed by less than the shape's sd.
    """
    incidence, share = _incidences(step)
    rotating = step.motion.kind == "rotating"
    azimuth = np.pi * (np.arange(_AZIMUTHS) + 0.5) / _AZIMUTHS if rotating else np.array([0.0, np.pi])
    speed = np.tensordot(share, _vertical(shape, incidence[:, None, None], azimuth[:, None], slope), axes=1)
    sides = speed.mean(axis=0, keepdims=True) if rotating else speed
    return np.asarray(sides / sides[:, :1])


def _incidences(step: Beam) -> tuple[Array, Array]:
    """The incidences of a step, with the share of time spent at each."""
    swing = step.motion.half_angle if step.motion.kind == "rocking" else 0.0
    if not swing:
        return np.radians([step.incidence]), np.ones(1)
    nodes, weights = np.polynomial.legendre.leggauss(_ROCKING_NODES)
    return np.radians(step.incidence + swing * nodes), 0.5 * weights


@frozen
class FacetSpeed:
    """Y(g) cos g of one material over Y(0), as a table: many slopes and azimuths are asked for it.

    value (n + 1,): at incidences g on the facet from 0 to 90 degrees, evenly in sqrt(1 - cos g), which costs less
    than an angle to work out.
    """

    value: Array

    @classmethod
    def of(cls, shape: Shape) -> FacetSpeed:
        """The table of a shape of the yield."""
        cosine = 1.0 - np.square(np.linspace(0.0, 1.0, _COSINES + 1))
        value = np.asarray(shape.ratio(np.arccos(cosine))) * cosine
        value[-1] = 0.0
        return cls(value)

    def vertical(self, cosine: Array, steepening: Array) -> Array:
        """How fast facets come down: at cos g (any shape; none below 0), 1/cos b times as much straight down."""
        at = np.sqrt(1.0 - np.clip(cosine, 0.0, 1.0)) * _COSINES
        below = np.minimum(at.astype(np.intp), _COSINES - 1)
        part = at - below
        return np.asarray(((1.0 - part) * self.value[below] + part * self.value[below + 1]) * steepening)


def _vertical(shape: AngularShape, incidence: Array, azimuth: Array, slope: Array) -> Array:
    """Y(g) cos g / cos b over Y(0), for slopes against azimuths and incidences."""
    cos_b = 1.0 / np.sqrt(1.0 + slope**2)
    sin_b = slope * cos_b
    cos_g = cos_b * np.cos(incidence) + sin_b * np.sin(incidence) * np.cos(azimuth)
    lit = np.clip(cos_g, 0.0, 1.0)
    return np.where(cos_g > 0.0, shape.ratio(np.arccos(lit)) * lit / cos_b, 0.0)


def shadow_multiple(step: Beam, divergence_deg: float) -> float:
    """How far a shadow reaches in one step, as a multiple of the height that throws it."""
    swing = step.motion.half_angle if step.motion.kind == "rocking" else 0.0
    lowest = abs(step.incidence) + swing + divergence_deg
    return float(np.tan(np.radians(min(lowest, 89.0)))) if abs(step.incidence) + swing > 0.0 else 0.0


def speeds_of(shapes: Mapping[str, AngularShape], flat_nm_per_s: Mapping[str, float], step: Beam) -> Array:
    """Vertical speeds (M, sides, Q) in nm/s of each material's slopes, in the order of `shapes`."""
    slope = slope_grid()
    return np.stack([flat_nm_per_s[name] * vertical_speed_ratio(shape, step, slope) for name, shape in shapes.items()])
