"""What is on disk equals what the fit scripts write."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.laws import compounds, incidence
from tests.published import fit_angular, fit_compounds, fit_yields, write_accuracy
from tests.published.blocks import entry_path, replaced


@pytest.mark.regression
@pytest.mark.parametrize("texts", [fit_yields.all_texts, fit_compounds.all_texts])
def test_entries(texts):
    for name, text in texts().items():
        assert entry_path(name).read_text(encoding="utf-8") == text, f"{name}: run the fit script again"


@pytest.mark.regression
def test_own_angular_constants():
    for name, text in fit_angular.new_texts().items():
        kept = entry_path(name).read_text(encoding="utf-8")
        assert sorted(kept.split("\n")) == sorted(text.split("\n")), f"{name}: run fit_angular again"


@pytest.mark.regression
def test_mass_rule_coefficients():
    found = fit_angular.fit_rule()
    assert np.reshape(found[:12], (3, 4)) == pytest.approx(incidence.MASS_RULE, abs=2e-3)
    assert found[12] == pytest.approx(incidence.MASS_RATIO_POWER, abs=2e-3)


@pytest.mark.published
def test_compound_rule_and_the_factor_its_scatter_allows():
    rule = fit_compounds.rule()
    assert rule.offset == pytest.approx(compounds.LIGHT_COMPOUND_LN_FACTOR, abs=0.01)
    assert rule.slope == pytest.approx(compounds.LIGHT_COMPOUND_SLOPE, abs=0.01)
    # the sd told for an estimate must not be smaller than what the measured compounds scatter by
    assert 0.25 < rule.scatter < fit_compounds.ESTIMATE_LN_SD


@pytest.mark.closed_form
def test_replacing_a_block_leaves_the_rest():
    text = "a: 1\nfit:\n  x: 1\n  rows:\n    - {y: 2}\nb: 2\n"
    assert replaced(text, "fit", "fit:\n  x: 3\n") == "a: 1\nfit:\n  x: 3\nb: 2\n"
    assert replaced("a: 1\n", "fit", "fit: {}\n") == "a: 1\nfit: {}\n"


@pytest.mark.regression
def test_the_accuracy_page_is_fresh():
    assert write_accuracy.PAGE.read_text(encoding="utf-8") == write_accuracy.page()
