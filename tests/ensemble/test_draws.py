"""Standard normal draws."""

from __future__ import annotations

from statistics import NormalDist

import numpy as np
import pytest

from stackmill.ensemble.draws import latin_hypercube, normal_quantile


@pytest.mark.independent
def test_normal_quantile_equals_the_standard_library():
    shares = np.concatenate([np.logspace(-300, -1, 400), np.linspace(0.001, 0.999, 999), 1 - np.logspace(-15, -1, 100)])
    want = [NormalDist().inv_cdf(float(p)) for p in shares]
    np.testing.assert_allclose(normal_quantile(shares), want, rtol=1e-13, atol=1e-15)


@pytest.mark.closed_form
def test_each_row_has_every_stratum_once_and_rows_are_unrelated():
    z = latin_hypercube(["a", "b", "c"], 1000, 7)
    for row in z:
        np.testing.assert_array_equal(np.sort(row), normal_quantile((np.arange(1000) + 0.5) / 1000))
        assert row.mean() == pytest.approx(0.0, abs=1e-12)
        assert row.std() == pytest.approx(1.0, abs=2e-3)
    assert np.abs(np.corrcoef(z) - np.eye(3)).max() < 0.1


@pytest.mark.regression
def test_a_new_input_leaves_the_draws_of_the_others_alone():
    few = latin_hypercube(["a", "c"], 64, 7)
    many = latin_hypercube(["a", "b", "c"], 64, 7)
    np.testing.assert_array_equal(few, many[[0, 2]])
    assert (latin_hypercube(["a"], 64, 8) != few[0]).any()
