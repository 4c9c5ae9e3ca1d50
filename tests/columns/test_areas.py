"""Area shares of columns, against formulas and against points counted on a raster."""

from __future__ import annotations

import dies
import numpy as np
import pytest
from dies import die, two_metals
from scipy.integrate import quad

from stackmill.columns import build

CELL = 4800.0**2
GOOD_TO = 1e-5


def shares(region):
    return {region.label(c): float(region.area[c]) for c in range(len(region.area))}


@pytest.mark.closed_form
def test_disc_ring_and_crossing_lines_of_a_two_metal_die():
    found = shares(build(two_metals()).regions[0])
    disc, outer, inner = (np.pi * r**2 / CELL for r in (200.0, 185.0, 155.0))
    assert found["bus / plug / strap"] == pytest.approx(inner, abs=GOOD_TO)
    assert found["bus / plug TiN liner / strap"] == pytest.approx(outer - inner, abs=GOOD_TO)
    assert found["bus / plug Ti liner / strap"] == pytest.approx(disc - outer, abs=GOOD_TO)
    assert found["bus / strap"] == pytest.approx(1600 * 1200 / CELL - disc, abs=GOOD_TO)
    assert found["bus"] == pytest.approx(1600 * 3600 / CELL, abs=1e-12)
    assert found["pad land"] == pytest.approx(800 * 800 / CELL, abs=1e-12)
    for k in range(1, 9):
        one_class = 2 * 420.0 / 8
        assert found[f"overcoat slope {k} of 8"] == pytest.approx(one_class * 3600 / CELL, abs=1e-9)
        assert found[f"overcoat slope {k} of 8 / strap"] == pytest.approx(one_class * 1200 / CELL, abs=1e-9)
    assert found["strap"] == pytest.approx((4800 - 1600 - 840) * 1200 / CELL, abs=1e-9)


ONE_LAYER = """
  - name: level
    material: SiO2
    thickness: 500 nm
    features:
"""


LINER_30, LINER_40, LINER_50 = (f"liner: {{material: Ta, thickness: {t} nm}}}}" for t in (30, 40, 50))


def level(*features, cell="{x: 1 um, y: 1 um}"):
    return die(ONE_LAYER + "\n".join(f"      - {f}" for f in features), cell=cell)


@pytest.mark.closed_form
@pytest.mark.parametrize("x", [0.0, 130.0, 500.0, 1000.0])
def test_a_disc_across_the_cell_edge_keeps_its_area(x):
    (region,) = build(level(f"{{name: dot, material: W, via: {{x: {x} nm, y: 40 nm, diameter: 620 nm}}}}")).regions
    assert shares(region)["dot"] == pytest.approx(np.pi * 0.31**2, abs=GOOD_TO)


@pytest.mark.closed_form
def test_two_discs_merge_into_a_lens_less_union():
    (region,) = build(
        level(
            "{name: left, material: W, via: {x: 400 nm, y: 500 nm, diameter: 400 nm}}",
            "{name: right, material: W, via: {x: 600 nm, y: 500 nm, diameter: 400 nm}}",
        )
    ).regions
    r, apart = 0.2, 0.2
    lens = 2 * r**2 * np.arccos(apart / (2 * r)) - apart / 2 * np.sqrt(4 * r**2 - apart**2)
    found = shares(region)
    assert found["left"] == pytest.approx(np.pi * r**2, abs=GOOD_TO)
    assert found["right"] == pytest.approx(np.pi * r**2 - lens, abs=GOOD_TO)


@pytest.mark.closed_form
def test_merged_lines_have_liners_along_their_common_outline_only():
    (region,) = build(
        level(
            "{name: up, material: Cu, line: {along: y, centre: 500 nm, width: 300 nm}, " + LINER_50,
            "{name: across, material: Cu, line: {along: x, centre: 500 nm, width: 200 nm}, " + LINER_50,
        )
    ).regions
    found = shares(region)
    liner = found["up liner"] + found["across liner"]
    sides = 4 * 50 * (1000 - 200) / 2 + 4 * 50 * (1000 - 300) / 2
    reflex_corners = 4 * np.pi / 4 * 50**2  # a quarter disc of liner within the metal at each
    assert liner * 1e6 == pytest.approx(sides + reflex_corners, abs=GOOD_TO * 1e6)
    assert sum(found.values()) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.closed_form
def test_a_block_that_spans_the_cell_has_no_walls_across_the_seam():
    (region,) = build(
        level("{name: band, material: Cu, block: {x: [200 nm, 1200 nm], y: [300 nm, 700 nm]}, " + LINER_30)
    ).regions
    assert shares(region)["band liner"] == pytest.approx(2 * 30 / 1000, abs=1e-9)


@pytest.mark.closed_form
def test_touching_blocks_of_one_make_have_no_wall_between_them():
    (region,) = build(
        level(
            "{name: west, material: Cu, block: {x: [100 nm, 500 nm], y: [200 nm, 600 nm]}, " + LINER_40,
            "{name: east, material: Cu, block: {x: [500 nm, 800 nm], y: [200 nm, 600 nm]}, " + LINER_40,
        )
    ).regions
    found = shares(region)
    assert found["west"] + found["east"] == pytest.approx((0.7 - 0.08) * (0.4 - 0.08), abs=1e-9)


@pytest.mark.independent
def test_disc_half_under_a_line_against_quadrature():
    stack = die(
        """
  - {name: upper, material: SiO2, thickness: 300 nm, features: [
      {name: bar, material: Al, line: {along: y, centre: 430 nm, width: 200 nm}}]}
  - {name: lower, material: SiO2, thickness: 300 nm, features: [
      {name: dot, material: W, via: {x: 500 nm, y: 480 nm, diameter: 360 nm}}]}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    (region,) = build(stack).regions
    chord = quad(lambda x: 2 * np.sqrt(max(0.18**2 - (x - 0.5) ** 2, 0.0)), 0.33, 0.53, points=[0.5])[0]
    assert shares(region)["bar / dot"] == pytest.approx(chord, abs=GOOD_TO)
    assert shares(region)["dot"] == pytest.approx(np.pi * 0.18**2 - chord, abs=GOOD_TO)


@pytest.mark.independent
@pytest.mark.parametrize("name", ["two_metals", "crowded", "stepped", "buried"])
def test_areas_agree_with_points_counted_on_a_raster(name):
    for region in build(getattr(dies, name)()).regions:
        side = 700
        counted = np.bincount(region.grid(side, side).ravel(), minlength=len(region.area)) / side**2
        assert np.abs(counted - region.area).max() < 2.5 / side  # borders of about a cell's edge each


@pytest.mark.independent
def test_rings_of_merged_discs_where_their_inner_edges_only_touch():
    (region,) = build(
        level(
            "{name: a, material: W, via: {x: 300 nm, y: 0 nm, diameter: 120 nm}, " + LINER_30,
            "{name: b, material: W, via: {x: 401 nm, y: 0 nm, diameter: 120 nm}, " + LINER_30,
        )
    ).regions
    counted = np.bincount(region.grid(2000, 2000).ravel(), minlength=len(region.area)) / 2000**2
    assert region.area == pytest.approx(counted, abs=1e-5)


@pytest.mark.closed_form
def test_labels_name_the_layer_only_where_they_would_agree_otherwise():
    stack = die(
        """
  - {name: upper, material: SiO2, thickness: 300 nm, features: [
      {name: dot, material: W, via: {x: 300 nm, y: 300 nm, diameter: 200 nm}}]}
  - {name: lower, material: SiO2, thickness: 300 nm, features: [
      {name: dot, material: W, via: {x: 700 nm, y: 700 nm, diameter: 220 nm}}]}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    (region,) = build(stack).regions
    assert region.labels == ("field", "lower dot", "upper dot")
