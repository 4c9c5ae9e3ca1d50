"""Sputtering yield at normal incidence: atoms leaving per arriving ion.

Symbols follow the papers: 1 is the ion, 2 the target; mu = m2/m1; gamma = 4 m1 m2/(m1 + m2)^2 is the largest
share of its energy an ion can pass on in one collision; L = z1^(2/3) + z2^(2/3). Energies in eV, masses in u.
All functions broadcast over arrays and return arrays (0-d for scalars).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from stackmill.constants import BOHR_RADIUS_A, COULOMB_EV_A
from stackmill.laws.checks import Array, finite, positive, warn_outside

YT_CITATION = "Yamamura & Tawara, At. Data Nucl. Data Tables 62, 149 (1996), with erratum 63, 353 (1996)"
EP_CITATION = "Eckstein & Preuss, J. Nucl. Mater. 320, 209 (2003); Eckstein, Topics Appl. Phys. 110 (2007)"
YT_RANGE_EV = (50.0, 1e5)
EP_RANGE_EV = (50.0, 1e5)


def yamamura_tawara(
    *,
    energy_ev: ArrayLike,
    z1: ArrayLike,
    m1_u: ArrayLike,
    z2: ArrayLike,
    m2_u: ArrayLike,
    us_ev: ArrayLike,
    q: ArrayLike,
    w_ev: ArrayLike,
    s: ArrayLike,
) -> Array:
    """Yield of an element at normal incidence, Yamamura & Tawara 1996 [atoms/ion].

    energy_ev: ion energy E [eV], usually 100 to 10000. z1, m1_u: the ion's atomic number and mass [u].
    z2, m2_u: those of the target (z2 may be a mean). us_ev: surface binding energy Us [eV], about 2 to 9.
    q, w_ev, s: Q, W [eV] and s of the target; for targets they do not list the authors advise Q = 1,
    W = 0.35 Us, s = 2.5.

        Y = 0.042 Q a*/Us  Sn / (1 + Gamma ke eps^0.3)  (1 - sqrt(Eth/E))^s,   0 for E <= Eth
        Sn = 84.78 z1 z2/sqrt(L)  m1/(m1 + m2)  sn(eps)          [eV Angstrom^2]
        eps = 0.03255/(z1 z2 sqrt(L))  m2/(m1 + m2)  E,   Gamma = W/(1 + (m1/7)^3)

    Range: 50 eV to 100 keV (from memory); outside it computes and warns once. Below about 200 eV the law is
    poor (measured yields scatter about it by a factor 1.4 at 100 eV: docs/accuracy.md).
    Differs from the paper: its 8.478 in Sn is 84.78 here, as its erratum says for these units.
    Checked: against an independent evaluation (tests/published), all digits given.
    Source: At. Data Nucl. Data Tables 62, 149 (1996); erratum 63, 353 (1996).
    """
    E = positive("energy_ev", energy_ev)
    z1, m1 = positive("z1", z1), positive("m1_u", m1_u)
    z2, m2 = positive("z2", z2), positive("m2_u", m2_u)
    Us, Q, W, s = positive("us_ev", us_ev), positive("q", q), finite("w_ev", w_ev), positive("s", s)
    warn_outside("Yamamura-Tawara yield", E, name="energy_ev", allowed=YT_RANGE_EV, source=YT_CITATION)
    L = z1 ** (2 / 3) + z2 ** (2 / 3)
    eps = 0.03255 / (z1 * z2 * np.sqrt(L)) * m2 / (m1 + m2) * E
    Sn = 84.78 * z1 * z2 / np.sqrt(L) * m1 / (m1 + m2) * thomas_fermi_stopping(eps=eps)
    ke = 0.079 * (m1 + m2) ** 1.5 / (m1**1.5 * np.sqrt(m2)) * z1 ** (2 / 3) * np.sqrt(z2) / L**0.75
    electronic = 1.0 + W / (1.0 + (m1 / 7.0) ** 3) * ke * eps**0.3
    Eth = threshold_yamamura_tawara(m1_u=m1, m2_u=m2, us_ev=Us)
    onset = np.clip(1.0 - np.sqrt(Eth / E), 0.0, None) ** s
    return np.asarray(0.042 * Q * _alpha(m2 / m1) / Us * Sn / electronic * onset)


def thomas_fermi_stopping(*, eps: ArrayLike) -> Array:
    """Reduced nuclear stopping sn(eps) of the Thomas-Fermi potential, as Yamamura & Tawara 1996 fit it.

    eps: reduced energy, no unit, above 0. Source: as `yamamura_tawara`.
    """
    e = positive("eps", eps)
    root = np.sqrt(e)
    return np.asarray(3.441 * root * np.log(e + 2.718) / (1.0 + 6.355 * root + e * (6.882 * root - 1.708)))


def _alpha(mu: Array) -> Array:
    """Share of the deposited energy that reaches the surface, alpha*(mu); both branches meet at mu = 1."""
    heavy_target = 0.249 * mu**0.56 + 0.0035 * mu**1.5
    light_target = 0.0875 * mu**-0.15 + 0.165 * mu
    return np.where(mu >= 1.0, heavy_target, light_target)


def threshold_yamamura_tawara(*, m1_u: ArrayLike, m2_u: ArrayLike, us_ev: ArrayLike) -> Array:
    """Threshold energy Eth [eV] of Yamamura & Tawara 1996.

        Eth/Us = (1 + 5.7/mu)/gamma  for m1 <= m2,   6.7/gamma  for m1 >= m2

    m1_u, m2_u: masses of ion and target [u]; us_ev: surface binding energy [eV].
    Source: as `yamamura_tawara`.
    """
    m1, m2, Us = positive("m1_u", m1_u), positive("m2_u", m2_u), positive("us_ev", us_ev)
    mu = m2 / m1
    gamma = 4.0 * m1 * m2 / (m1 + m2) ** 2
    return np.asarray(Us * np.where(mu >= 1.0, 1.0 + 5.7 / mu, 6.7) / gamma)


def eckstein_preuss(
    *,
    energy_ev: ArrayLike,
    z1: ArrayLike,
    m1_u: ArrayLike,
    z2: ArrayLike,
    m2_u: ArrayLike,
    lam: ArrayLike,
    q: ArrayLike,
    mu: ArrayLike,
    eth_ev: ArrayLike,
) -> Array:
    """Yield of one ion-target pair at normal incidence, Eckstein & Preuss 2003 [atoms/ion].

    energy_ev: ion energy E [eV]. z1, m1_u, z2, m2_u: atomic numbers and masses [u]. lam, q, mu: the pair's
    fitted lambda, q and mu (no unit; mu here is an exponent, not a mass ratio). eth_ev: its threshold [eV].

        Y = q sKrC(eps) x/(lambda/w + x),   x = (E/Eth - 1)^mu,   0 for E <= Eth
        sKrC = 0.5 ln(1 + 1.2288 eps)/w,   w = eps + 0.1728 sqrt(eps) + 0.008 eps^0.1504

    Range: 50 eV to 100 keV (from memory; held against the published tables from 145 eV to 10 keV); outside it
    computes and warns once.
    Differs from the 2007 chapter: its eq. (2) prints a bare lambda, which misses the tables by up to a
    factor 35 near threshold; lambda/w brings them back to 4 digits.
    Checked: against the tabulated yields of Ar on W and Ta (tests/published), 4 digits.
    Source: J. Nucl. Mater. 320, 209 (2003); data base of the IAEA, db-amdis.org/pwidb, sets 304, 443, 455.
    """
    E, Eth = positive("energy_ev", energy_ev), positive("eth_ev", eth_ev)
    z1, m1 = positive("z1", z1), positive("m1_u", m1_u)
    z2, m2 = positive("z2", z2), positive("m2_u", m2_u)
    lam, q, mu = positive("lam", lam), positive("q", q), positive("mu", mu)
    warn_outside("Eckstein-Preuss yield", E, name="energy_ev", allowed=EP_RANGE_EV, source=EP_CITATION)
    L = z1 ** (2 / 3) + z2 ** (2 / 3)
    screening = (9.0 * np.pi**2 / 128.0) ** (1 / 3) * BOHR_RADIUS_A / np.sqrt(L)
    eps = E * m2 / (m1 + m2) * screening / (z1 * z2 * COULOMB_EV_A)
    w = eps + 0.1728 * np.sqrt(eps) + 0.008 * eps**0.1504
    stopping = 0.5 * np.log1p(1.2288 * eps) / w
    x = np.clip(E / Eth - 1.0, 0.0, None) ** mu
    return np.asarray(q * stopping * x / (lam / w + x))


def threshold_eckstein_preuss(*, eth_ev: ArrayLike) -> Array:
    """Threshold energy [eV] of Eckstein & Preuss 2003: one of the pair's fitted constants."""
    return positive("eth_ev", eth_ev)


@dataclass(frozen=True)
class YieldLaw:
    """One law of the yield at normal incidence, with all that a caller must know to use it.

    function: called with energy_ev, z1, m1_u and every name in `needs`; threshold: called with those of
    m1_u and the constants that `threshold_needs` names. gases: the beam species it holds for.
    """

    name: str
    function: Callable[..., Array]
    needs: tuple[str, ...]
    threshold: Callable[..., Array]
    threshold_needs: tuple[str, ...]
    gases: tuple[str, ...]
    range_ev: tuple[float, float]
    citation: str
    checked: str


LAWS: Mapping[str, YieldLaw] = MappingProxyType(
    {
        law.name: law
        for law in (
            YieldLaw(
                name="yamamura_tawara",
                function=yamamura_tawara,
                needs=("z2", "m2_u", "us_ev", "q", "w_ev", "s"),
                threshold=threshold_yamamura_tawara,
                threshold_needs=("m1_u", "m2_u", "us_ev"),
                gases=("neon", "argon", "krypton", "xenon"),
                range_ev=YT_RANGE_EV,
                citation=YT_CITATION,
                checked="independent evaluation, 7 elements, 500 eV to 5 keV",
            ),
            YieldLaw(
                name="eckstein_preuss",
                function=eckstein_preuss,
                needs=("z2", "m2_u", "lam", "q", "mu", "eth_ev"),
                threshold=threshold_eckstein_preuss,
                threshold_needs=("eth_ev",),
                gases=("argon",),
                range_ev=EP_RANGE_EV,
                citation=EP_CITATION,
                checked="published tables of Ar on W and Ta, 145 eV to 10 keV, 4 digits",
            ),
        )
    }
)
