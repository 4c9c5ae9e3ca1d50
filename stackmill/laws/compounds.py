"""Compounds: one effective target for the yield laws, and the steady state of a mixed surface."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from stackmill.laws.checks import Array, finite, positive


@dataclass(frozen=True)
class EffectiveTarget:
    """A compound seen as one element: what `yamamura_tawara` needs, as plain floats.

    z2: mean atomic number; m2_u: mean mass [u]; us_ev: binding energy per atom [eV]; q, w_ev [eV], s:
    means of the elements' constants.
    """

    z2: float
    m2_u: float
    us_ev: float
    q: float
    w_ev: float
    s: float


def effective_target(
    *,
    share: ArrayLike,
    z: ArrayLike,
    m_u: ArrayLike,
    us_ev: ArrayLike,
    q: ArrayLike,
    w_ev: ArrayLike,
    s: ArrayLike,
    formation_ev_per_atom: float,
) -> EffectiveTarget:
    """The effective target of a compound, for the elemental yield law.

    share (n,): atoms of each element, any scale. z, m_u [u], us_ev [eV], q, w_ev [eV], s (n,): the elements'
    values. formation_ev_per_atom: heat given off when the compound forms from its elements [eV per atom],
    usually 0.3 to 3.5, positive for a bound compound.

        Us = sum c_i Us_i + |dHf| per atom;   Z, M, Q, W, s = sums of c_i times the elements' values

    Range: not stated. Meant for one overall factor per compound on top; without one, compounds of light atoms
    come out too low by about a factor two under argon (docs/physics/compounds.md).
    Source: the rule is worked out from the abstract of Seah & Nunney, J. Phys. D 43, 253001 (2010), which
    interpolates the elements' parameters and adds the heat of the oxidation reaction to the binding energy;
    the paper's own pair-bond model is not reproduced.
    """
    c = _normalised(share)
    mean = {
        name: float(np.dot(c, positive(name, value)))
        for name, value in (("z", z), ("m_u", m_u), ("us_ev", us_ev), ("q", q), ("w_ev", w_ev), ("s", s))
    }
    bound = mean["us_ev"] + float(finite("formation_ev_per_atom", formation_ev_per_atom))
    if bound <= 0.0:
        raise ValueError(
            f"the binding energy comes out as {bound:g} eV per atom; formation_ev_per_atom must not undo it"
        )
    return EffectiveTarget(z2=mean["z"], m2_u=mean["m_u"], us_ev=bound, q=mean["q"], w_ev=mean["w_ev"], s=mean["s"])


@dataclass(frozen=True)
class SteadyState:
    """A compound's surface once an altered layer has formed.

    surface_share (n,): share of each element on the surface; total_yield: atoms leaving per ion.
    """

    surface_share: Array
    total_yield: float


def component_steady_state(*, share: ArrayLike, component_yield: ArrayLike) -> SteadyState:
    """Surface and yield of a compound whose atoms leave in the proportion of its bulk.

    share (n,): atoms of each element in the bulk, any scale. component_yield (n,): yield of element i from a
    surface of nothing but i, bound as in the compound [atoms/ion], above 0.

        cs_i = (c_i/Y_i)/sum_j(c_j/Y_j),    Y = 1/sum_i(c_i/Y_i)

    Range: after about one ion range has been removed; nothing is said of the first few nanometres.
    Source: mass balance; reviewed by Betz & Wehner, Topics Appl. Phys. 52 (1983), from memory.
    """
    c, Y = _normalised(share), positive("component_yield", component_yield)
    if c.shape != Y.shape:
        raise ValueError(f"share and component_yield must have one value an element, not {c.shape} and {Y.shape}")
    weight = c / Y
    return SteadyState(surface_share=weight / weight.sum(), total_yield=float(1.0 / weight.sum()))


LIGHT_COMPOUND_LN_FACTOR = 0.30
LIGHT_COMPOUND_SLOPE = -0.70


def tie_of_unmeasured(*, mean_mass_u: ArrayLike, ion_mass_u: float = 39.948) -> Array:
    """Factor on `effective_target` yields for a compound that nobody measured [no unit].

        ln factor = a + b ln(mean atomic mass / ion mass)

    mean_mass_u: mean atomic mass [u], held to 8..120, the span of the compounds behind it.
    Source: least squares over the measured compounds listed in docs/physics/compounds.md; its scatter is why
    the sd of an estimate is a factor 1.5. tests/published/fit_compounds.py repeats the fit.
    """
    ratio = np.clip(positive("mean_mass_u", mean_mass_u), 8.0, 120.0) / ion_mass_u
    return np.asarray(np.exp(LIGHT_COMPOUND_LN_FACTOR + LIGHT_COMPOUND_SLOPE * np.log(ratio)))


def _normalised(share: ArrayLike) -> Array:
    c = positive("share", share)
    return np.asarray(c / c.sum())
