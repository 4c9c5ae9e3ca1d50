"""Centres of columns and distances between them, on plans where both are plain."""

from __future__ import annotations

import dies
import numpy as np
import pytest
from dies import die

from stackmill.columns import build


def between(region, one, other):
    return float(region.edge_distance_nm[region.labels.index(one), region.labels.index(other)])


@pytest.mark.closed_form
def test_centres_and_distances_of_a_two_metal_die():
    array, pad, bare = build(dies.two_metals()).regions
    plug = "bus / plug / strap"
    assert array.centre_nm[array.labels.index(plug)] == pytest.approx([2400, 2400], abs=1.0)
    assert between(array, plug, "bus / plug TiN liner / strap") == pytest.approx(155, abs=1)
    assert between(array, plug, "bus / strap") == pytest.approx(200, abs=1)
    assert between(array, plug, "bus") == pytest.approx(600, abs=1)
    assert between(array, plug, "overcoat slope 1 of 8 / strap") == pytest.approx(800, abs=1)
    assert between(array, "bus", "overcoat slope 1 of 8") == pytest.approx(800, rel=5e-3)
    assert between(array, "bus", "overcoat slope 3 of 8") == pytest.approx(800 + 2 * 52.5, rel=5e-3)
    assert between(array, "pad land", "field") == pytest.approx(400, rel=5e-3)
    assert between(pad, "bus / pad land", "bus") == pytest.approx(400, rel=5e-3)
    assert np.isinf(np.diag(array.edge_distance_nm)).all()
    assert np.isinf(bare.edge_distance_nm).all()


@pytest.mark.closed_form
def test_distances_go_across_the_cell_edge():
    text = """
  - name: level
    material: SiO2
    thickness: 500 nm
    features:
      - {name: left, material: Cu, block: {x: [-50 nm, 250 nm], y: [400 nm, 600 nm]}}
      - {name: right, material: W, block: {x: [600 nm, 800 nm], y: [400 nm, 600 nm]}}
"""
    (region,) = build(die(text, cell="{x: 1 um, y: 1 um}")).regions
    assert between(region, "right", "field") == pytest.approx(100, abs=0.5)
    assert between(region, "right", "left") == pytest.approx(250, abs=1.0)
    assert between(region, "left", "right") == pytest.approx(250 + 100, abs=60)  # anywhere on its middle line
    middle = region.centre_nm[region.labels.index("field")]
    assert abs((middle[1] - 500) % 1000 - 500) < 5  # half-way between the rows of blocks
    assert between(region, "field", "left") == pytest.approx(400, rel=0.01) or between(region, "field", "right") >= 400


@pytest.mark.independent
@pytest.mark.parametrize("name", ["crowded", "stepped"])
def test_distances_are_those_to_the_nearest_raster_point_of_the_other_column(name):
    stack = getattr(dies, name)()
    (region,) = build(stack).regions
    side, size = 600, stack.cell.x
    grid = region.grid(side, side)
    at = (np.arange(side) + 0.5) * size / side
    apart = np.full(region.edge_distance_nm.shape, np.inf)
    for c in range(len(region.area)):
        dx, dy = (np.abs((at - region.centre_nm[c, k] + size / 2) % size - size / 2) for k in (0, 1))
        away = np.hypot(dx[None, :], dy[:, None]).ravel()
        np.minimum.at(apart[c], grid.ravel(), away)
    others = ~np.eye(len(apart), dtype=bool)
    agrees = np.abs(region.edge_distance_nm[others] - apart[others]) < 0.01 * size
    assert agrees.mean() > 0.95  # the rest end in cusps thinner than the raster
