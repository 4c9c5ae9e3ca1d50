"""The elements' ties against the rows they have not seen: data/yields_ar.csv, sources in each row."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from stackmill.materials.library import Library
from stackmill.rates.yields import ln_yield_sd, normal_yield
from tests.published.fit_yields import LEAST_LN_SD, Evidence, evidence, leave_one_out, tie

ACCURACY = Path(__file__).parents[2] / "docs" / "accuracy.md"


@pytest.fixture(scope="module")
def known() -> Evidence:
    return evidence(Library.load())


@pytest.fixture(scope="module")
def left_out(known):
    return leave_one_out(known.data, known.scatter, known.growth)


@pytest.mark.published
def test_between_90_and_99_percent_of_rows_lie_inside_their_interval(left_out):
    assert len(left_out) > 90
    assert 0.90 <= np.mean([item.inside for item in left_out]) <= 0.99


@pytest.mark.published
def test_the_median_sd_is_at_most_20_percent(left_out):
    assert np.median([item.sd for item in left_out]) <= 0.20


@pytest.mark.published
def test_the_stated_sds_are_of_the_size_of_the_misses(left_out):
    # one when the sds are honest; rows of one laboratory agree a little better than that
    z = np.array([item.miss / item.sd for item in left_out])
    assert 0.6 < np.std(z) < 1.2


@pytest.mark.published
def test_rows_outside_are_named_in_the_accuracy_page(left_out):
    page = ACCURACY.read_text(encoding="utf-8")
    outside = [item.row for item in left_out if not item.inside]
    assert outside
    for row in outside:
        assert f"| {row.element} | {row.energy_ev:g} |" in page.split("## Rows outside")[1]


@pytest.mark.published
def test_100_ev_rows_lie_within_the_sd_that_grows_below_the_rows(known):
    library = Library.load()
    miss, sd = [], []
    for name, rows in known.everything.items():
        for row in rows:
            if row.energy_ev == 100.0:
                material = library.get(name)
                miss.append(np.log(row.atoms_per_ion / float(normal_yield(material, energy_ev=100.0))))
                sd.append(float(ln_yield_sd(material, energy_ev=100.0)))
    inside = np.abs(miss) < 1.96 * np.array(sd)
    assert len(miss) == 26
    assert 0.90 <= inside.mean() <= 1.0
    assert 1.2 < np.exp(np.sqrt(np.mean(np.square(miss)))) < 1.5


@pytest.mark.published
def test_a_laws_own_output_is_no_datum(known):
    assert not known.everything["Zn"]
    assert [row.energy_ev for row in known.data["W"]] == [200.0, 600.0]


@pytest.mark.closed_form
def test_a_rate_and_a_500_ev_yield_are_one_datum(known):
    for rows in known.everything.values():
        assert sum(row.energy_ev == 500.0 for row in rows) <= 1
    [rate] = [row for row in known.everything["Ni"] if row.energy_ev == 500.0]
    assert not rate.measured
    # 66 nm/min / 1.10 x 9.13 /374.5
    assert rate.atoms_per_ion == pytest.approx(66.0 / 1.10 * 9.134 / 374.49, rel=1e-3)


@pytest.mark.published
def test_no_sd_is_below_the_best_that_is_published(known):
    for name, rows in known.data.items():
        if rows:
            assert tie(rows, known.scatter).ln_sd >= LEAST_LN_SD, name


@pytest.mark.closed_form
def test_exponents_only_where_rows_span_a_decade(known):
    for name, rows in known.data.items():
        if rows:
            decade = rows[-1].energy_ev >= 10 * rows[0].energy_ev
            assert (tie(rows, known.scatter).exponent != 0.0) == decade, name
