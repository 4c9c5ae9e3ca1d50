"""The ensemble of draws, held against linear error propagation, and its habits."""

from __future__ import annotations

import numpy as np
import pytest
from uncertainties import ufloat

from stackmill.ensemble.inputs import Inputs
from stackmill.ensemble.run import run
from stackmill.jobs import load_job
from stackmill.planning.stops import stop_table

LINEAR = """
stack:
  layers:
    - {name: top, material: SiO2, thickness: 500 nm ± 4 %, coverage: planarised}
    - {name: middle, material: W, thickness: 200 nm ± 6 %}
    - {name: bottom, material: SiO2, thickness: 400 nm ± 5 %, coverage: planarised}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2, stage: {zero_error: ± 0 deg}}
materials:
  materials:
    - name: SiO2
      measured_rate: {rate: 40 nm/min ± 1 %, energy: 1 keV, incidence: 45 deg, current_density: 0.5 mA/cm2}
    - name: W
      measured_rate: {rate: 20 nm/min ± 1 %, energy: 1 keV, incidence: 45 deg, current_density: 0.5 mA/cm2}
recipe:
  steps: [{name: mill, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 h}]
"""


def at(job, values, material):
    """The row of one material."""
    return values[job.column_map.materials.index(material)]


@pytest.fixture(scope="module")
def linear():
    return load_job(LINEAR)


@pytest.mark.independent
def test_sd_equals_linear_propagation_where_the_time_is_nearly_linear(linear):
    oxide, tungsten = ufloat(40.0, 0.4), ufloat(20.0, 0.2)
    top, middle, bottom = ufloat(500, 20), ufloat(200, 12), ufloat(400, 20)
    judge = 60 * ((top + bottom) / oxide + middle / tungsten)
    ensemble = run(linear, seed=5)
    times = ensemble.outcome.reached_s(0, 0, 3)
    assert float(ensemble.best_outcome.reached_s(0, 0, 3)[0]) == pytest.approx(judge.nominal_value, rel=1e-3)
    assert times.std() == pytest.approx(judge.std_dev, rel=0.02)


@pytest.mark.closed_form
def test_a_rate_measured_without_the_days_current_carries_the_currents_error_again():
    same = load_job(LINEAR.replace("0.5 mA/cm2, stage", "0.5 mA/cm2 ± 6 %, stage"))
    inputs = Inputs.of(same)
    assert at(same, inputs.model.ln_rate_sd(0), "SiO2") == pytest.approx(np.hypot(0.01, 0.06), rel=1e-3)
    text = LINEAR.replace("0.5 mA/cm2, stage", "0.5 mA/cm2 ± 6 %, stage")
    today = load_job(text.replace("current_density: 0.5 mA/cm2}", "current_density: 0.5 mA/cm2, same_day: yes}"))
    assert at(today, Inputs.of(today).model.ln_rate_sd(0), "SiO2") == pytest.approx(0.01, rel=1e-3)
    assert at(today, Inputs.of(today).model.best_nm_per_s(0), "W") * 60 == pytest.approx(20.0, rel=0.01)
    # a rate of today says something of today's current, and so of materials that were not measured
    assert at(today, Inputs.of(today).model.ln_rate_sd(0), "Si") < at(same, Inputs.of(same).model.ln_rate_sd(0), "Si")


@pytest.mark.independent
def test_drawn_rates_have_the_sd_that_the_belief_says(linear):
    job = load_job("stacks/two-metal/job.yaml")
    ensemble = run(job)
    sample = ensemble.inputs.sample(ensemble.z)
    for step in (3, 4, 5):
        for name in ("SiO2 PECVD", "W", "AlCu", "TiN"):
            drawn = np.log(at(job, sample.rate_nm_per_s(step), name)).std()
            assert drawn == pytest.approx(at(job, ensemble.inputs.model.ln_rate_sd(step), name), rel=0.03)


@pytest.mark.regression
def test_the_same_answer_for_any_number_of_threads_and_another_for_another_seed(linear):
    one, two, other = run(linear, jobs=1), run(linear, jobs=3), run(linear, seed=1)
    np.testing.assert_array_equal(one.outcome.level_s[0], two.outcome.level_s[0])
    assert (one.outcome.level_s[0] != other.outcome.level_s[0]).any()


@pytest.mark.closed_form
def test_regions_share_a_thickness_but_not_its_across_die_part():
    text = LINEAR.replace("500 nm ± 4 %", '"500 nm ± 4 %, across die ± 3 %"').replace(
        "mill: {gas", "  regions: [{name: here}, {name: there}]\nmill: {gas"
    )
    ensemble = run(load_job(text))
    here, there = (deltas[0] for deltas in ensemble.inputs.sample(ensemble.z).thickness_deltas_nm())
    assert np.corrcoef(here, there)[0, 1] == pytest.approx(16 / 25, abs=0.05)
    assert here.std() == pytest.approx(25.0, rel=0.02)


@pytest.mark.independent
def test_variance_shares_of_a_nearly_linear_time(linear):
    job = load_job(LINEAR + "goal: {layer: bottom, at: top}\n")
    table = stop_table(job)
    time = 60 * np.array([20.0 / 40, 12.0 / 20, 500 / 40 * 0.01, 200 / 20 * 0.01])
    want = time**2 / np.sum(time**2)
    shares = {s.name: s.share for s in table.shares}
    names = ["thickness of top", "thickness of middle", "SiO2: rate", "W: rate"]
    assert [shares[name] for name in names] == pytest.approx(list(want), abs=0.03)


@pytest.mark.closed_form
def test_every_stated_error_of_a_current_counts():
    step = load_job(
        LINEAR.replace("motion: rotating, for", "motion: rotating, current_density: 0.5 mA/cm2 ± 40 %, for")
    )
    assert at(step, Inputs.of(step).model.ln_rate_sd(0), "SiO2") == pytest.approx(np.hypot(0.01, 0.4), rel=1e-3)
    text = LINEAR.replace("current_density: 0.5 mA/cm2}", "current_density: 0.5 mA/cm2 ± 3 %}")
    coupon = load_job(text)
    assert at(coupon, Inputs.of(coupon).model.ln_rate_sd(0), "SiO2") == pytest.approx(np.hypot(0.01, 0.03), rel=0.01)


LOOK = LINEAR.replace(
    "steps: [{name: mill, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 h}]",
    "steps: [{name: eye, energy: 1 keV, incidence: 45 deg, motion: rotating, seen: {layer: middle, within: ± 20 s}},"
    " {name: wet, rates: {W: 60 nm/min ± 5 %, other: 0 nm/min}, for: 1 min},"
    " {name: on, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 h}]",
)


@pytest.mark.independent
def test_the_eye_and_a_process_vary_as_stated():
    ensemble = run(load_job(LOOK))
    sample = ensemble.inputs.sample(ensemble.z)
    reached = sample.thickness_deltas_nm()[0][0] + 500.0
    late = ensemble.outcome.leg_start_s[1] - reached / sample.rate_nm_per_s(0)[0]
    assert late.std() == pytest.approx(20.0, rel=0.02)
    assert late.mean() == pytest.approx(0.0, abs=0.5)
    wet = sample.rate_nm_per_s(1)
    assert np.log(wet[1]).std() == pytest.approx(0.05, rel=0.02)
    assert np.exp(np.log(wet[1]).mean()) == pytest.approx(1.0, rel=1e-3)
    assert (wet[0] == 0.0).all()


@pytest.mark.independent
def test_times_after_a_look_are_early_and_late_by_what_comes_after_it():
    table = stop_table(load_job(LOOK + "goal: {layer: bottom, at: top}\n"))
    row = next(r for r in table.rows if r.layer == "bottom")
    outcome = table.ensemble.outcome
    since = np.sort(outcome.reached_s(0, 0, 2) - outcome.leg_start_s[1])
    best_look = float(table.ensemble.best_outcome.leg_start_s[1][0])
    ranks = [int(np.ceil(share * 4096)) - 1 for share in (0.05, 0.95)]
    assert [row.time_early_s, row.time_late_s] == pytest.approx([best_look + since[k] for k in ranks])


@pytest.mark.closed_form
def test_one_per_cent_of_the_goal_is_lost_and_any_of_a_keep():
    text = """
stack:
  cell: {x: 1 um, y: 1 um}
  layers:
    - {name: film, material: SiO2, thickness: 300 nm, features: [
        {name: weak, material: Cu, block: {x: [0 um, 0.09 um], y: [0 um, 0.1 um]}}]}
    - {name: substrate, material: Si, thickness: 300 um}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 1 h}]}
goal: {layer: film, at: 90 % ± 10 nm}
"""
    best = run(load_job(text)).best_outcome
    columns = run(load_job(text)).best_ground.goal_lower
    reach = run(load_job(text)).best.reach
    slow, fast = (float(reach(0, c, columns[c].above)[0]) for c in (0, 1))
    assert fast < slow  # copper is 0.9 % of the goal: not yet a loss
    assert best.lost_s[0] == slow
    kept = run(load_job(text + "keep: [{layer: film, at_least: 260 nm}]\n")).best_outcome
    assert kept.lost_s[0] < slow


@pytest.mark.closed_form
def test_a_measured_scale_stretches_every_layer_alike_but_not_the_substrate():
    text = (
        LINEAR.replace("stack:\n", "stack:\n  measured: {scale: ± 2 %}\n").replace(" ± 4 %", "").replace(" ± 6 %", "")
    )
    ensemble = run(load_job(text.replace(" ± 5 %", "")))
    deltas = ensemble.inputs.sample(ensemble.z).thickness_deltas_nm()[0]
    np.testing.assert_allclose(deltas[0] / 500.0, deltas[1] / 200.0)
    assert (deltas[0] / 500.0).std() == pytest.approx(0.02, rel=0.01)
    assert (deltas[-1] == 0.0).all()


@pytest.mark.closed_form
def test_a_region_off_the_beams_centre_mills_slower_by_the_profile_and_an_uneven_beam_differs_by_region():
    regions = "  regions: [{name: here, at: {x: 0 mm, y: 0 mm}}, {name: there, at: {x: 10 mm, y: 0 mm}}]\nmill: {gas"
    text = LINEAR.replace("mill: {gas", regions)
    profile = run(load_job(text.replace("0.5 mA/cm2, stage", "0.5 mA/cm2, profile: {falls: 20 %, at: 10 mm}, stage")))
    here, there = (float(profile.best_outcome.reached_s(r, 0, 3)[0]) for r in (0, 1))
    assert there == pytest.approx(here / 0.8)
    uneven = run(load_job(text.replace("0.5 mA/cm2, stage", "0.5 mA/cm2, uniformity: ± 9 %, stage")))
    ratio = np.log(uneven.outcome.reached_s(0, 0, 1) / uneven.outcome.reached_s(1, 0, 1))
    assert ratio.std() == pytest.approx(np.sqrt(2) * 0.09 / np.sqrt(3), rel=0.03)
