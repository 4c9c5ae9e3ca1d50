"""The relief of a job: starting surface, all kinds of step, moments, features measured, refusals."""

from __future__ import annotations

import numpy as np
import pytest
from reliefs import relief_table
from scipy.optimize import brentq

from stackmill.ensemble.run import run
from stackmill.errors import InputError, StackmillWarning, UsageError
from stackmill.jobs import load_job
from stackmill.planning.relief import When, too_coarse
from stackmill.planning.surfaces import Surfaces
from stackmill.rates.yields import angular_shape
from stackmill.relief.evolve import evolve
from stackmill.relief.gridding import Cut, cell_grid, section_grid

LINE = """
stack:
  cell: {x: 2 um, y: 2 um}
  layers:
    - {name: level, material: FILL, thickness: 900 nm,
       features: [{name: bar, material: BAR, line: {along: y, centre: 1 um, width: 300 nm}}]}
    - {name: under, material: FILL, thickness: 900 nm}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2, divergence: 0 deg}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 12 min}]}
"""


def line(bar="W", fill="Ti", **more):
    text = LINE.replace("BAR", bar).replace("FILL", fill)
    for old, new in more.items():
        assert old in text
        text = text.replace(old, new)
    return load_job(text)


def rates(job):
    ensemble = run(job, draws=1)
    return dict(zip(job.column_map.materials, ensemble.inputs.best().rate_nm_per_s(0)[:, 0].tolist(), strict=False))


def bar_of(relief, moment=0):
    time = relief.moments[moment].time_s
    name = relief.job.column_map.features.index((0, "bar"))
    return next(row.standing for row in relief.rows if row.time_s == time and row.standing.feature == name)


@pytest.mark.closed_form
def test_a_line_with_a_flat_top_left_stands_as_high_as_the_rates_differ():
    job = line()
    v = rates(job)
    found = relief_table(job, when=When((400.0,)), section=Cut("y", 500.0), points=800)
    bar = bar_of(found)
    assert (bar.kind, bar.state, bar.top_layer) == ("pillar", "showing", 0)
    assert bar.height_nm == pytest.approx(400.0 * (v["Ti"] - v["W"]), rel=1e-3)
    shape = angular_shape(job.materials["W"], energy_ev=1000.0)
    p = brentq(lambda q: v["W"] * float(shape.ratio(np.arctan(q))) - v["Ti"], 1e-3, 1.5)
    assert bar.side_slope_deg == pytest.approx(np.degrees(np.arctan(p)), abs=1.0)
    assert bar.base_width_nm == pytest.approx(300.0 - 2 * 0.1 * bar.height_nm / p, abs=10.0)
    assert bar.width_nm == pytest.approx(300.0 - 2 * 0.9 * bar.height_nm / p, abs=10.0)


@pytest.mark.closed_form
def test_its_end_comes_when_the_roof_has_come_down_to_its_floor():
    job = line()
    v = rates(job)
    shape = angular_shape(job.materials["W"], energy_ev=1000.0)
    p = brentq(lambda q: v["W"] * float(shape.ratio(np.arctan(q))) - v["Ti"], 1e-3, 1.5)
    late = (900.0 + 150.0 * p) / v["Ti"]
    found = relief_table(job, when=When((late - 60.0, late + 60.0)), section=Cut("y", 500.0), points=600)
    before, after = bar_of(found, 0), bar_of(found, 1)
    assert (before.state, after.state) == ("showing", "gone")
    assert before.vanishes_s == pytest.approx(late, rel=0.005)
    assert found.job.column_map.layers[after.top_layer] == "under"


@pytest.mark.closed_form
def test_a_fast_line_is_a_recess_and_like_metal_is_flush():
    fast = bar_of(relief_table(line("Cu", "W"), when=When((120.0,)), section=Cut("y", 500.0)))
    assert fast.kind == "recess"
    assert fast.height_nm < -5.0
    like = bar_of(relief_table(line("SiO2", "SiO2"), when=When((120.0,)), section=Cut("y", 500.0)))
    assert (like.kind, like.width_nm, like.side_slope_deg) == ("flush", None, None)


CONFORMAL = """
stack:
  cell: {x: 3 um, y: 3 um}
  layers:
    - {name: top film, material: SiO2, thickness: 300 nm, coverage: conformal, sidewall: 60 %}
    - {name: film, material: SiN PECVD, thickness: 200 nm, coverage: conformal}
    - {name: metal, material: none, thickness: 600 nm,
       features: [{name: bar, material: AlCu, line: {along: y, centre: 1.5 um, width: 800 nm}}]}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2, divergence: 0 deg}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 12 min}]}
"""


@pytest.mark.closed_form
def test_the_surface_starts_from_the_conformal_top_itself_and_not_from_its_classes():
    job = load_job(CONFORMAL)
    region = job.column_map.regions[0]
    grid = section_grid(region, job.column_map.cell, Cut("y", 500.0), 300)
    ensemble = run(job, draws=1)
    surfaces = Surfaces(ensemble, 0, Cut("y", 500.0))
    terrain = surfaces.terrain(surfaces.layout(grid), ensemble.best_descent)
    x = grid.x_nm[0]
    away = np.maximum(np.abs(x - 1500.0) - 400.0, 0.0)
    # definition 3 on a line: over the wall's top, both half-ellipses at points of one slope; elsewhere flat ground
    angle = np.linspace(0.0, np.pi / 2, 20001)
    far, high = np.zeros_like(angle), np.zeros_like(angle)
    for thick, share in ((300.0, 0.6), (200.0, 1.0)):
        length = np.hypot(share * np.sin(angle), np.cos(angle))
        far += thick * share * share * np.sin(angle) / length
        high += thick * np.cos(angle) / length
    over = np.where(away <= 380.0, 600.0 + np.interp(away, far, high), 0.0)
    np.testing.assert_allclose(terrain.top_nm[terrain.column[0]], np.maximum(over, 500.0), atol=0.05)


STEPS = """
  - {name: wet, rates: {Ti: 120 nm/min, other: 0 nm/min}, for: 2 min}
  - {name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 5 min}
  - {name: clean, strips: [W]}
"""


@pytest.mark.closed_form
def test_all_kinds_of_step_and_the_frame_comes_after_what_takes_no_beam_on_time():
    recipe = "recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 12 min}]}"
    job = line(**{recipe: "recipe:\n  steps:" + STEPS.replace("\n", "\n  ")})
    found = relief_table(job, when=When((0.0, 150.0, 300.0)), section=Cut("y", 500.0), points=400)
    start, middle, end = found.run.frames
    oxide = found.run.terrain.material[found.run.terrain.column[0], 0] == job.column_map.materials.index("Ti")
    bottom = 1800.0
    np.testing.assert_allclose(start.height_nm[0][oxide], bottom - 240.0)
    np.testing.assert_allclose(start.height_nm[0][~oxide], bottom)
    assert middle.height_nm[0][~oxide].max() > bottom - 240.0
    assert end.height_nm[0][~oxide].max() <= 900.0 + 1e-9  # the clean takes the rest of the bar away


@pytest.mark.closed_form
def test_a_covered_region_keeps_its_surface_while_the_clock_runs():
    steps = (
        "recipe: {steps: [{cover: [one], with: silver paint},"
        " {name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 3 min}, {uncover: [one]},"
        " {name: on, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 3 min}]}"
    )
    recipe = "recipe: {steps: [{name: mill, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 12 min}]}"
    regions = "  regions: [{name: one}, {name: other}]\nmill: {gas"
    job = line(**{recipe: steps, "mill: {gas": regions})
    found = relief_table(job, when=When((180.0, 360.0)), section=Cut("y", 500.0), region="one")
    other = relief_table(job, when=When((180.0,)), section=Cut("y", 500.0), region="other")
    assert np.ptp(found.run.frames[0].height_nm) == 0.0
    np.testing.assert_allclose(found.run.frames[1].height_nm, other.run.frames[0].height_nm, atol=0.2)


@pytest.mark.closed_form
def test_an_unpatterned_region_gives_exactly_the_times_of_the_columns():
    text = LINE.replace(
        ",\n       features: [{name: bar, material: BAR, line: {along: y, centre: 1 um, width: 300 nm}}]", ""
    ).replace("incidence: 0 deg", "incidence: 50 deg")
    job = load_job(text.replace("FILL", "SiO2"))
    ensemble = run(job, draws=1)
    for cut in (Cut("y", 500.0), None):
        surfaces = Surfaces(ensemble, 0, cut)
        region, cell = job.column_map.regions[0], job.column_map.cell
        grid = cell_grid(region, cell, 8) if cut is None else section_grid(region, cell, cut, 8)
        terrain = surfaces.terrain(surfaces.layout(grid), ensemble.best_descent)
        passed = evolve(terrain, surfaces.stages(terrain, ensemble.best_descent), end_s=9000.0).passed_s
        flat = [ensemble.best_outcome.reached_s(0, 0, k)[0] for k in (1, 2)]
        np.testing.assert_allclose(passed[..., :2], np.broadcast_to(flat, passed[..., :2].shape), rtol=1e-9)


@pytest.mark.closed_form
def test_reaching_a_layer_is_the_moment_its_share_is_down():
    job = line(**{"for: 12 min": "for: 40 min"})
    found = relief_table(job, when=When(reach="under"), section=Cut("y", 500.0), points=200)
    assert found.run.reached_s is not None
    frame = found.run.frames[-1]
    assert frame.time_s == pytest.approx(found.run.reached_s, rel=1e-12)
    down = (frame.segment[0] >= 1).mean()
    assert 0.95 <= down < 0.96  # the first moment at which 95 % of the points are


@pytest.mark.closed_form
def test_the_clear_share_of_the_goal_and_the_grids_own_error():
    job = line(**{"recipe:": "goal: {layer: level, feature: bar, at: 50 % ± 20 nm, clear: 90 %}\nrecipe:"})
    found = relief_table(job, when=When((300.0, 2400.0)), section=Cut("y", 500.0))
    assert [m.clear_share for m in found.moments] == [0.0, 1.0]
    errors = []
    for points in (80, 160, 320):  # the bar's edges lie between points in all of them, and in half as many
        job = line("SiN PECVD", "SiO2")  # no kink meets a node here, so the height converges with the grid
        row = relief_table(job, when=When((900.0,)), section=Cut("y", 500.0), points=points).rows[0]
        errors.append(row.height_error_nm)
    assert errors[0] > errors[1] > errors[2] > 0.0


WALL = """
stack:
  cell: {x: 4 um, y: 4 um}
  layers:
    - {name: metal, material: none, thickness: 1200 nm,
       features: [{name: bar, material: AlCu, line: {along: y, centre: 2 um, width: 1500 nm},
                   cap: {material: TiN, thickness: 500 nm}}]}
    - {name: floor, material: SiO2, thickness: 900 nm}
    - {name: substrate, material: Si, thickness: 300 um}
mill: {gas: argon, current_density: 0.5 mA/cm2, divergence: 0 deg}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: TILT deg, motion: rotating, for: 60 min}]}
"""


@pytest.mark.closed_form
def test_undercut_is_the_difference_of_the_walls_paces_and_needs_tilt():
    upright = relief_table(load_job(WALL.replace("TILT", "0")), when=When((60.0,)), section=Cut("y", 500.0))
    assert upright.run.undercuts == ()
    job = load_job(WALL.replace("TILT", "45"))
    found = relief_table(job, when=When((40.0,)), section=Cut("y", 500.0), points=400)
    names = job.column_map.materials
    worst = found.run.undercuts[0]
    assert (names[worst.upper], names[worst.lower]) == ("TiN", "AlCu")
    end = found.run.end_s  # the run goes on beyond the moment asked for
    surfaces = Surfaces(found.ensemble, 0, found.cut)
    table = surfaces.stages(found.run.terrain, found.ensemble.best_descent)[0].table
    paces = {name: table.wall_nm_per_s[names.index(name), 0] for name in ("TiN", "AlCu")}
    assert worst.depth_nm <= end * (paces["AlCu"] - paces["TiN"]) * (1 + 1e-9)
    assert worst.depth_nm > 0.5 * end * (paces["AlCu"] - paces["TiN"])  # some of the light is hidden by the next bar


def test_the_line_through_what_decides_is_chosen_and_said():
    job = line(**{"recipe:": "goal: {layer: under}\nrecipe:"})
    found = relief_table(job)
    assert found.cut is not None
    assert found.cut.fixed == "y"
    assert "decide" in found.why_cut


@pytest.mark.parametrize(
    ("more", "says"),
    [
        ({"section": Cut("x", 2500.0)}, "outside the cell"),
        ({"region": "nowhere"}, "no region 'nowhere'"),
        ({"when": When(reach="nothing")}, "no layer 'nothing'"),
        ({"when": When(stop=True)}, "without a goal"),
        ({"section": Cut("x", 500.0), "cell": True}, "cannot both be run"),
    ],
)
def test_what_cannot_be_is_refused(more, says):
    with pytest.raises(UsageError, match=says):
        relief_table(line(), **more)


def test_a_density_a_still_cell_and_a_section_across_the_beam_are_refused_and_grazing_is_warned_of():
    dense = {"features: [": "features: [{name: dust, material: Cu, pattern_density: 10 %}, "}
    with pytest.raises(InputError, match="nobody knows where it stands"):
        relief_table(line(**dense))
    still = line(**{"motion: rotating": "motion: still at 90 deg", "incidence: 0 deg": "incidence: 30 deg"})
    with pytest.raises(InputError, match="only under a rotating sample"):
        relief_table(still, cell=True)
    with pytest.raises(InputError, match=r"section y = 0\.5 um"):
        relief_table(still, section=Cut("y", 500.0))
    relief_table(still, section=Cut("x", 500.0), points=20, when=When((10.0,)))
    with pytest.warns(StackmillWarning, match="beyond 75 deg"):
        relief_table(line(**{"incidence: 0 deg": "incidence: 80 deg"}), points=40, when=When((10.0,)))


@pytest.mark.closed_form
def test_a_coarse_grid_is_told_with_the_one_that_would_do():
    (coarse,) = too_coarse(relief_table(line(), when=When((10.0,)), section=Cut("y", 500.0), points=40))
    name, across, needed = coarse
    assert (name, across, needed) == ("level / bar", 6, 67)
    assert too_coarse(relief_table(line(), when=When((10.0,)), section=Cut("y", 500.0), points=needed)) == []


@pytest.mark.independent
def test_a_beam_from_the_other_side_gives_the_mirrored_section():
    heights = []
    for azimuth in (0, 180):
        job = line(**{"rotating": f"rocking ± 20 deg at {azimuth} deg", "incidence: 0 deg": "incidence: 30 deg"})
        found = relief_table(job, when=When((300.0,)), section=Cut("y", 500.0), points=200)
        heights.append(found.run.frames[0].height_nm[0])
    np.testing.assert_allclose(heights[0], heights[1][::-1], atol=1e-9)
    assert np.abs(heights[0] - heights[0][::-1]).max() > 5.0
