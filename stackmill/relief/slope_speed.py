"""How fast slopes come down: one table for each beam step, over all slopes and all materials.

A slope p (its tangent, signed along a section) is looked up at q = p/(1+|p|), which is -1..1, and the speed is
kept over 1+|p|, so that a wall (|p| without end) has a finite entry: the pace at which it walks sideways. Where
something stands between a slope and the beam, the hidden part of the light is taken off; `hidden` says how much
of a slope's speed comes from the light that a horizon hides first.

A motion is a set of directions the beam comes from, with the share of time of each: `Light`. To add a motion,
give its directions and how many of them a horizon hides (docs/physics/relief.md says where).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.rates.facets import FacetSpeed, Shape

Array = NDArray[np.float64]
Index = NDArray[np.intp]

INTERVALS = 4096  # of |q|: linear between them is good to 1e-7 of the speed
HIDDEN_INTERVALS = 256  # of |q|, for the hidden shares, which bend less
BINS = 16  # of the light on each side of a section
_AVERAGED = 64  # azimuths of the average over a rotation, half a turn
_NOISE = 1e-8  # steps of the table smaller than this part of flat ground's speed are level

ROTATING, SWINGING = 0, 1

_Q = np.linspace(-1.0, 1.0, 2 * INTERVALS + 1)
_SLOPES = _Q / np.maximum(1.0 - np.abs(_Q), 1e-300)


@frozen
class Light:
    """Where the beam comes from in one step, for a section that runs along x.

    kind: ROTATING (any azimuth, one incidence) or SWINGING (in the plane of the section, between two incidences).
    low_rad, high_rad: least and greatest incidence, signed in SWINGING: above 0 the beam comes from the side of
    greater x. still: both the same.
    """

    kind: int
    low_rad: float
    high_rad: float

    @property
    def steepest_tan(self) -> float:
        """How far a shadow can reach, as a multiple of the height that throws it."""
        return float(np.tan(min(max(abs(self.low_rad), abs(self.high_rad)), np.radians(89.0))))

    def directions(self) -> tuple[Array, Array]:
        """Incidence (rad) along x and azimuth from x of directions, all of one share of the time."""
        if self.kind == ROTATING:
            if self.high_rad == 0.0:
                return np.zeros(1), np.zeros(1)
            azimuth = np.pi * (np.arange(_AVERAGED) + 0.5) / _AVERAGED
            return np.full(_AVERAGED, self.high_rad), azimuth
        if self.low_rad == self.high_rad:
            return np.array([self.low_rad]), np.zeros(1)
        share = (np.arange(_AVERAGED) + 0.5) / _AVERAGED
        return self.low_rad + share * (self.high_rad - self.low_rad), np.zeros(_AVERAGED)

    def bins(self, side: int) -> tuple[Array, Array, Array]:
        """Incidence, azimuth and share of the time of the light from one side, in the order a horizon hides it.

        side: 1 for light from greater x, -1 for light from smaller x; lowest light first.
        """
        if self.kind == ROTATING:
            azimuth = 0.5 * np.pi * (np.arange(BINS) + 0.5) / BINS
            turned = azimuth if side > 0 else np.pi - azimuth
            return np.full(BINS, self.high_rad), turned, np.full(BINS, 0.5 / BINS)
        lowest, highest = (self.high_rad, max(self.low_rad, 0.0)) if side > 0 else (self.low_rad, min(self.high_rad, 0))
        if side * lowest <= 0.0:
            return np.zeros(BINS), np.zeros(BINS), np.zeros(BINS)
        whole = abs(self.high_rad - self.low_rad)
        incidence = lowest + (highest - lowest) * (np.arange(BINS) + 0.5) / BINS
        share = abs(highest - lowest) / whole / BINS if whole else 1.0 / BINS
        return incidence, np.zeros(BINS), np.full(BINS, share)

    def hidden_bins(self, horizon: Array, side: int) -> Array:
        """How many bins of a side (0..BINS, with fractions) a horizon of this slope (any shape) hides."""
        up = 1.0 / np.maximum(horizon, 1e-300)  # tangent of the greatest angle from upright that is still seen
        if self.kind == ROTATING:
            reach = self.steepest_tan
            share = np.arccos(1.0 / np.maximum(horizon * reach, 1.0)) / (0.5 * np.pi)
        else:
            # Seen from the left, the swing is mirrored: its lowest light has the least signed incidence.
            ends = (self.high_rad, self.low_rad) if side > 0 else (-self.low_rad, -self.high_rad)
            first, last = ends[0], max(ends[1], 0.0)
            if first <= 0.0:
                return np.zeros_like(up)
            seen = np.arctan(up)
            share = (first - seen) / (first - last) if first > last else np.where(seen < first, 1.0, 0.0)
        return BINS * np.clip(np.where(horizon > 0.0, share, 0.0), 0.0, 1.0)


@frozen
class SlopeTable:
    """The slope speeds of M materials in one step.

    speed (M, 2 INTERVALS + 1): vertical speed over 1+|p|, in nm/s, at q from -1 to 1; extremum (M, E): slopes at
    which the speed has a maximum or minimum, rising, inf beyond the last; extreme (M, E): the speeds there;
    hidden (2, M, BINS + 1, 2 HIDDEN_INTERVALS + 1): the share of a slope's speed that comes from the first bins
    of the light from the right (0) and the left (1); facet (M, n): Y(g) cos g over that of flat ground, for
    single directions; fastest_nm_per_s: the greatest |dH/dp|, at which news travels sideways.
    """

    light: Light
    speed: Array
    extremum: Array
    extreme: Array
    hidden: Array
    facet: Array
    fastest_nm_per_s: float

    def speed_at(self, material: Index | int, slope: Array) -> Array:
        """Vertical speed in nm/s of slopes (any shape), of one material or one each."""
        size = 1.0 + np.abs(slope)
        at = (slope / size + 1.0) * INTERVALS
        below = np.minimum(at.astype(np.intp), 2 * INTERVALS - 1)
        part = at - below
        rows = self.speed
        return np.asarray(((1.0 - part) * rows[material, below] + part * rows[material, below + 1]) * size)

    def scaled(self, factor: Array) -> SlopeTable:
        """The same with each material's speeds (M,) times a factor."""
        speed = self.speed * factor[:, None]
        return replace(
            self,
            speed=speed,
            extreme=self.extreme * factor[:, None],
            fastest_nm_per_s=_fastest(speed, _SLOPES),
        )

    @property
    def wall_nm_per_s(self) -> Array:
        """How fast an upright wall walks sideways (M, 2): one whose foot is to the left, and to the right."""
        return np.asarray(self.speed[:, [-1, 0]])


def slope_table(light: Light, shapes: Sequence[Shape | None], flat_nm_per_s: Array) -> SlopeTable:
    """Tables of materials with these shapes of the yield, whose flat ground falls at flat_nm_per_s (M,).

    None for a shape: a material that the ground at hand has not; it gets a row of zeros.
    """
    coarse = np.linspace(-1.0, 1.0, 2 * HIDDEN_INTERVALS + 1)
    count = len(shapes)
    speed = np.zeros((count, len(_Q)))
    hidden = np.zeros((2, count, BINS + 1, len(coarse)))
    facet = np.zeros((count, len(FacetSpeed.of(_NoShape()).value)))
    for m, shape in enumerate(shapes):
        if shape is None:
            continue
        own = FacetSpeed.of(shape)
        flat = float(_over_size_of(own, light, np.zeros(1))[0])
        speed[m] = float(flat_nm_per_s[m]) / flat * _over_size(own, light, _Q)
        hidden[:, m] = _hidden(own, light, coarse)
        facet[m] = own.value / flat
    extremum, extreme = _extrema(speed, _SLOPES, even=light.kind == ROTATING)
    return SlopeTable(light, speed, extremum, extreme, hidden, facet, _fastest(speed, _SLOPES))


class _NoShape:
    def ratio(self, incidence_rad: Array) -> Array:
        return np.zeros_like(incidence_rad)


def _over_size(own: FacetSpeed, light: Light, q: Array) -> Array:
    """Vertical speed over 1+|p|, with the flat's as unit of Y(0), at every q; even where the light is."""
    if light.kind == ROTATING:
        half = _over_size_of(own, light, q[INTERVALS:])
        return np.concatenate([half[:0:-1], half])
    return _over_size_of(own, light, q)


def _over_size_of(own: FacetSpeed, light: Light, q: Array) -> Array:
    incidence, azimuth = light.directions()
    return np.asarray(_speed_over_size(own, q, incidence[:, None], azimuth[:, None]).mean(axis=0))


def _speed_over_size(own: FacetSpeed, q: Array, incidence: Array, azimuth: Array) -> Array:
    """Y(g) cos g sqrt(1+p^2) / (1+|p|) of slopes under single directions (broadcast)."""
    away = 1.0 - np.abs(q)  # 1/(1+|p|)
    length = np.hypot(away, q)  # sqrt(1+p^2) / (1+|p|)
    cosine = (away * np.cos(incidence) - q * np.sin(incidence) * np.cos(azimuth)) / length
    return own.vertical(cosine, length)


def _hidden(own: FacetSpeed, light: Light, q: Array) -> Array:
    """(2, BINS + 1, Q): see SlopeTable.hidden."""
    found = np.zeros((2, BINS + 1, len(q)))
    if light.steepest_tan == 0.0:
        return found
    for k, side in enumerate((1, -1)):
        incidence, azimuth, share = light.bins(side)
        found[k, 1:] = np.cumsum(
            share[:, None] * _speed_over_size(own, q, incidence[:, None], azimuth[:, None]), axis=0
        )
    whole = found[0, -1] + found[1, -1]
    return np.asarray(found / np.maximum(whole, 1e-300))


def _extrema(speed: Array, slopes: Array, *, even: bool) -> tuple[Array, Array]:
    """Slopes and speeds of each material's inner extrema (M, E); a slope too many does no harm."""
    whole = speed[:, 1:-1] * (1.0 + np.abs(slopes[1:-1]))
    turns = _turns(whole)
    turns[:, INTERVALS - 1] = True  # level ground counts in any case
    if even:
        turns |= turns[:, ::-1]
    most = int(turns.sum(axis=1).max())
    extremum = np.full((len(speed), most), np.inf)
    extreme = np.zeros((len(speed), most))
    for m, row in enumerate(turns):
        at = np.flatnonzero(row)
        extremum[m, : len(at)] = slopes[1:-1][at]
        extreme[m, : len(at)] = whole[m, at]
    return extremum, extreme


def _turns(whole: Array) -> NDArray[np.bool_]:
    """Where rows (M, Q) turn from rising to falling or back, by more than the table's own noise."""
    step = np.diff(whole, axis=1)
    sign = np.where(np.abs(step) > _NOISE * whole[:, INTERVALS - 1, None], np.sign(step), 0.0)
    known = np.maximum.accumulate(np.where(sign != 0.0, np.arange(sign.shape[1]), 0), axis=1)
    carried = np.take_along_axis(sign, known, axis=1)
    turns = np.zeros(whole.shape, dtype=np.bool_)
    turns[:, 1:-1] = carried[:, :-1] * carried[:, 1:] < 0.0
    return turns


def _fastest(speed: Array, slopes: Array) -> float:
    """The greatest |dH/dp| of any material; finite on walls too."""
    inner = speed[:, 1:-1] * (1.0 + np.abs(slopes[1:-1]))
    return float(max(np.max(np.abs(np.diff(inner, axis=1) / np.diff(slopes[1:-1]))), np.max(speed[:, [0, -1]])))
