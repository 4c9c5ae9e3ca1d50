"""`flat_ok` held against a surface: a 1-D height field moved by sampled Godunov fluxes, written for this test alone.

h_t + H_m(|h_x|) = 0, H_m the vertical speed of a slope of the material under each point; no shadow, which
`flat_ok` takes account of besides. What is asked: never true where the centre's time is off by more than 2 %.
"""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.jobs import load_job
from stackmill.planning.stops import _flat_until, stop_table
from stackmill.rates.facets import vertical_speed_ratio
from stackmill.rates.yields import angular_shape

JOB = """
stack:
  cell: {{x: {cell} nm, y: {cell} nm}}
  layers:
    - {{name: level, material: {fill}, thickness: {level} nm,
       features: [{{name: bar, material: {bar}, line: {{along: y, centre: {middle} nm, width: {width} nm}}}}]}}
    - {{name: under, material: {fill}, thickness: {under} nm}}
    - {{name: substrate, material: Si, thickness: 300 um}}
mill: {{gas: argon, current_density: 0.5 mA/cm2, divergence: 0 deg}}
recipe: {{steps: [{{name: mill, energy: 1 keV, incidence: {incidence} deg, motion: rotating, for: 1 min}}]}}
"""
SLOPES = np.linspace(0.0, 14.0, 1401)


def centre_times(job, table, points):
    """For each column, when its centre gets to the top of `under` and of `substrate`, by the surface."""
    region, (width, _) = job.column_map.regions[0], job.column_map.cell
    materials = list(job.column_map.materials)
    flat = table.ensemble.inputs.best().rate_nm_per_s(0)[:, 0]
    step = job.recipe.steps[0]
    speed = np.stack(
        [
            flat[m] * vertical_speed_ratio(angular_shape(job.materials[name], energy_ev=1000.0), step, SLOPES)[0]
            for m, name in enumerate(materials)
        ]
    )
    dx = width / points
    x = (np.arange(points) + 0.5) * dx
    column = region.plan(x, np.full_like(x, 1.0))
    centres = [int(np.argmin(np.abs(x - region.centre_nm[c, 0]))) for c in range(len(region.area))]
    height = region.top_nm[column].copy()
    dt = 0.4 * dx / np.abs(np.gradient(speed, SLOPES, axis=1)).max()
    levels = {layer: region.top_nm[0] - depth for layer, depth in zip(("under", "substrate"), depths(job), strict=True)}
    reached, time, samples = {}, 0.0, np.linspace(0.0, 1.0, 17)
    while len(reached) < 2 * len(centres):
        back, ahead = (height - np.roll(height, 1)) / dx, (np.roll(height, -1) - height) / dx
        between = np.abs(np.minimum(back, ahead)[:, None] + np.abs(ahead - back)[:, None] * samples)
        segment = np.argmax(region.floor_nm[column] < height[:, None] - 1e-9, axis=1)
        of_point = region.material[column, segment]
        rate = np.empty((points, len(samples)))
        for m in range(len(materials)):
            here = of_point == m
            rate[here] = np.interp(between[here], SLOPES, speed[m])
        flux = np.where(back <= ahead, rate.min(axis=1), rate.max(axis=1))
        height, before = height - dt * flux, height
        for c, k in enumerate(centres):
            for layer, level in levels.items():
                if (c, layer) not in reached and height[k] <= level:
                    reached[c, layer] = time + dt * (before[k] - level) / (before[k] - height[k])
        time += dt
    return reached


def depths(job):
    level, under = job.stack.layers[:2]
    return level.thickness.value, level.thickness.value + under.thickness.value


def check(points=100, margin=1.0, **case):
    job = load_job(JOB.format(middle=case["cell"] / 2, **case))
    table = stop_table(job, draws=16, flat=True)
    reached = centre_times(job, table, points)
    until = _flat_until(table.ensemble)[0]
    trusted = 0
    for row in table.rows:
        if row.layer != "level" and row.flat_ok and row.time_s <= margin * until[row.column_number]:
            trusted += 1
            assert row.time_s == pytest.approx(reached[row.column_number, row.layer], rel=0.02), (case, row)
    return trusted


@pytest.mark.independent
@pytest.mark.parametrize(
    ("case", "some_trusted"),
    [
        ({"bar": "Ti", "fill": "SiO2", "incidence": 45, "cell": 800, "width": 200, "level": 300, "under": 500}, True),
        ({"bar": "W", "fill": "SiO2", "incidence": 0, "cell": 600, "width": 160, "level": 250, "under": 300}, True),
        ({"bar": "Cu", "fill": "W", "incidence": 0, "cell": 600, "width": 300, "level": 200, "under": 200}, True),
    ],
)
def test_a_trusted_time_is_within_two_per_cent_of_the_surface(case, some_trusted):
    assert (check(**case) > 0) == some_trusted


@pytest.mark.slow
@pytest.mark.independent
@pytest.mark.parametrize("seed", range(100))
def test_a_trusted_time_is_within_two_per_cent_of_the_surface_on_random_sections(seed):
    random = np.random.default_rng(seed)
    bar, fill = random.permutation(["W", "SiO2", "AlCu", "Ti", "SiN PECVD", "Cu", "Ta"])[:2]
    check(
        points=160,
        margin=0.85,  # the first-order surface above blurs a facet's last few cells on its way to the centre
        bar=bar,
        fill=fill,
        incidence=int(random.choice([0, 20, 45, 60])),
        cell=int(random.uniform(500, 1500)),
        width=int(random.uniform(120, 400)),
        level=int(random.uniform(100, 500)),
        under=int(random.uniform(100, 500)),
    )
