"""The Gaussian conditioning of the rate model, held against normal equations and a brute-force grid."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.materials.calibration import RateBelief, RateEvidence, condition


def prior(sd):
    return RateBelief(tuple(map(str, range(len(sd)))), np.zeros(len(sd)), np.diag(np.square(sd)))


@pytest.mark.independent
@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6), st.integers(1, 6), st.integers(1, 8))
def test_posterior_equals_the_normal_equations(seed, size, rows):
    random = np.random.default_rng(seed)
    sd = random.uniform(0.05, 0.6, size)
    design, y, noise = (
        random.normal(size=(rows, size)),
        random.normal(size=rows),
        random.uniform(0.02, 0.3, rows),
    )
    after = condition(
        prior(sd), [RateEvidence(d, float(r), float(n), "") for d, r, n in zip(design, y, noise, strict=True)]
    )
    information = np.diag(1 / sd**2) + design.T @ np.diag(1 / noise**2) @ design
    cov = np.linalg.inv(information)
    np.testing.assert_allclose(after.cov, cov, rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(after.mean, cov @ design.T @ (y / noise**2), rtol=1e-7, atol=1e-10)
    np.testing.assert_allclose(after.root() @ after.root().T, after.cov, atol=1e-12)


@pytest.mark.independent
def test_posterior_equals_a_brute_force_grid():
    sd, design, y, noise = np.array([0.3, 0.2]), np.array([1.0, 0.7]), 0.25, 0.05
    after = condition(prior(sd), [RateEvidence(design, y, noise, "")])
    a, b = np.meshgrid(np.linspace(-2, 2, 1601), np.linspace(-1.5, 1.5, 1601), indexing="ij")
    weight = np.exp(-0.5 * ((a / sd[0]) ** 2 + (b / sd[1]) ** 2 + ((y - a - 0.7 * b) / noise) ** 2))
    weight /= weight.sum()
    mean = np.array([(a * weight).sum(), (b * weight).sum()])
    cov01 = ((a - mean[0]) * (b - mean[1]) * weight).sum()
    np.testing.assert_allclose(after.mean, mean, atol=1e-6)
    assert after.cov[0, 1] == pytest.approx(cov01, rel=1e-4)
    assert after.sd[0] ** 2 == pytest.approx(((a - mean[0]) ** 2 * weight).sum(), rel=1e-4)


@pytest.mark.closed_form
def test_a_row_without_noise_fixes_its_combination_and_one_without_news_changes_nothing():
    after = condition(prior(np.array([0.3, 0.3])), [RateEvidence(np.array([1.0, 1.0]), 0.2, 0.0, "")])
    assert after.mean.sum() == pytest.approx(0.2)
    assert np.array([1, 1]) @ after.cov @ np.array([1, 1]) == pytest.approx(0.0, abs=1e-15)
    fixed = RateBelief(("x",), np.zeros(1), np.zeros((1, 1)))
    assert condition(fixed, [RateEvidence(np.array([1.0]), 5.0, 0.0, "")]).mean[0] == 0.0
