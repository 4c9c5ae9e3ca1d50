"""A real stack as input: the published heights of an open 130 nm process kit (sky130, Apache-2.0).

levels.csv holds the kit's heights and thicknesses as read from its technology file and cross-section script.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from stackmill.jobs import load_job
from stackmill.planning.stops import stop_table

HERE = Path(__file__).parent / "open_stack"


@pytest.fixture(scope="module")
def job():
    return load_job(HERE / "job.yaml")


def heights(region, column, layer):
    """(floor, top) in nm of a layer in a column, None where it is not there."""
    count = region.segments[column]
    inside = np.flatnonzero(region.layer[column, :count] == layer)
    if not inside.size:
        return None
    top = region.top_nm[column] if inside[0] == 0 else region.floor_nm[column, inside[0] - 1]
    return region.floor_nm[column, inside[-1]], top


@pytest.mark.published
def test_every_level_lies_at_its_published_height(job):
    array = job.column_map.regions[0]
    with (HERE / "levels.csv").open(encoding="utf-8") as file:
        published = {row["level"]: row for row in csv.DictReader(file) if row["bottom_um"]}
    assert len(published) == 11
    for level, row in published.items():
        layer = job.column_map.layers.index(level)
        found = [h for c in range(len(array.area)) if (h := heights(array, c, layer))]
        assert found
        for floor, top in found:
            assert floor == pytest.approx(1e3 * float(row["bottom_um"]), abs=1e-6)
            assert top - floor == pytest.approx(1e3 * float(row["thickness_um"]), abs=1e-6)


@pytest.mark.published
def test_the_nitride_lies_600_nm_over_and_far_beside_metal5_and_rounds_its_edge(job):
    array = job.column_map.regions[0]
    metal5_top, floor, nitride = 5371.1 + 1260.0, 5371.1, 600.0
    over, far = (int(array.plan(x, 4000.0 + 1500.0)) for x in (4000.0, 500.0))
    assert array.top_nm[over] == pytest.approx(metal5_top + nitride)
    assert array.top_nm[far] == pytest.approx(floor + nitride)
    # on the slope the top is that of a ball of 600 nm rolled along the metal's top edge, within a class
    x = np.linspace(4800.0, 5400.0, 601)[:-1] + 0.5
    ball = metal5_top + np.sqrt(nitride**2 - (x - 4800.0) ** 2)
    columns = array.plan(x, np.full_like(x, 1500.0))
    assert (array.slope[columns] > 0).all()
    means = {c: ball[columns == c].mean() for c in np.unique(columns)}
    assert len(means) == 8
    for c, mean in means.items():
        assert array.top_nm[c] == pytest.approx(mean, abs=2.0)


@pytest.mark.published
def test_a_job_on_it_runs_and_the_times_are_thickness_over_rate(job):
    table = stop_table(job)
    rows = {(r.region, r.layer): r for r in table.rows if r.region == "pad opening"}
    assert rows["pad opening", "metal5"].time_s == 0.0
    sample = table.ensemble.inputs.best()
    want = 1260.0 / float(sample.rate_nm_per_s(0)[job.column_map.materials.index("Al"), 0])
    assert rows["pad opening", "via4"].time_s == pytest.approx(want, rel=1e-9)
    assert table.window is not None
    assert 0.0 <= table.window.best_chance <= 1.0
