"""The stop table put right by surfaces, held against surfaces run in other draws than the ones it was made from."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from stackmill.ensemble.run import run
from stackmill.jobs import load_job
from stackmill.planning.carrying import PARTS, RUNS, SHARES, surface_times
from stackmill.planning.correction import crosses_a_via
from stackmill.planning.stops import stop_table
from stackmill.planning.surfaces import Surfaces
from stackmill.rates.yields import angular_shape
from stackmill.relief.evolve import Reaching, evolve, reached_s
from stackmill.relief.gridding import Cut, cell_grid, section_grid
from stackmill.relief.watch import Watch
from stackmill.report.window_words import window_in_words

NARROW = """
stack:
  cell: {x: 2 um, y: 2 um}
  layers:
    - {name: level, material: SiO2 PECVD, thickness: 900 nm ± 5 %,
       features: [{name: wall, material: W, line: {along: y, centre: 1 um, width: WIDTH}}]}
    - {name: under, material: SiO2 PECVD, thickness: 500 nm ± 5 %}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2 ± 3 %}
materials:
  materials:
    - name: SiO2 PECVD
      measured_rate: {rate: 40 nm/min ± 4 %, energy: 1 keV, incidence: 0 deg, current_density: 0.5 mA/cm2}
    - name: W
      measured_rate: {rate: 32 nm/min ± 4 %, energy: 1 keV, incidence: 0 deg, current_density: 0.5 mA/cm2}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: INCIDENCE, motion: MOTION, for: 20 min}]}
goal: {layer: under, at: top, clear: 100 %}
"""


def job(width="160 nm", incidence="0 deg", motion="rotating", **more):
    text = NARROW.replace("WIDTH", width).replace("INCIDENCE", incidence).replace("MOTION", motion)
    for old, new in more.items():
        text = text.replace(old, new)
    return load_job(text)


@pytest.mark.closed_form
def test_a_narrow_slow_line_goes_down_with_its_surroundings_once_its_facets_have_met():
    one = job()
    table, flat = stop_table(one), stop_table(one, flat=True)
    assert flat.provisional
    assert not table.provisional
    assert table.correction is not None
    rows = {(row.column, row.layer): row for row in table.rows}
    wall = rows["wall", "under"]
    # its roof slope p: H_W(p) = v_oxide; it stands half-width x p over the oxide and falls with it
    by_column = next(row for row in flat.rows if (row.column, row.layer) == ("wall", "under"))
    assert (by_column.basis, wall.basis) == ("flat", "surface")
    tungsten, oxide = 900.0 / by_column.time_s, 900.0 / rows["field", "under"].time_s
    shape = angular_shape(one.materials["W"], energy_ev=1000.0)
    p = brentq(lambda q: float(shape.ratio(np.arctan(q))) - oxide / tungsten, 1e-4, 1.5)
    assert wall.time_s == pytest.approx((900.0 + 80.0 * p) / oxide, rel=0.005)
    assert wall.time_s < 0.9 * by_column.time_s
    exposed, by_columns = (np.median(one.ensemble.outcome.exposed_s) for one in (table, flat))
    assert exposed < 0.95 * by_columns


@pytest.mark.independent
@pytest.mark.parametrize("incidence", ["0 deg", "50 deg"])
def test_carried_times_agree_with_surfaces_run_in_64_other_draws(incidence):
    one = job(incidence=incidence)
    ensemble = run(one)
    cut = Cut("y", 1000.0)
    times = surface_times(ensemble, 0, cut)
    column = one.column_map.regions[0].labels.index("wall")
    carried = times.layer[column, 1]
    others = 7 + np.arange(RUNS) * (len(ensemble.weights) // RUNS)  # none of them is one the fit was made from
    surfaces = Surfaces(ensemble, 0, cut)
    laid = surfaces.layout(section_grid(one.column_map.regions[0], one.column_map.cell, cut, 400))
    down = ensemble.descent(ensemble.z[:, others])
    direct = []
    for d in range(RUNS):
        terrain = surfaces.terrain(laid, down, d)
        passed = evolve(terrain, surfaces.stages(terrain, down, d), end_s=4000.0, undercuts=False).passed_s[0, :, 0]
        direct.append(passed[terrain.region_column[terrain.column[0]] == column].max())
    off = carried.draws_s[0][others] - np.array(direct)
    assert np.sqrt(np.mean(off**2)) < 2.5 * float(carried.error_s[0]) + 2.0
    assert abs(np.median(off)) < 0.01 * np.median(direct)
    assert float(carried.error_s[0]) < 0.015 * np.median(direct)
    for share in (0.1, 0.5, 0.9):  # the chance that it is down by a moment, of the same draws
        moment = np.quantile(direct, share)
        assert np.mean(carried.draws_s[0][others] <= moment) == pytest.approx(share, abs=0.07)


@pytest.mark.closed_form
def test_parts_of_a_column_add_up_and_a_wide_line_keeps_its_columns_times():
    assert PARTS.sum() == pytest.approx(1.0)
    assert len(PARTS) == len(SHARES)
    table, flat = stop_table(job(width="1200 nm")), stop_table(job(width="1200 nm"), flat=True)
    assert {row.basis for row in table.rows if row.layer == "under"} == {"flat"}
    np.testing.assert_allclose(
        np.median(table.ensemble.outcome.exposed_s), np.median(flat.ensemble.outcome.exposed_s), rtol=3e-3
    )


@pytest.mark.closed_form
def test_the_surface_agrees_with_the_columns_where_they_can_be_trusted():
    one = job(width="1200 nm")
    ensemble = run(one)
    times = surface_times(ensemble, 0, Cut("y", 1000.0))
    column = one.column_map.regions[0].labels.index("wall")
    np.testing.assert_allclose(times.layer[column, 1].best_s, ensemble.best_outcome.reached_s(0, column, 1), rtol=1e-9)
    np.testing.assert_allclose(times.layer[column, 1].draws_s[0], ensemble.outcome.reached_s(0, column, 1), rtol=1e-6)


def test_a_beam_across_the_section_leaves_the_window_provisional_and_says_why():
    table = stop_table(job(motion="still at 45 deg", incidence="30 deg"))
    assert table.provisional
    assert "does not lie in the section" in table.correction.unsaid[0][1]


def test_a_pattern_density_leaves_the_window_provisional_and_says_why():
    dense = {"features: [": "features: [{name: dust, material: Cu, pattern_density: 10 %}, "}
    table = stop_table(job(**dense))
    assert table.provisional
    assert "has no place" in table.correction.unsaid[0][1]


@pytest.mark.independent
def test_the_cell_of_a_line_gives_the_times_of_its_section():
    one = job()
    ensemble = run(one, draws=64)
    column = one.column_map.regions[0].labels.index("wall")
    section, cell = (surface_times(ensemble, 0, cut).layer[column, 1].best_s[0] for cut in (Cut("y", 1000.0), None))
    assert cell == pytest.approx(section, rel=0.01)


@pytest.mark.independent
def test_facets_over_the_edges_of_the_goal_are_seen_though_its_centre_stays_flat():
    """A wide slow bar: its column is flat to its centre, and its edges come down long before it."""
    one = job(
        width="1200 nm", **{"clear: 100 %": "clear: 95 %", "layer: under, at: top": "layer: level, at: 20 % ± 60 nm"}
    )
    flat, table = stop_table(one, flat=True), stop_table(one)
    assert flat.provisional
    assert table.correction is not None
    assert not table.provisional
    wall = one.column_map.regions[0].labels.index("wall")
    lost = next(s for s in table.correction.surfaces if wall in s.columns).spoilt
    first = min(float(told.best_s[0]) for told in lost.values())
    by_columns = float(flat.ensemble.best_outcome.lost_s[0])
    assert first <= by_columns * (1.0 + 1e-9)


@pytest.mark.parametrize("calls", [1, 40])
def test_an_interrupt_while_surfaces_run_is_no_answer(calls):
    """At once, while the first surface is run, and later, while the draws are."""

    class Interrupting(Watch):
        left = calls

        def done(self, share):
            self.left -= 1
            if self.left == 0:
                raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        stop_table(job(), watch=Interrupting())


def test_the_first_line_keeps_clear_of_vias_and_another_goes_through_one():
    two = stop_table(load_job("stacks/two-metal/job.yaml"))
    lines = [s for s in two.correction.surfaces if s.cut is not None]
    through = [crosses_a_via(two.ensemble.inputs.job, s.region, s.cut) for s in lines]
    assert through == [False, True]
    assert "the cell of array, 224 points along x, at best values" in " ".join(window_in_words(two, two.window))


@pytest.mark.independent
def test_the_cell_at_best_values_tells_what_vias_do_to_the_goals_area():
    """Held against the shares of a finer cell's points; by columns alone the loss comes a quarter later."""
    two = load_job("stacks/two-metal/job.yaml")
    table, flat = stop_table(two), stop_table(two, flat=True)
    assert any(s.cut is None and s.runs == 1 for s in table.correction.surfaces)
    surfaces = Surfaces(flat.ensemble, 0, None)
    grid = cell_grid(two.column_map.regions[0], two.column_map.cell, 300)
    terrain = surfaces.terrain(surfaces.layout(grid), flat.ensemble.best_descent)
    run_down = evolve(terrain, surfaces.stages(terrain, flat.ensemble.best_descent), end_s=2500.0, undercuts=False)

    def moment(spots, share):
        above = np.full(len(two.column_map.regions[0].area), -1)
        for spot in spots:
            if spot.region == 0:
                above[spot.column] = int(np.asarray(spot.above).flat[0])
        return reached_s(terrain, run_down.passed_s, Reaching(above[terrain.region_column], share))

    where, best = flat.ensemble.best_ground, table.ensemble.best_outcome
    assert float(best.exposed_s[0]) == pytest.approx(moment(where.goal_upper, 0.95), rel=0.03)
    assert float(best.lost_s[0]) == pytest.approx(moment(where.goal_lower, 0.01), rel=0.05)
    assert float(flat.ensemble.best_outcome.lost_s[0]) > 1.15 * float(best.lost_s[0])
