"""What cannot be drawn is found, and what can be is not; gaps that films close are noted."""

from __future__ import annotations

import numpy as np
import pytest
from dies import crowded, die

from stackmill.columns import build, liner_too_thick, outside, overlaps
from stackmill.columns.outlines import overlap, primitive
from stackmill.columns.problems import FilmsTooThick, OutsideCell, Overlapping

LEVEL = "  - name: level\n    material: SiO2\n    thickness: 100 nm\n    features:\n"


def level(*features):
    return die(LEVEL + "\n".join(f"      - {f}" for f in features), cell="{x: 1 um, y: 1 um}")


def dot(name, x, y, diameter=200, material="W", more=""):
    return f"{{name: {name}, material: {material}, via: {{x: {x} nm, y: {y} nm, diameter: {diameter} nm}}{more}}}"


@pytest.mark.closed_form
@pytest.mark.parametrize(
    ("x", "meets"), [(300, True), (399, True), (401, False), (950, True), (801, True), (799, False)]
)
def test_overlaps_are_found_across_the_cell_edge_too(x, meets):
    stack = level(dot("one", 100, 100, 300), dot("other", x, 100, 300, "Cu"))
    assert overlaps(stack) == ((Overlapping("level", "one", "other"),) if meets else ())


@pytest.mark.closed_form
def test_features_of_one_make_may_overlap_and_touching_is_no_overlap():
    assert not overlaps(level(dot("one", 100, 100), dot("other", 200, 100)))
    square = "{{name: {}, material: {}, block: {{x: [{} nm, {} nm], y: [100 nm, 300 nm]}}}}".format
    assert not overlaps(level(square("one", "W", 100, 300), square("other", "Cu", 300, 500)))
    assert overlaps(level(square("one", "W", 100, 300), square("other", "Cu", 299, 500)))
    assert overlaps(level(square("one", "W", 100, 300), dot("other", 350, 200, 120, "Cu")))
    assert not overlaps(level(square("one", "W", 100, 300), dot("other", 342, 342, 118, "Cu")))
    line = "{name: rail, material: Al, line: {along: x, centre: 980 nm, width: 100 nm}}"
    assert overlaps(level(line, dot("other", 500, 60, 120)))


def scattered(count, seed):
    """Features of two makes in random places."""
    at = np.random.default_rng(seed).integers(0, 1000, (count, 2))
    made = []
    for k, (x, y) in enumerate(at.tolist()):
        material, size = ("W", "Cu")[k % 2], 20 + 13 * (k % 9)
        if k % 3 == 0:
            made.append(dot(f"f{k}", x, y, size, material))
        elif k % 3 == 1:
            block = f"block: {{x: [{x - size} nm, {x + 9} nm], y: [{y - 7} nm, {y + size} nm]}}"
            made.append(f"{{name: f{k}, material: {material}, {block}}}")
        elif k < 12:
            line = f"line: {{along: {'xy'[k % 2]}, centre: {x} nm, width: {size} nm}}"
            made.append(f"{{name: f{k}, material: {material}, {line}}}")
    return level(*made)


@pytest.mark.independent
@pytest.mark.parametrize("seed", range(3))
def test_overlaps_are_those_of_every_pair_tried_in_every_cell_around(seed):
    stack = scattered(60, seed)
    features, cell = stack.layers[0].features, (1000.0, 1000.0)
    figures = [primitive(feature.shape, cell) for feature in features]
    expected = set()
    for k, one in enumerate(figures):
        for j, other in enumerate(figures[:k]):
            moved = [other.moved(1000.0 * a, 1000.0 * b) for a in range(-2, 3) for b in range(-2, 3)]
            if features[j].material != features[k].material and any(overlap(one, copy) for copy in moved):
                expected.add((features[j].name, features[k].name))
    assert len(expected) > 20
    assert {(found.feature, found.other) for found in overlaps(stack)} == expected


@pytest.mark.closed_form
def test_features_far_apart_are_told_by_their_boxes_alone(monkeypatch):
    places = [(20 + 40 * a, 20 + 40 * b) for a in range(25) for b in range(25)]
    stack = level(*(dot(f"f{k}", x, y, 30, ("W", "Cu")[k % 2]) for k, (x, y) in enumerate(places)))
    tried = []
    monkeypatch.setattr("stackmill.columns.problems.overlap", lambda *pair: tried.append(pair))
    assert not overlaps(stack)
    assert not tried


@pytest.mark.closed_form
def test_a_centre_outside_the_cell_is_found_and_an_edge_outside_is_not():
    assert outside(level(dot("lost", 1001, 100))) == (OutsideCell("level", "lost"),)
    assert outside(level("{name: lost, material: W, block: {x: [-400 nm, 300 nm], y: [100 nm, 200 nm]}}"))
    assert outside(level("{name: lost, material: W, line: {along: x, centre: -1 nm, width: 100 nm}}"))
    assert not outside(level(dot("rim", 1000, 0)))


@pytest.mark.closed_form
def test_films_that_fill_their_feature_are_found():
    deep = dot(
        "deep", 500, 500, 200, "W", ", liner: {material: TiN, thickness: 60 nm}, cap: {material: TiN, thickness: 45 nm}"
    )
    assert liner_too_thick(level(deep)) == (FilmsTooThick("level", "deep", False, 105.0, 100.0),)
    thin = dot("thin", 500, 500, 100, "W", ", liner: {material: TiN, thickness: 50 nm}")
    assert liner_too_thick(level(thin)) == (FilmsTooThick("level", "thin", True, 100.0, 100.0),)
    fine = dot("fine", 500, 500, 102, "W", ", liner: {material: TiN, thickness: 50 nm}")
    assert not liner_too_thick(level(fine))


@pytest.mark.closed_form
def test_films_close_gaps_narrower_than_twice_their_wall():
    seams = build(crowded()).seams
    apart = 1000 * 2**0.5 * 0.5 - 200 - 150  # from post to corner, across the cell's corner
    assert [(s.layer, s.between) for s in seams] == [
        ("second film", ("post", "block")),
        ("first film", ("post", "corner")),
    ]
    assert seams[1].gap_nm == pytest.approx(apart)
    assert seams[1].in_words() == "die: first film closes the 357 nm gap between post and corner, leaving a seam"


@pytest.mark.closed_form
@pytest.mark.parametrize(("width", "closed"), [(610, 1), (590, 0)])
def test_a_line_faces_its_own_neighbour_in_the_next_cell(width, closed):
    stack = die(
        f"""
  - {{name: film, material: SiN, thickness: 250 nm, coverage: conformal, sidewall: 80 %}}
  - {{name: metal, material: none, thickness: 300 nm, features: [
      {{name: bar, material: Al, line: {{along: y, centre: 100 nm, width: {width} nm}}}}]}}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    seams = build(stack).seams
    assert [s.between for s in seams] == [("bar", "bar")] * closed
