"""The stop table of whole jobs: windows by brute force over the draws, goals, keeps, looks, flatness."""

from __future__ import annotations

import re

import numpy as np
import pytest
from scipy.optimize import brentq

from stackmill.errors import InputError
from stackmill.jobs import load_job
from stackmill.planning.stops import stop_table
from stackmill.planning.windows import chance_curve, success_spans
from stackmill.rates.yields import angular_shape
from stackmill.report.trail import _advice
from stackmill.report.window_words import window_in_words
from stackmill.timing.plan import _standing

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
    """By columns alone: what surfaces make of it is tested in test_correction.py."""
    return stop_table(load_job(text), flat=True)


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
    assert window.exposed_s <= good.min() <= window.exposed_s + 5.0
    assert window.lost_s - 5.0 <= good.max() <= window.lost_s


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
    times = np.sort(table.ensemble.outcome.reached_s(r, 0, 2))
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


NARROW = """
stack:
  cell: {x: 2 um, y: 2 um}
  layers:
    - {name: level, material: SiO2 PECVD, thickness: 900 nm ± 1 %,
       features: [{name: wall, material: W, line: {along: y, centre: 1 um, width: WIDTH}}]}
    - {name: under, material: SiO2 PECVD, thickness: 900 nm}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2, divergence: 0 deg, stage: {zero_error: ± 0 deg}}
materials:
  materials:
    - name: SiO2 PECVD
      measured_rate: {rate: 40 nm/min ± 1 %, energy: 1 keV, incidence: 0 deg, current_density: 0.5 mA/cm2}
    - name: W
      measured_rate: {rate: 36 nm/min ± 1 %, energy: 1 keV, incidence: 0 deg, current_density: 0.5 mA/cm2}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 5 min}]}
goal: {layer: under, at: top, clear: 100 %}
"""


@pytest.mark.independent
def test_a_slow_line_is_flat_until_its_kinks_meet_and_a_window_on_it_is_provisional():
    narrow, wide = (forecast(NARROW.replace("WIDTH", width)) for width in ("200 nm", "1200 nm"))
    rows = {r.column: r for r in narrow.rows if r.layer == "under"}
    assert not rows["wall"].flat_ok
    assert narrow.provisional
    # the kink speed of tungsten beside oxide 10/9 as fast, from its own angular shape by a root and a search
    job = narrow.ensemble.inputs.job
    shape = angular_shape(job.materials["W"], energy_ev=1000.0)

    def ratio(p):
        return float(shape.ratio(np.arctan(p)))

    steepest = brentq(lambda p: ratio(p) - 40 / 36, 1e-4, 1.5)
    chords = [(ratio(p) - 1.0) / p for p in np.linspace(1e-3, steepest, 4000)]
    flat_for = 600.0 / (36.0 / 60.0 * max(chords))
    assert flat_for > 1500.0 > flat_for / 6.0  # the line is through at 1500 s, the narrow one has a sixth of the width
    assert {r.column: r for r in wide.rows if r.layer == "under"}["wall"].flat_ok


@pytest.mark.closed_form
def test_a_film_alone_is_flat_for_ever_and_its_window_not_provisional():
    table = forecast(
        NARROW.replace(
            ",\n       features: [{name: wall, material: W, line: {along: y, centre: 1 um, width: WIDTH}}]", ""
        )
    )
    assert all(row.flat_ok for row in table.rows)
    assert not table.provisional


STEP = "energy: 1 keV, incidence: 45 deg, motion: rotating"


@pytest.mark.closed_form
def test_a_process_takes_no_beam_on_time_and_the_stop_after_it_keeps_it():
    wet = "{name: wet, rates: {SiO2 PECVD: 150 nm/min, other: 0 nm/min}, for: 4 min}"
    recipe = f"{{name: bulk, {STEP}, for: 2 min}}, {wet}"
    text = re.sub(
        r"steps: \[.*\]}", f"steps: [{recipe}, {{name: on, {STEP}, for: 1 min}}]}}", JOB.replace("LEVEL", "top")
    )
    table = forecast(text)
    rows = {(r.column, r.layer): r for r in table.rows if r.region == "array"}
    assert rows["bar", "metal"].time_s == 120.0
    assert rows["bar", "metal"].step == "wet"
    assert table.ensemble.best.spans[2].start_s[0] == 120.0
    words = "\n".join(window_in_words(table, table.window))
    assert "unused: wet" not in words


@pytest.mark.closed_form
def test_a_to_step_lasts_as_long_in_every_draw_and_counts_the_goals_regions():
    text = re.sub(
        r"steps: \[.*\]}", f"steps: [{{name: down, {STEP}, to: metal}}, {{name: on, {STEP}, for: 1 min}}]}}", JOB
    )
    text = text.replace("LEVEL", "top").replace(", in: [array]", "")
    outcome = forecast(text).ensemble.outcome
    assert np.ptp(outcome.end_s) == 0.0
    covered = text.replace("steps: [", "steps: [{cover: [field], with: silver paint}, ")
    assert forecast(covered).ensemble.outcome.end_s[0] == outcome.end_s[0]


@pytest.mark.independent
def test_the_window_hardly_depends_on_the_seed():
    job = load_job(JOB.replace("LEVEL", "50 % ± 150 nm"))
    windows = [stop_table(job, seed=seed, flat=True).window for seed in range(8)]
    ends = np.array([(w.exposed_s, w.lost_s, w.stop_s) for w in windows])
    assert (np.ptp(ends, axis=0) < 0.08 * ends.mean(axis=0)).all()


@pytest.mark.closed_form
def test_what_is_lost_before_the_look_is_said_and_the_first_look_comes_before_it():
    text = re.sub(
        r"steps: \[.*\]}", f"steps: [{{name: bulk, {STEP}, seen: {{layer: under, in: array, area: 100 %}}}}]}}", JOB
    ).replace("LEVEL", "top")
    table = forecast(text)
    assert (table.window.leg, table.window.first_look_leg) == (0, 0)
    assert table.window.by_eye
    assert 0.0 < table.window.first_look_s < table.ensemble.best_outcome.lost_s[0]


@pytest.mark.closed_form
def test_a_draw_thinner_than_nothing_gives_way_and_outer_sizes_hold():
    thickness = np.array([[60.0, 60.0], [-20.0, 40.0], [30.0, 30.0]])
    standing = _standing(thickness)
    np.testing.assert_allclose(standing, [[40.0, 60.0], [0.0, 40.0], [30.0, 30.0]])


@pytest.mark.closed_form
def test_depth_and_height_of_a_row():
    table = forecast(JOB.replace("LEVEL", "top"))
    row = next(r for r in table.rows if r.region == "array" and r.layer == "under")
    assert row.height_nm == pytest.approx(300.0)
    assert row.depth_nm == pytest.approx(700.0)


@pytest.mark.parametrize(
    ("name", "advice"),
    [
        ("thickness of metal 1", "measure the thickness of metal 1"),
        ("height of metal 1 top", "measure the height of metal 1 top"),
        ("eye in touch", "make the look sharper"),
        ("current density", "measure the current"),
        ("current density of 0.5 mA/cm2", "measure the current"),
        ("current density at array", "map the beam"),
        ("dial zero error", "check the stage's zero"),
        ("doubly charged share", "measure the share"),
        ("measured scale", "calibrate the microscope"),
        ("wet: rate of SiO2", "etch a test piece of SiO2 in 'wet'"),
        ("SiO2: rate", "mill a coupon of SiO2"),
    ],
)
def test_what_would_narrow_it_is_said_for_every_kind_of_input(name, advice):
    assert _advice(name).startswith(advice)


@pytest.mark.regression
def test_the_chance_told_is_that_of_the_stop_told():
    table = stop_table(load_job("stacks/four-metal/library.yaml"))
    curve = chance_curve(*success_spans(table.ensemble.outcome, table.window.leg), table.ensemble.weights)
    assert table.window.best_stop_chance == pytest.approx(curve.at(table.window.best_stop_s - table.window.leg_start_s))
    assert f"has a chance of {table.window.best_stop_chance:.2f}" in "\n".join(window_in_words(table, table.window))


@pytest.mark.regression
@pytest.mark.parametrize("demo", ["copper", "sensor", "two-metal"])
def test_the_chance_of_a_stop_in_the_window_is_read_at_that_stop(demo):
    table = stop_table(load_job(f"stacks/{demo}/job.yaml"), flat=True)
    window, ensemble = table.window, table.ensemble
    begin, end = success_spans(ensemble.outcome, window.leg)
    stop = window.stop_s - window.leg_start_s + 1e-9  # the first moment of a stretch belongs to it
    assert window.chance == pytest.approx(ensemble.weights[(begin <= stop) & (stop < end)].sum(), abs=1e-12)
    assert window.chance < window.best_chance  # or the test could not tell the two apart


@pytest.mark.closed_form
def test_what_is_lost_before_the_look_counts_by_draw():
    seen = "seen: {layer: metal, in: array, area: 100 %, within: ± 60 s}"
    steps = f"steps: [{{name: bulk, {STEP}, {seen}}}, {{name: touch, {STEP}, for: 1 min}}]}}"
    text = re.sub(r"steps: \[.*\]}", steps, JOB).replace("LEVEL", "top")
    table = forecast(text.replace("layer: under, at_least: 100 nm", "layer: metal, at_least: 350 nm"))
    outcome = table.ensemble.outcome
    assert table.window.leg == 1
    assert 0.05 < table.window.lost_before < 0.5
    assert table.window.lost_before == pytest.approx(np.mean(outcome.lost_s <= outcome.leg_start_s[1]), abs=1e-12)
