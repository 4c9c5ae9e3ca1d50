"""Pattern densities: shares of area that multiply, in columns that have no place."""

from __future__ import annotations

import numpy as np
import pytest
from dies import die

from stackmill.columns import PARTS, build

FILMS = "cap: {material: TiN, thickness: 30 nm}, liner: {material: Ta, thickness: 20 nm}"


def filled(*, upper="20 %", lower="30 %", regions=""):
    dense = f"{{name: dense, material: Cu, pattern_density: {lower}, {FILMS}}}"
    return die(
        f"""
  - {{name: upper, material: SiO2, thickness: 300 nm, features: [
      {{name: fill, material: AlCu, pattern_density: {upper}}}]}}
  - {{name: lower, material: SiO2, thickness: 200 nm, features: [
      {{name: bar, material: W, line: {{along: y, centre: 500 nm, width: 250 nm}}}}, {dense}]}}
""",
        cell="{x: 1 um, y: 1 um}",
        regions=regions,
    )


@pytest.mark.closed_form
def test_shares_multiply_and_leave_drawn_features_alone():
    (region,) = build(filled()).regions
    area = dict(zip(region.labels, region.area.tolist(), strict=True))
    assert area == pytest.approx(
        {
            "field": 0.75 * 0.8 * 0.7,
            "fill": 0.75 * 0.2 * 0.7,
            "dense": 0.75 * 0.8 * 0.3,
            "fill / dense": 0.75 * 0.2 * 0.3,
            "bar": 0.25 * 0.8,
            "fill / bar": 0.25 * 0.2,
        },
        abs=1e-9,
    )
    assert np.all(np.diff(region.area) <= 0.0)


@pytest.mark.closed_form
def test_films_are_carved_but_for_the_liners_sides():
    found = build(filled())
    (region,) = found.regions
    c = region.labels.index("dense")
    rows = [(found.materials[region.material[c, s]], PARTS[region.part[c, s]]) for s in range(region.segments[c])]
    assert rows == [("SiO2", "fill"), ("TiN", "cap"), ("Cu", "core"), ("Ta", "liner"), ("Si", "fill")]
    assert region.thickness_nm[c, :4].tolist() == [300.0, 30.0, 150.0, 20.0]
    best = np.array([i.thickness.value for i in found.inputs])
    assert region.dthickness[c] @ best == pytest.approx(region.thickness_nm[c])
    assert not any("liner" in label for label in region.labels)


@pytest.mark.closed_form
def test_such_columns_have_no_place_and_the_plan_shows_those_without():
    (region,) = build(filled()).regions
    placeless = {label for label, no in zip(region.labels, region.placeless, strict=True) if no}
    assert placeless == {"fill", "dense", "fill / dense", "fill / bar"}
    assert {region.labels[c] for c in np.unique(region.grid(40, 40))} == {"field", "bar"}
    at = region.labels.index
    assert region.labels[int(region.plan(500.0, 100.0))] == "bar"
    assert region.centre_nm[at("fill / bar")].tolist() == region.centre_nm[at("bar")].tolist()
    near = region.edge_distance_nm
    assert 0.0 < near[at("field"), at("fill / dense")] < 1e-3
    assert 0.0 < near[at("fill / bar"), at("bar")] < 1e-3
    assert near[at("fill"), at("bar")] == near[at("field"), at("fill / bar")] == pytest.approx(375.0, rel=1e-3)
    assert np.isinf(np.diag(near)).all()


@pytest.mark.closed_form
def test_regions_may_lack_them_or_be_solid():
    regions = """
  - {name: plain, absent: {features_of: [upper, lower]}}
  - {name: full, solid: {upper: fill}}
"""
    plain, full = build(filled(regions=regions)).regions
    assert plain.labels == ("field",)
    assert not plain.placeless.any()
    assert dict(zip(full.labels, full.area.tolist(), strict=True)) == pytest.approx(
        {"fill": 0.75 * 0.7, "fill / dense": 0.75 * 0.3, "fill / bar": 0.25}
    )


@pytest.mark.closed_form
def test_six_such_layers_make_sixty_four_columns_of_one():
    layers = "".join(
        f"  - {{name: level {k}, material: SiO2, thickness: 300 nm, features: [{{name: fill {k}, material: Cu,"
        f" pattern_density: 50 %}}]}}\n"
        for k in range(6)
    )
    (region,) = build(die("\n" + layers)).regions
    assert len(region.area) == 64
    assert region.area == pytest.approx(np.full(64, 1 / 64))
    assert len(set(region.labels)) == 64


@pytest.mark.closed_form
def test_a_stack_of_densities_alone_needs_no_cell():
    from stackmill.documents import read_stack

    text = (
        "layers: [{name: level, material: SiO2, thickness: 300 nm, features:"
        " [{name: fill, material: Cu, pattern_density: 40 %}]}, {name: substrate, material: Si, thickness: 5 um}]"
    )
    (region,) = build(read_stack(text).model).regions
    assert region.area.tolist() == pytest.approx([0.6, 0.4])
