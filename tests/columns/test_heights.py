"""Where segments lie: by hand on flat ground, against a rolled raster over conformal steps."""

from __future__ import annotations

import dies
import numpy as np
import pytest
import raster
from dies import die

from stackmill.columns import PARTS, build
from stackmill.columns.rise import OnSlopeError


def column(region, label):
    return region.labels.index(label)


def segments(column_map, region, label):
    """(layer, part, thickness) from the top down."""
    c = column(region, label)
    return [
        (column_map.layers[region.layer[c, k]], PARTS[region.part[c, k]], float(region.thickness_nm[c, k]))
        for k in range(region.segments[c])
    ]


@pytest.mark.closed_form
def test_films_are_carved_inside_a_feature_bottom_beats_sides_beats_top():
    stack = die(
        """
  - name: level
    material: SiO2
    thickness: 500 nm
    features:
      - {name: bar, material: Cu, line: {along: y, centre: 500 nm, width: 400 nm},
         cap: {material: Co, thickness: 20 nm},
         base: {material: TiN, thickness: 30 nm},
         liner: [{material: TaN, thickness: 10 nm}, {material: Ta, thickness: 15 nm}]}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    found = build(stack)
    (region,) = found.regions
    below = ("substrate", "fill", 5000.0)
    assert segments(found, region, "bar") == [
        ("level", "cap", 20.0),
        ("level", "core", 425.0),
        ("level", "liner", 15.0),
        ("level", "liner", 10.0),
        ("level", "base", 30.0),
        below,
    ]
    assert segments(found, region, "bar Ta liner") == [
        ("level", "liner", 460.0),
        ("level", "liner", 10.0),
        ("level", "base", 30.0),
        below,
    ]
    assert segments(found, region, "bar TaN liner") == [("level", "liner", 470.0), ("level", "base", 30.0), below]
    assert segments(found, region, "field") == [("level", "fill", 500.0), below]
    assert found.materials == ("Co", "TaN", "Ta", "TiN", "Cu", "SiO2", "Si")


@pytest.mark.closed_form
def test_planarised_layers_end_flat_over_the_highest_point_of_their_region():
    found = build(dies.buried())
    (region,) = found.regions
    highest = 250.0 + 200.0 + 300.0
    assert np.allclose(region.top_nm, highest)
    assert segments(found, region, "field")[0] == ("top oxide", "fill", 300.0 + 250.0)
    assert segments(found, region, "gate")[:2] == [("top oxide", "fill", 300.0), ("liner film", "fill", 200.0)]


@pytest.mark.closed_form
def test_regions_lose_layers_and_features_and_things_above_rest_on_what_is_below():
    found = build(dies.two_metals())
    array, pad, bare = found.regions
    assert array.top_nm[column(array, "bus")] == pytest.approx(800 + 600 + 700 + 900 + 600)
    assert array.top_nm[column(array, "field")] == pytest.approx(800 + 600 + 700 + 600)
    assert segments(found, pad, "bus")[:3] == [
        ("metal 2", "cap", 60.0),
        ("metal 2", "core", 760.0),
        ("metal 2", "base", 80.0),
    ]
    assert pad.top_nm == pytest.approx(800 + 600 + 700 + 900)
    assert segments(found, bare, "field") == [
        ("overcoat", "fill", 600.0),
        ("via 1", "fill", 700.0),
        ("metal 1", "fill", 600.0),
        ("oxide", "fill", 800.0),
        ("substrate", "fill", 5000.0),
    ]


@pytest.mark.closed_form
def test_a_solid_feature_has_no_side_walls_but_a_liner_at_its_bottom():
    stack = die(
        """
  - name: level
    material: SiO2
    thickness: 500 nm
    features:
      - {name: bar, material: Cu, line: {along: y, centre: 500 nm, width: 400 nm},
         liner: {material: Ta, thickness: 15 nm}}
      - {name: dot, material: W, via: {x: 100 nm, y: 100 nm, diameter: 50 nm}}
""",
        cell="{x: 1 um, y: 1 um}",
        regions="  - {name: pad, solid: {level: bar}}\n",
    )
    found = build(stack)
    (region,) = found.regions
    assert len(region.area) == 1
    assert segments(found, region, "bar")[:2] == [("level", "core", 485.0), ("level", "liner", 15.0)]


@pytest.mark.closed_form
def test_a_stack_without_a_cell_is_one_column():
    found = build(die("  - {name: film, material: SiN, thickness: 70 nm, coverage: conformal}", cell="null"))
    (region,) = found.regions
    assert region.labels == ("field",)
    assert region.top_nm.tolist() == [70.0]
    assert region.floor_nm.tolist() == [[0.0, -5000.0]]
    assert np.isinf(region.edge_distance_nm).all()


@pytest.mark.closed_form
def test_classes_on_a_straight_slope_are_means_of_a_quarter_ellipse():
    region = build(dies.two_metals()).regions[0]
    u = np.linspace(0.0, 1.0, 9)
    area_under = (u * np.sqrt(1 - u**2) + np.arcsin(u)) / 2
    mean = 8 * np.diff(area_under)
    for k in range(8):
        c = column(region, f"overcoat slope {k + 1} of 8")
        assert region.top_nm[c] == pytest.approx(800 + 600 + 700 + 900 + 600 * mean[k], abs=0.02)
        assert region.slope[c] == k + 1


def painted(name, step, region=0):
    stack = getattr(dies, name)()
    return stack, raster.paint(stack, stack.regions[region], step), build(stack).regions[region]


@pytest.mark.independent
@pytest.mark.parametrize(
    ("name", "step"), [("crowded", 20.0), ("stepped", 20.0), ("buried", 20.0), ("two_metals", 40.0)]
)
def test_flat_tops_are_those_of_a_rolled_raster(name, step):
    _, painted_die, region = painted(name, step)
    columns = region.plan(painted_die.x[None, :], painted_die.y)
    flat = region.slope[columns] == 0
    assert flat.any()
    assert np.abs(painted_die.top - region.top_nm[columns])[flat].max() < 1e-6


@pytest.mark.independent
def test_slopes_from_straight_walls_and_corners_are_those_of_a_rolled_raster():
    stack = dies.stepped()
    (region,) = build(stack).regions
    painted_die = raster.paint(stack, stack.regions[0], 10.0, shift=0.0)
    inside = (painted_die.x[None, :] + 1e-3, painted_die.y + 1e-3)  # each point stands for the square up and right
    columns = region.plan(*inside)
    for c in np.flatnonzero(region.slope > 0):
        tops = painted_die.top[columns == c]
        steepest = np.ptp(tops)  # a class is about two points wide: sampling errs by part of its own fall
        assert abs(tops.mean() - region.top_nm[c]) < 0.5 * steepest + 1.0, region.label(c)
    everywhere = painted_die.top.mean() - region.area @ region.top_nm
    assert abs(everywhere) < 0.3


@pytest.mark.independent
def test_slopes_from_round_walls_approach_those_of_a_rolled_raster():
    stack = dies.crowded()
    (region,) = build(stack).regions
    errors = []
    for step in (20.0, 5.0):
        top = raster.paint(stack, stack.regions[0], step).top
        errors.append(abs(float(top.mean() - region.area @ region.top_nm)))
    assert errors[1] < 0.5 * errors[0]
    assert errors[1] < 2.5


@pytest.mark.independent
@pytest.mark.parametrize(("name", "region"), [("crowded", 0), ("buried", 0), ("two_metals", 0), ("two_metals", 1)])
def test_sequences_and_thicknesses_at_random_points_are_those_painted(name, region):
    stack, painted_die, found = painted(name, 20.0, region)
    column_map = build(stack)
    random, wrong = np.random.default_rng(7), 0
    for _ in range(400):
        row, col = random.integers(painted_die.y.size), random.integers(painted_die.x.size)
        c = int(found.plan(painted_die.x[col], painted_die.y[row, 0]))
        k = found.segments[c]
        names = [column_map.features[f][1] if f >= 0 else None for f in found.feature[c, :k]]
        ours = [
            (column_map.layers[i], n, PARTS[p])
            for i, n, p in zip(found.layer[c, :k], names, found.part[c, :k], strict=True)
        ]
        theirs = raster.sequence(painted_die, stack, row, col)
        same = ours == [s[:3] for s in theirs]
        if same and found.slope[c] == 0:
            same = np.allclose(found.thickness_nm[c, :k], [s[3] for s in theirs], atol=1e-6)
        wrong += not same
    assert wrong <= 8  # only where the raster blurs a film thinner than its step


@pytest.mark.closed_form
def test_a_feature_without_fill_on_a_slope_is_refused_and_beside_it_is_not():
    text = """
  - {{name: second, material: SiN, thickness: 200 nm, coverage: conformal}}
  - {{name: metal 2, material: none, thickness: 300 nm, features: [
      {{name: upper, material: Al, line: {{along: y, centre: {centre} nm, width: 300 nm}}}}]}}
  - {{name: first, material: SiO2, thickness: 200 nm, coverage: conformal}}
  - {{name: metal 1, material: none, thickness: 400 nm, features: [
      {{name: lower, material: Al, line: {{along: y, centre: 1 um, width: 600 nm}}}}]}}
"""
    with pytest.raises(OnSlopeError) as refused:
        build(die(text.format(centre=1300), cell="{x: 3 um, y: 1 um}"))
    assert (refused.value.layer, refused.value.feature) == ("metal 2", "upper")
    (region,) = build(die(text.format(centre=1000), cell="{x: 3 um, y: 1 um}")).regions
    assert region.top_nm.max() == pytest.approx(400 + 200 + 300 + 200)
