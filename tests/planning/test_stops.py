"""The stop table of whole jobs: windows by brute force over the draws, goals, keeps, looks, flatness."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.errors import InputError
from stackmill.jobs import load_job
from stackmill.planning.stops import stop_table

JOB = """
stack:
  cell: {x: 2 um, y: 2 um}
  layers:
    - {name: oxide, material: SiO2 PECVD, thickness: 300 nm ± 5 %}
    - {name: metal, material: SiO2 PECVD, thickness: 400 nm ± 5 %,
       features: [{name: bar, material: AlCu, line: {along: y, centre: 1 um, width: 1 um}}]}
    - {name: under, material: SiO2 PECVD, thickness: 300 nm ± 5 %}
    - {name: substrate, material: Si, thickness: 300 um}
  regions: [{name: array}, {name: field, absent: {features_of: [metal]}}]
mill: {gas: argon, current_density: 0.5 mA/cm2 ± 6 %}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 5 min}]}
goal: {layer: metal, feature: bar, in: [array], at: LEVEL, clear: 95 %}
keep: [{in: [field], layer: under, at_least: 100 nm}]
confidence: 60 %
"""


def forecast(text):
    return stop_table(load_job(text))


def brute(table):
    """Exposed and lost of each draw, from thicknesses and rates alone."""
    ensemble = table.ensemble
    sample = ensemble.inputs.sample(ensemble.z)
    oxide, metal = (
        sample.rate_nm_per_s(0)[ensemble.inputs.job.column_map.materials.index(name)] for name in ("SiO2 PECVD", "AlCu")
    )
    deltas = sample.thickness_deltas_nm()
    top, bar, under = (300 + deltas[0][0], 400 + deltas[0][1], 300 + deltas[0][2])
    return top, bar, under, oxide, metal


@pytest.mark.independent
@pytest.mark.parametrize(
    ("level", "upper", "lower"), [("top", None, 0.0), ("50 % ± 30 nm", 30.0, -30.0), ("50 % ± 150 nm", 150.0, -150.0)]
)
def test_exposed_lost_and_chance_by_brute_force(level, upper, lower):
    table = forecast(JOB.replace("LEVEL", level))
    top, bar, under, oxide, metal = brute(table)
    high = bar if upper is None else 0.5 * bar + upper
    low = np.zeros_like(bar) if upper is None else 0.5 * bar + lower
    exposed = top / oxide + (bar - high) / metal
    lost_goal = top / oxide + (bar - low) / metal
    lost_keep = (top + bar + under - 100.0) / oxide
    outcome, window = table.ensemble.outcome, table.window
    np.testing.assert_allclose(outcome.exposed_s, exposed, rtol=1e-9)
    np.testing.assert_allclose(outcome.lost_s, np.minimum(lost_goal, lost_keep), rtol=1e-9)
    assert window is not None
    times = np.linspace(0, 3000, 1501)
    chance = np.array([np.mean((exposed <= t) & (t < np.minimum(lost_goal, lost_keep))) for t in times])
    assert window.best_chance >= chance.max() - 1e-12
    assert window.first_look_s == pytest.approx(np.sort(outcome.lost_s)[int(np.ceil(0.05 * 4096)) - 1], rel=1e-12)
    good = times[chance >= 0.6]
    if not good.size:
        assert window.exposed_s is None
        assert window.stop_s is None
        return
    assert window.exposed_s <= good.min() <= window.exposed_s + 2.0
    assert window.lost_s - 2.0 <= good.max() <= window.lost_s


@pytest.mark.closed_form
def test_a_keep_can_end_the_window_and_is_named():
    table = forecast(JOB.replace("LEVEL", "top").replace("at_least: 100 nm", "at_least: 299 nm"))
    assert table.window is not None
    assert table.window.lost_keep == 0
    assert table.window.lost_by == (1, 0)


@pytest.mark.closed_form
def test_early_and_late_are_the_quantiles_of_the_draws():
    table = forecast(JOB.replace("LEVEL", "top"))
    row = next(r for r in table.rows if r.region == "field" and r.layer == "under")
    r = 1
    times = np.sort(table.ensemble.outcome.layer_s[r][0, 2])
    assert row.time_early_s == times[int(np.ceil(0.2 * 4096)) - 1]
    assert row.time_late_s == times[int(np.ceil(0.8 * 4096)) - 1]


@pytest.mark.closed_form
def test_a_look_takes_out_what_was_uncertain_before_it():
    blind = forecast(JOB.replace("LEVEL", "top"))
    look = (
        "{name: mill, energy: 1 keV, incidence: 45 deg, motion: rotating, seen: {layer: metal, in: array, area: 50 %}}"
    )
    plan = "{name: on, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 min}"
    text = JOB.replace("LEVEL", "50 % ± 100 nm")
    i, j = text.index("{name: mill, energy"), text.index("]}\ngoal")
    seen = forecast(text[:i] + look + ", " + plan + text[j:])
    assert seen.window is not None
    assert seen.window.leg == 1
    assert seen.window.best_chance > forecast(text).window.best_chance
    assert seen.window.leg_start_s == pytest.approx(float(blind.ensemble.best_outcome.exposed_s[0]))


def test_a_step_to_a_layer_already_passed_is_refused_with_its_place():
    steps = "{name: again, energy: 1 keV, incidence: 45 deg, motion: rotating, to: oxide}"
    with pytest.raises(InputError, match="has been reached before step 'again' begins"):
        forecast(JOB.replace("LEVEL", "top").replace("for: 5 min}]}", "for: 5 min}, " + steps + "]}"))


@pytest.mark.closed_form
def test_flat_rows_are_those_before_a_facet_arrives():
    table = forecast(JOB.replace("LEVEL", "top"))
    rows = {(r.region, r.column, r.layer): r for r in table.rows}
    assert all(r.flat_ok for key, r in rows.items() if key[0] == "field")
    assert rows["array", "bar", "metal"].flat_ok


@pytest.mark.closed_form
def test_depth_and_height_of_a_row():
    table = forecast(JOB.replace("LEVEL", "top"))
    row = next(r for r in table.rows if r.region == "array" and r.layer == "under")
    assert row.height_nm == pytest.approx(300.0)
    assert row.depth_nm == pytest.approx(700.0)
