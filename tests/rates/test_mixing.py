"""The rule of mixtures by itself."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.laws.compounds import component_steady_state
from stackmill.rates.mixing import mixed_rate, time_shares

SHARE = np.array([0.2, 0.5, 0.3])
RATE = np.array([[10.0, 20.0], [40.0, 5.0], [25.0, 25.0]])


@pytest.mark.closed_form
def test_a_mixture_mills_at_the_harmonic_mean():
    assert mixed_rate(share=SHARE, rate=RATE)[0] == pytest.approx(1.0 / (0.02 + 0.0125 + 0.012), rel=1e-12)
    assert mixed_rate(share=[0.5, 0.5], rate=[30.0, 30.0]) == pytest.approx(30.0)


@pytest.mark.closed_form
def test_one_part_that_stays_stops_the_whole():
    assert mixed_rate(share=[0.9, 0.1], rate=[50.0, 0.0]) == pytest.approx(0.0, abs=1e-12)


@pytest.mark.independent
def test_time_shares_are_how_the_rate_moves_with_each_part():
    found = time_shares(share=SHARE, rate=RATE)
    assert found.sum(axis=0) == pytest.approx([1.0, 1.0])
    for k in range(3):
        up, down = (RATE * np.exp(np.where(np.arange(3) == k, h, 0.0))[:, None] for h in (1e-5, -1e-5))
        slope = np.log(mixed_rate(share=SHARE, rate=up) / mixed_rate(share=SHARE, rate=down)) / 2e-5
        assert found[k] == pytest.approx(slope, rel=1e-6)


@pytest.mark.independent
def test_it_is_the_steady_state_of_parts_of_equal_atom_density():
    state = component_steady_state(share=SHARE, component_yield=RATE[:, 0])
    assert float(mixed_rate(share=SHARE, rate=RATE[:, 0])) == pytest.approx(state.total_yield, rel=1e-12)
    assert time_shares(share=SHARE, rate=RATE[:, 0]) == pytest.approx(state.surface_share, rel=1e-12)
