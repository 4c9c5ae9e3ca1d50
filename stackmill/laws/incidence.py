"""How the yield depends on incidence, and what a beam's divergence and a rocking stage do to a flat surface.

Incidence is the angle between beam and surface normal, in rad; 0 is straight down. Shapes are ratios
Y(incidence)/Y(0). All functions broadcast over arrays.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike

from stackmill.laws.checks import Array, finite, positive

SMALLEST_COSINE = 1e-9


def yamamura_angular(*, incidence_rad: ArrayLike, f: ArrayLike, theta_opt_rad: ArrayLike) -> Array:
    """Y(th)/Y(0) of Yamamura, Itikawa & Itoh 1983 [no unit].

    incidence_rad: th [rad], 0 to pi/2. f: exponent, about 1.5 to 3 for heavy ions. theta_opt_rad:
    incidence of greatest yield [rad].

        Y/Y0 = t^f exp(-Sigma (t - 1)),   t = 1/cos th,   Sigma = f cos(theta_opt)

    Range: heavy targets; for targets lighter than the ion it is several times too flat (C under Ar at 500 eV:
    3 where the computed table of Eckstein 1998 says 16). 0 at and beyond 90 degrees.
    Checked: against an independent evaluation (tests/published).
    Source: report IPPJ-AM-26 (1983); Yamamura, Radiat. Eff. 80, 57 (1984).
    """
    cosine = _cosine(incidence_rad)
    f = finite("f", f)
    sigma = f * np.cos(finite("theta_opt_rad", theta_opt_rad))
    return np.asarray(np.exp(-f * np.log(cosine) - sigma * (1.0 / cosine - 1.0)))


def yamamura_exponent(*, energy_ev: ArrayLike, eth_ev: ArrayLike, mass_ratio: ArrayLike) -> Array:
    """The exponent f of `yamamura_angular` for heavy ions [no unit].

    energy_ev, eth_ev: ion energy and threshold [eV]; mass_ratio: m2/m1, target over ion.

        f = fs (1 + 2.5 (1 - z)/z),   z = 1 - sqrt(Eth/E),   at most 10

    fs is a curve in the report; here the steps 1.75, 1.5, 1.25, 1.0, 0.8 (mass ratio below 2, 4, 6, 8, above)
    of a public transcription of Garcia-Rosales, Eckstein & Roth, J. Nucl. Mater. 218, 8 (1994).
    Range: E above Eth (10 is returned below). Source: as `yamamura_angular`.
    """
    ratio = positive("mass_ratio", mass_ratio)
    fs = np.select([ratio < 2, ratio < 4, ratio < 6, ratio < 8], [1.75, 1.5, 1.25, 1.0], default=0.8)
    z = np.clip(1.0 - np.sqrt(positive("eth_ev", eth_ev) / positive("energy_ev", energy_ev)), 1e-6, None)
    return np.asarray(np.minimum(fs * (1.0 + 2.5 * (1.0 - z) / z), 10.0))


def yamamura_optimum_rad(*, energy_ev: ArrayLike, z1: ArrayLike, z2: ArrayLike, atom_density_1e22: ArrayLike) -> Array:
    """Incidence of greatest yield of `yamamura_angular` for heavy ions [rad].

    energy_ev: E [eV]; z1, z2: atomic numbers; atom_density_1e22: n [1e22 atoms/cm3].

        th_opt = 90 - 286 psi^0.45 deg,   psi = (a/R0)^1.5 sqrt(z1 z2/(sqrt(L) E))
        a = 0.4685/sqrt(L) Angstrom,   R0 = n^(-1/3)

    Source: as `yamamura_angular`.
    """
    z1, z2 = positive("z1", z1), positive("z2", z2)
    L = z1 ** (2 / 3) + z2 ** (2 / 3)
    spacing_a = (positive("atom_density_1e22", atom_density_1e22) * 1e-2) ** (-1 / 3)
    psi = (0.4685 / np.sqrt(L) / spacing_a) ** 1.5 * np.sqrt(z1 * z2 / (np.sqrt(L) * positive("energy_ev", energy_ev)))
    return np.asarray(np.radians(90.0 - 286.0 * psi**0.45))


def eckstein_angular(*, incidence_rad: ArrayLike, f: ArrayLike, b: ArrayLike, c: ArrayLike) -> Array:
    """Y(th)/Y(0) of Eckstein & Preuss 2003 for noble-gas ions [no unit].

    incidence_rad: th [rad]. f, b, c: fitted constants of the pair at one energy, usually f 1 to 7,
    b 0.4 to 1.5, c 0.4 to 0.8.

        ln(Y/Y0) = -f ln C + b (1 - 1/C),   C = cos[(2 th/pi)^c pi/2]

    The paper bends the angle by the ion's surface binding, which is nil for noble gases.
    Range: 0 to 90 degrees; 0 at and beyond 90. b must be above 0, or the yield would not vanish there.
    Source: J. Nucl. Mater. 320, 209 (2003); form as in db-amdis.org/pwidb (SPTAEX).
    """
    theta = np.abs(finite("incidence_rad", incidence_rad))
    f, b, c = finite("f", f), positive("b", b), positive("c", c)
    bent = np.clip(2.0 * theta / np.pi, 0.0, 1.0) ** c
    cosine = np.maximum(np.cos(bent * (np.pi / 2.0)), SMALLEST_COSINE)
    return np.asarray(np.exp(-f * np.log(cosine) + b * (1.0 - 1.0 / cosine)))


@dataclass(frozen=True)
class AngularShape:
    """The shape Y(incidence)/Y(0) of one material under one gas, by `eckstein_angular`.

    f, b, c: arrays of one shape, an entry an energy.
    """

    f: Array
    b: Array
    c: Array

    def ratio(self, incidence_rad: ArrayLike) -> Array:
        """Y(incidence)/Y(0); incidence [rad] broadcasts against the shape of f."""
        return eckstein_angular(incidence_rad=incidence_rad, f=self.f, b=self.b, c=self.c)


NEAR_THRESHOLD = 0.85
MASS_RATIO_POWER = 0.714
# rows f, b, c; columns: A, B (times sqrt(Eth/E)), C, D (times sqrt(Eth/E)), see ep_constants
MASS_RULE = np.array(
    [
        [0.685, 1.769, 0.244, 2.105],
        [0.117, 1.844, 0.060, -0.153],
        [0.767, -0.068, -0.049, -0.074],
    ]
)


def ep_constants(*, mass_ratio: ArrayLike, eth_over_e: ArrayLike) -> AngularShape:
    """f, b, c of `eckstein_angular` for a target nobody tabulated: smooth in mass ratio and energy.

    mass_ratio: r = m1/m2, ion over target mass, 0.1 to 5 (held to that). eth_over_e: threshold over energy;
    its root s is held to 0.85, since below about 1.4 times the threshold there is next to no yield to shape.

        f, b, c = (A + B s) + (C + D s) r^0.714,   s = sqrt(Eth/E)

    Range: W to C under argon, 200 eV to 1 keV, where it comes back to 6 % and 13 % rms of ln(Y/Y0) over
    15 to 75 degrees; elsewhere it is an interpolation. Real roughness lowers the rise.
    Source: our own fit (tests/published/fit_angular.py) to the computed yields of Ar on W and C in
    W. Eckstein, IPP-Report 9/117 (1998), and to the recalled maxima of Cu, Au, Si, Al and Ti near 1 keV.
    """
    r = np.clip(positive("mass_ratio", mass_ratio), 0.1, 5.0) ** MASS_RATIO_POWER
    s = root_of_closeness(eth_over_e=eth_over_e)
    f, b, c = (row[0] + row[1] * s + (row[2] + row[3] * s) * r for row in MASS_RULE)
    return AngularShape(f=np.asarray(f), b=np.asarray(b), c=np.asarray(c))


def root_of_closeness(*, eth_over_e: ArrayLike) -> Array:
    """S = sqrt(Eth/E), held to 0.85: how close to threshold the beam is [no unit]."""
    return np.minimum(np.sqrt(positive("eth_over_e", eth_over_e)), NEAR_THRESHOLD)


@dataclass(frozen=True)
class IncidenceNodes:
    """The incidences a flat surface really sees, with weights.

    incidence_rad (n,): angles; weight (n,): share of the beam's current times the cosine, so that the milling
    rate is proportional to sum(weight x Y(incidence)). For a parallel beam on a still or rotating stage: one
    node of weight cos(incidence).
    """

    incidence_rad: Array
    weight: Array


def incidence_nodes(*, incidence_rad: float, divergence_rad: float = 0.0, rocking_rad: float = 0.0) -> IncidenceNodes:
    """Quadrature over a beam's divergence and a stage's rocking.

    incidence_rad: set incidence, 0 to pi/2. divergence_rad: half-angle that holds 63 % (1 - 1/e) of the
    current, so that the current per solid angle falls as exp(-(a/divergence)^2), 0 to 0.35 (20 degrees).
    rocking_rad: half-angle by which the incidence swings about the set one, uniformly in time.

        cos g = cos a cos th + sin a sin th cos p;    weight = <cos g>/<cos a>, zero beyond 90 degrees

    The division refers the current density to the plane normal to the beam, as it is measured.
    Gauss-Laguerre in a^2, midpoint in the azimuth p, Gauss-Legendre over the swing.
    Source: plain averaging, worked out here; checked against dense quadrature (tests/laws).
    """
    theta = float(finite("incidence_rad", incidence_rad))
    if not 0.0 <= theta <= np.pi / 2 + 1e-12:
        raise ValueError(f"incidence_rad must lie between 0 and pi/2, not {theta:g}")
    for name, value in (("divergence_rad", divergence_rad), ("rocking_rad", rocking_rad)):
        if not 0.0 <= float(finite(name, value)) <= np.pi / 2:
            raise ValueError(f"{name} must lie between 0 and pi/2, not {value:g}")
    swing, swing_share = _swing(theta, rocking_rad)
    off, turn, beam_share = _cone(divergence_rad)
    cosine = np.cos(off) * np.cos(swing)[:, None] + np.sin(off) * np.sin(swing)[:, None] * np.cos(turn)
    share = swing_share[:, None] * beam_share / np.sum(beam_share * np.cos(off))
    lit = cosine > 0.0
    return IncidenceNodes(incidence_rad=np.arccos(np.clip(cosine[lit], -1.0, 1.0)), weight=(share * cosine)[lit])


def _swing(theta: float, half_angle: float) -> tuple[Array, Array]:
    """Incidences of a rocking stage and the share of time spent at each."""
    if half_angle == 0.0:
        return np.array([theta]), np.array([1.0])
    node, weight = _legendre()
    return theta + half_angle * node, 0.5 * weight


def _cone(divergence: float) -> tuple[Array, Array, Array]:
    """Angles off the axis, azimuths and shares of the current of a diverging beam, flattened."""
    if divergence == 0.0:
        return np.array([0.0]), np.array([0.0]), np.array([1.0])
    node, weight = _laguerre()
    off = np.minimum(divergence * np.sqrt(node), np.pi / 2)
    turn = (np.arange(24) + 0.5) * (np.pi / 12.0)
    off_2d, turn_2d = np.broadcast_arrays(off[:, None], turn[None, :])
    share = np.repeat(weight / weight.sum() / turn.size, turn.size)
    return off_2d.ravel(), turn_2d.ravel(), share


@cache
def _legendre() -> tuple[Array, Array]:
    node, weight = np.polynomial.legendre.leggauss(24)
    return np.asarray(node), np.asarray(weight)


@cache
def _laguerre() -> tuple[Array, Array]:
    node, weight = np.polynomial.laguerre.laggauss(12)
    return np.asarray(node), np.asarray(weight)


def flat_average(
    shape: Callable[[Array], Array],
    *,
    incidence_rad: float,
    divergence_rad: float = 0.0,
    rocking_rad: float = 0.0,
) -> float:
    """Average of shape(incidence) x cos(incidence) over divergence and rocking, for a flat surface [no unit].

    shape: Y(incidence)/Y(0) of an array of incidences [rad]; the rest as in `incidence_nodes`.
    For a parallel, unrocked beam it is shape(th) cos(th).
    """
    nodes = incidence_nodes(incidence_rad=incidence_rad, divergence_rad=divergence_rad, rocking_rad=rocking_rad)
    return float(np.sum(nodes.weight * shape(nodes.incidence_rad)))


def _cosine(incidence_rad: ArrayLike) -> Array:
    """Cosine of the incidence, kept above zero so that 90 degrees gives a vanishing yield, not an error."""
    return np.maximum(np.cos(finite("incidence_rad", incidence_rad)), SMALLEST_COSINE)
