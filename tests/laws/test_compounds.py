"""Effective targets and the steady state of a mixed surface."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.laws.compounds import component_steady_state, effective_target, tie_of_unmeasured

ONE = {"z": [29], "m_u": [63.546], "us_ev": [3.49], "q": [1.0], "w_ev": [0.73], "s": [2.5]}
TWO = {
    "z": [14, 8],
    "m_u": [28.0, 16.0],
    "us_ev": [4.6, 2.6],
    "q": [0.6, 1.0],
    "w_ev": [2.0, 1.0],
    "s": [2.5, 2.5],
}


@pytest.mark.closed_form
def test_a_pure_element_is_itself():
    target = effective_target(share=[3.0], **ONE, formation_ev_per_atom=0.0)
    assert (target.z2, target.m2_u, target.us_ev, target.q) == (29.0, 63.546, 3.49, 1.0)


@pytest.mark.closed_form
def test_means_are_weighted_by_atoms_and_the_heat_is_added():
    target = effective_target(share=[1, 2], **TWO, formation_ev_per_atom=3.0)
    assert target.z2 == pytest.approx((14 + 2 * 8) / 3)
    assert target.m2_u == pytest.approx(20.0)
    assert target.us_ev == pytest.approx((4.6 + 2 * 2.6) / 3 + 3.0)
    assert target.q == pytest.approx((0.6 + 2 * 1.0) / 3)
    assert target.w_ev == pytest.approx((2.0 + 2 * 1.0) / 3)


@pytest.mark.closed_form
def test_the_scale_of_the_shares_does_not_matter():
    small, large = (effective_target(share=[k, 2 * k], **TWO, formation_ev_per_atom=1.0) for k in (1.0, 33.3))
    assert small.us_ev == pytest.approx(large.us_ev, rel=1e-12)


def test_a_heat_that_undoes_the_binding_is_refused():
    with pytest.raises(ValueError, match="binding energy comes out as"):
        effective_target(share=[1.0], **ONE, formation_ev_per_atom=-4.0)


@pytest.mark.closed_form
def test_atoms_leave_in_the_proportion_of_the_bulk():
    c, Y = np.array([0.2, 0.3, 0.5]), np.array([0.5, 2.0, 1.0])
    state = component_steady_state(share=c, component_yield=Y)
    leaving = state.surface_share * Y
    assert state.surface_share.sum() == pytest.approx(1.0)
    assert leaving / leaving.sum() == pytest.approx(c, rel=1e-12)
    assert leaving.sum() == pytest.approx(state.total_yield, rel=1e-12)
    assert state.total_yield == pytest.approx(1.0 / (0.2 / 0.5 + 0.3 / 2.0 + 0.5 / 1.0))


@pytest.mark.independent
def test_the_steady_state_is_where_an_altered_layer_settles():
    """Removing and feeding a thin layer step by step ends in the same surface."""
    c, Y = np.array([0.7, 0.3]), np.array([0.4, 1.6])
    layer = c.copy()
    for _ in range(20000):
        out = layer * Y * 1e-3
        layer = layer - out + out.sum() * c
    assert component_steady_state(share=c, component_yield=Y).surface_share == pytest.approx(layer, rel=1e-6)


def test_unlike_lengths_are_refused():
    with pytest.raises(ValueError, match="one value an element"):
        component_steady_state(share=[1.0, 1.0], component_yield=[1.0])


def test_the_rule_lifts_light_compounds_and_is_held_to_its_span():
    light, own, heavy = tie_of_unmeasured(mean_mass_u=[20.0, 39.948, 100.0])
    assert light > own > 1.0 > heavy
    assert tie_of_unmeasured(mean_mass_u=300.0) == tie_of_unmeasured(mean_mass_u=120.0)
