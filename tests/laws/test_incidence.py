"""Angular shapes and the averages over divergence and rocking."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.laws.incidence import (
    AngularShape,
    eckstein_angular,
    ep_constants,
    flat_average,
    incidence_nodes,
    yamamura_angular,
)

FINE = np.radians(np.arange(0.0, 90.01, 0.25))


def flat(angle):
    return np.ones_like(angle)


def steep(angle):
    return eckstein_angular(incidence_rad=angle, f=3.0, b=0.9, c=0.7)


@pytest.mark.closed_form
def test_shapes_are_one_straight_down_and_nil_at_grazing():
    for shape in (
        eckstein_angular(incidence_rad=[0.0, np.pi / 2], f=2.0, b=0.5, c=0.7),
        yamamura_angular(incidence_rad=[0.0, np.pi / 2], f=2.0, theta_opt_rad=1.1),
    ):
        assert shape == pytest.approx([1.0, 0.0], abs=1e-12)


@pytest.mark.closed_form
def test_with_c_of_one_both_forms_are_the_same():
    theta = np.radians([10.0, 40.0, 70.0, 85.0])
    f, best = 2.2, np.radians(66.0)
    one = eckstein_angular(incidence_rad=theta, f=f, b=f * np.cos(best), c=1.0)
    assert one == pytest.approx(yamamura_angular(incidence_rad=theta, f=f, theta_opt_rad=best), rel=1e-12)


@pytest.mark.closed_form
def test_the_maximum_lies_where_the_bent_cosine_is_b_over_f():
    f, b, c = 2.5, 0.6, 0.7
    best = (np.arccos(b / f) * 2 / np.pi) ** (1 / c) * np.pi / 2
    around = eckstein_angular(incidence_rad=best + np.array([-0.01, 0.0, 0.01]), f=f, b=b, c=c)
    assert around[1] > around[0]
    assert around[1] > around[2]


@settings(deadline=None, derandomize=True, max_examples=150)
@given(
    mass_ratio=st.floats(39.948 / 208.0, 39.948 / 9.0),
    energy=st.floats(100.0, 10000.0),
    threshold=st.floats(10.0, 70.0),
)
def test_the_rule_is_bounded_with_one_maximum_from_be_to_pb(mass_ratio, energy, threshold):
    shape = ep_constants(mass_ratio=mass_ratio, eth_over_e=threshold / energy)
    assert shape.f > 0.0
    assert shape.b > 0.0
    assert 0.3 < shape.c < 1.0
    ratio = shape.ratio(FINE)
    assert np.all(np.isfinite(ratio))
    assert ratio[-1] == 0.0
    assert ratio.max() < 2000.0
    if energy > 5.0 * threshold:
        assert 45.0 < np.degrees(FINE[ratio.argmax()]) < 78.0
        assert 1.2 < ratio.max() < 100.0
    turns = np.diff(np.sign(np.diff(ratio[ratio > 1e-9])))
    assert np.count_nonzero(turns) <= 1


@settings(deadline=None, derandomize=True, max_examples=60)
@given(mass_ratio=st.floats(0.2, 4.0), energy=st.floats(150.0, 9000.0))
def test_the_rule_is_smooth(mass_ratio, energy):
    here, there = (
        ep_constants(mass_ratio=mass_ratio * k, eth_over_e=30.0 / (energy * k)).ratio(FINE[:-40]) for k in (1.0, 1.01)
    )
    assert np.abs(np.log(there / here)).max() < 0.05


@pytest.mark.closed_form
def test_next_to_threshold_the_shape_is_held():
    held = ep_constants(mass_ratio=2.0, eth_over_e=0.85**2)
    assert ep_constants(mass_ratio=2.0, eth_over_e=[0.9, 1.5]).f == pytest.approx([float(held.f)] * 2)
    assert ep_constants(mass_ratio=2.0, eth_over_e=0.7).f < held.f


def test_lighter_targets_rise_more():
    rises = [float(ep_constants(mass_ratio=r, eth_over_e=0.03).ratio(FINE).max()) for r in (0.2, 0.6, 1.5, 3.3)]
    assert rises == sorted(rises)


@pytest.mark.closed_form
def test_a_parallel_beam_sees_one_angle():
    nodes = incidence_nodes(incidence_rad=1.0)
    assert nodes.incidence_rad == pytest.approx([1.0])
    assert nodes.weight == pytest.approx([np.cos(1.0)])
    assert flat_average(steep, incidence_rad=1.0) == pytest.approx(float(steep(1.0)) * np.cos(1.0))


@pytest.mark.closed_form
@pytest.mark.parametrize("degrees", [0.0, 30.0, 60.0])
@pytest.mark.parametrize("divergence", [2.0, 5.0])
def test_divergence_leaves_the_flux_of_a_constant_yield_alone(degrees, divergence):
    """Current is measured in the plane normal to the beam, so <cos g>/<cos a> = cos th while all is lit."""
    found = flat_average(flat, incidence_rad=np.radians(degrees), divergence_rad=np.radians(divergence))
    assert found == pytest.approx(np.cos(np.radians(degrees)), rel=2e-4)


@pytest.mark.closed_form
def test_rocking_of_a_constant_yield_is_the_mean_cosine():
    theta, swing = np.radians(40.0), np.radians(20.0)
    found = flat_average(flat, incidence_rad=theta, rocking_rad=swing)
    assert found == pytest.approx(np.cos(theta) * np.sin(swing) / swing, rel=1e-12)


@pytest.mark.independent
@pytest.mark.parametrize(("degrees", "divergence"), [(0.0, 6.0), (45.0, 3.0), (60.0, 8.0), (75.0, 2.0)])
def test_divergence_against_a_dense_sum_over_the_cone(degrees, divergence):
    theta, half = np.radians(degrees), np.radians(divergence)
    off = (np.arange(4000) + 0.5) / 4000 * min(6.0 * half, np.pi / 2)
    turn = (np.arange(360) + 0.5) / 360 * 2 * np.pi
    weight = (off * np.exp(-((off / half) ** 2)))[:, None] * np.ones(turn.size)
    cosine = np.cos(off)[:, None] * np.cos(theta) + np.sin(off)[:, None] * np.sin(theta) * np.cos(turn)
    lit = np.where(cosine > 0.0, cosine, 0.0)
    dense = np.sum(weight * lit * steep(np.arccos(np.clip(cosine, -1, 1)))) / np.sum(weight * np.cos(off)[:, None])
    assert flat_average(steep, incidence_rad=theta, divergence_rad=half) == pytest.approx(float(dense), rel=2e-3)


@pytest.mark.independent
def test_63_percent_of_the_current_lies_within_the_half_angle():
    nodes = incidence_nodes(incidence_rad=0.0, divergence_rad=0.05)
    # straight down the incidence is the angle off the axis; its mean square is the half-angle's square
    share = nodes.weight / np.cos(nodes.incidence_rad)
    assert np.sum(share * nodes.incidence_rad**2) / np.sum(share) == pytest.approx(0.05**2, rel=1e-6)


@pytest.mark.independent
def test_rocking_against_a_dense_sum_over_the_swing():
    theta, swing = np.radians(50.0), np.radians(25.0)
    angles = theta + swing * ((np.arange(100000) + 0.5) / 50000 - 1.0)
    dense = np.mean(steep(angles) * np.cos(angles))
    assert flat_average(steep, incidence_rad=theta, rocking_rad=swing) == pytest.approx(dense, rel=1e-6)


def test_a_swing_past_grazing_is_dark_there():
    nodes = incidence_nodes(incidence_rad=np.radians(80.0), rocking_rad=np.radians(20.0))
    assert nodes.incidence_rad.max() < np.pi / 2
    assert nodes.incidence_rad.size < 24


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"incidence_rad": 2.0}, "incidence_rad must lie between 0 and pi/2, not 2"),
        ({"incidence_rad": 0.1, "divergence_rad": -0.1}, "divergence_rad must lie between 0 and pi/2"),
        ({"incidence_rad": 0.1, "rocking_rad": 3.0}, "rocking_rad must lie between 0 and pi/2, not 3"),
        ({"incidence_rad": np.nan}, "incidence_rad holds a value that is not a finite number"),
    ],
)
def test_impossible_angles_are_refused(arguments, words):
    with pytest.raises(ValueError, match=words):
        incidence_nodes(**arguments)


def test_a_shape_that_would_not_vanish_is_refused():
    with pytest.raises(ValueError, match="b must be above zero"):
        eckstein_angular(incidence_rad=0.5, f=2.0, b=-0.1, c=0.7)


@pytest.mark.closed_form
def test_a_shape_broadcasts_over_energies():
    shape = AngularShape(f=np.array([2.0, 3.0]), b=np.array([0.5, 0.8]), c=np.array([0.7, 0.6]))
    table = shape.ratio(FINE[:, None])
    assert table.shape == (FINE.size, 2)
    assert table[:, 1] == pytest.approx(eckstein_angular(incidence_rad=FINE, f=3.0, b=0.8, c=0.6))
