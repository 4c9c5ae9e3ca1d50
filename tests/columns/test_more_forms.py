"""Heights instead of thicknesses, features through several layers, layers level over the die, the scale's error."""

from __future__ import annotations

import numpy as np
import pytest
from dies import TWO_METALS, TWO_METALS_REGIONS, die

from stackmill.columns import build, liner_too_thick, overlaps
from stackmill.documents.stack import Stack
from stackmill.units import Measure

TOPS_NM = {"overcoat": 3600, "metal 2": 3000, "via 1": 2100, "metal 1": 1400, "oxide": 800}


def with_tops(*, moved=None, **sd_nm):
    text = TWO_METALS
    for name, top in {**TOPS_NM, **(moved or {})}.items():
        before, after = text.split(name, 1)
        thickness = after[after.index("thickness:") :].split(" nm", 1)[0] + " nm"
        text = before + name + after.replace(thickness, f"top: {top} nm ± {sd_nm.get(name, 0) or 1} nm", 1)
    return die(text, regions=TWO_METALS_REGIONS)


def by_thickness():
    return die(TWO_METALS, regions=TWO_METALS_REGIONS)


@pytest.mark.independent
def test_tops_make_the_same_die_as_the_thicknesses_between_them():
    tops, plain = build(with_tops()), build(by_thickness())
    for one, other in zip(tops.regions, plain.regions, strict=True):
        assert one.labels == other.labels
        for key in ("material", "layer", "feature", "part", "area"):
            assert np.array_equal(getattr(one, key), getattr(other, key))
        for key in ("floor_nm", "thickness_nm", "top_nm"):
            assert getattr(one, key) == pytest.approx(getattr(other, key), abs=1e-9)


@pytest.mark.closed_form
def test_tops_are_the_inputs_and_heights_are_sums_of_them():
    found = build(with_tops(**{"metal 2": 40}))
    named = {i.name: i for i in found.inputs}
    assert named["metal 2 top"].is_height
    assert (named["metal 2 top"].thickness.value, named["metal 2 top"].thickness.sd) == (3000.0, 40.0)
    assert not named["substrate"].is_height
    assert not named["metal 2 / bus / cap"].is_height
    best = np.array([i.thickness.value for i in found.inputs])
    for region in found.regions:
        assert region.dtop_dthickness @ best == pytest.approx(region.top_nm, abs=1e-9)
        assert region.dfloor_dthickness @ best == pytest.approx(region.floor_nm, abs=1e-9)
        assert region.dthickness @ best == pytest.approx(region.thickness_nm, abs=1e-9)


@pytest.mark.closed_form
def test_a_height_moves_one_surface_and_the_layers_at_its_sides_against_each_other():
    found = build(with_tops())
    names = [i.name for i in found.inputs]
    field = found.regions[2]  # flat layers only
    metal_1, via_1 = names.index("metal 1 top"), names.index("via 1 top")
    at = {found.layers[layer]: s for s, layer in enumerate(field.layer[0, : field.segments[0]])}
    assert field.dfloor_dthickness[0, at["via 1"]].tolist() == np.eye(len(names))[metal_1].tolist()
    assert field.dthickness[0, at["via 1"], [metal_1, via_1]].tolist() == [-1.0, 1.0]
    assert field.dthickness[0, at["metal 1"], metal_1] == 1.0
    assert field.dthickness[0, :, metal_1].sum() == 0.0


@pytest.mark.independent
@pytest.mark.parametrize("name", ["overcoat", "metal 2", "via 1", "metal 1", "oxide"])
def test_derivatives_to_heights_are_finite_differences(name):
    base = build(with_tops())
    number = [i.name for i in base.inputs].index(f"{name} top")
    low, high = (build(with_tops(moved={name: TOPS_NM[name] + step})) for step in (-0.5, 0.5))
    for one, less, more in zip(base.regions, low.regions, high.regions, strict=True):
        at = [[other.labels.index(label) for label in one.labels] for other in (less, more)]  # equal areas swap
        for key, derivative in (("top_nm", "dtop_dthickness"), ("thickness_nm", "dthickness")):
            difference = getattr(more, key)[at[1]] - getattr(less, key)[at[0]]
            assert getattr(one, derivative)[..., number] == pytest.approx(difference, abs=1e-6)


@pytest.mark.closed_form
def test_the_sd_shown_for_a_thickness_adds_both_tops_in_squares():
    stack = with_tops(**{"metal 2": 40, "via 1": 30})
    metal = stack.layer("metal 2")
    assert metal.thickness.value == 900.0
    assert metal.thickness.sd == pytest.approx(50.0)
    assert stack.layer("substrate").thickness.value == 5000.0


# --- through several layers -----------------------------------------------------------------------------------

FILMS = (
    "cap: {material: Co, thickness: 40 nm}, base: {material: Ru, thickness: 120 nm},"
    " liner: [{material: Ta, thickness: 20 nm}, {material: TiN, thickness: 30 nm}]"
)
POST = "{name: post, material: W, via: {x: 300 nm, y: 300 nm, diameter: 280 nm}, " + FILMS
LINE = "{name: bar, material: Al, line: {along: y, centre: 800 nm, width: 200 nm}}"


def spanning(home="lower", through="[upper, lower]", extra="", regions=""):
    post = POST + f", through: {through}}}"
    here = {name: (post if name == home else "") for name in ("upper", "lower")}
    layers = f"""
  - {{name: lid, material: SiN, thickness: 100 nm}}
  - {{name: upper, material: SiO2, thickness: 350 nm, features: [{", ".join(filter(None, [LINE, here["upper"]]))}]}}
  - {{name: lower, material: SiO2, thickness: 250 nm, features: [{", ".join(filter(None, [extra, here["lower"]]))}]}}
"""
    return die(layers, cell="{x: 1 um, y: 1 um}", regions=regions)


def one_layer():
    layers = f"""
  - {{name: lid, material: SiN, thickness: 100 nm}}
  - {{name: both, material: SiO2, thickness: 600 nm, features: [{POST}}}]}}
"""
    return die(layers, cell="{x: 1 um, y: 1 um}")


def merged(found, region, column):
    """Material and thickness from the top down, equal neighbours together."""
    pieces = []
    for s in range(region.segments[column]):
        material, part = found.materials[region.material[column, s]], int(region.part[column, s])
        if pieces and pieces[-1][:2] == [material, part]:
            pieces[-1][2] += region.thickness_nm[column, s]
        else:
            pieces.append([material, part, float(region.thickness_nm[column, s])])
    return pieces


@pytest.mark.independent
@pytest.mark.parametrize("home", ["upper", "lower"])
def test_a_feature_through_two_layers_is_carved_like_one_in_a_layer_as_thick_as_both(home):
    two, one = build(spanning(home)), build(one_layer())
    (region,), (whole,) = two.regions, one.regions
    for label in ("post", "post Ta liner", "post TiN liner"):
        here, there = region.labels.index(label), whole.labels.index(label)
        assert region.area[here] == pytest.approx(whole.area[there], abs=1e-9)
        expected = merged(one, whole, there)
        for (material, part, thick), (m, p, t) in zip(merged(two, region, here), expected, strict=True):
            assert (material, part) == (m, p)
            assert thick == pytest.approx(t, abs=1e-9)


@pytest.mark.closed_form
def test_its_pieces_end_where_layers_meet_and_follow_their_thicknesses():
    found = build(spanning())
    (region,) = found.regions
    c = region.labels.index("post")
    rows = [
        (found.layers[region.layer[c, s]], found.materials[region.material[c, s]], region.thickness_nm[c, s])
        for s in range(region.segments[c])
    ]
    assert rows == [
        ("lid", "SiN", pytest.approx(100)),
        ("upper", "Co", pytest.approx(40)),
        ("upper", "W", pytest.approx(310)),
        ("lower", "W", pytest.approx(80)),
        ("lower", "TiN", pytest.approx(30)),
        ("lower", "Ta", pytest.approx(20)),
        ("lower", "Ru", pytest.approx(120)),
        ("substrate", "Si", pytest.approx(5000)),
    ]
    names = [i.name for i in found.inputs]
    assert names.count("lower / post / cap") == 1
    upper, lower = names.index("upper"), names.index("lower")
    assert region.dthickness[c, 2:4][:, [upper, lower]].tolist() == [[1.0, 0.0], [0.0, 1.0]]
    assert set(region.feature[c, 1:7].tolist()) == {region.feature[c, 1]}
    assert found.features[region.feature[c, 1]] == (2, "post")


@pytest.mark.closed_form
def test_films_thicker_than_the_lowest_layer_reach_into_the_next():
    stack = die(
        """
  - {name: upper, material: SiO2, thickness: 300 nm}
  - {name: lower, material: SiO2, thickness: 50 nm, features: [{name: post, material: W,
     via: {x: 500 nm, y: 500 nm, diameter: 300 nm}, base: {material: Ru, thickness: 120 nm}, through: [upper, lower]}]}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    found = build(stack)
    (region,) = found.regions
    c = region.labels.index("post")
    assert region.thickness_nm[c, :3] == pytest.approx([230.0, 70.0, 50.0])
    assert [found.layers[k] for k in region.layer[c, :3]] == ["upper", "upper", "lower"]


@pytest.mark.closed_form
def test_where_a_layer_is_absent_solid_or_without_features():
    regions = """
  - {name: whole}
  - {name: low, absent: {layers: [upper]}}
  - {name: plain, absent: {features_of: [lower]}}
  - {name: no bars, absent: {features_of: [upper]}}
  - {name: full, solid: {lower: post}}
"""
    found = build(spanning(regions=regions))
    whole, low, plain, no_bars, full = found.regions
    assert sorted(whole.labels) == ["bar", "field", "post", "post Ta liner", "post TiN liner"]
    assert sorted(low.labels) == ["field", "post", "post Ta liner", "post TiN liner"]
    c = low.labels.index("post")
    assert merged(found, low, c)[1:3] == [["Co", 2, pytest.approx(40)], ["W", 1, pytest.approx(40)]]
    assert sorted(plain.labels) == ["bar", "field"]
    assert "post" in no_bars.labels
    assert "bar" not in no_bars.labels
    assert full.labels == ("post",)
    assert merged(found, full, 0)[2] == ["W", 1, pytest.approx(390)]


@pytest.mark.closed_form
def test_a_post_stands_up_through_a_layer_without_fill():
    stack = die(
        """
  - {name: film, material: SiN, thickness: 100 nm, coverage: conformal}
  - {name: upper, material: none, thickness: 300 nm, features: [{name: post, material: W,
     via: {x: 500 nm, y: 500 nm, diameter: 300 nm}, through: [upper, lower]}]}
  - {name: lower, material: SiO2, thickness: 200 nm}
""",
        cell="{x: 1 um, y: 1 um}",
    )
    (region,) = build(stack).regions
    c = region.labels.index("post")
    assert region.top_nm[c] == pytest.approx(600.0)
    assert region.thickness_nm[c, :3] == pytest.approx([100.0, 300.0, 200.0])
    assert region.top_nm[region.labels.index("field")] == pytest.approx(300.0)


@pytest.mark.closed_form
def test_no_other_feature_may_be_where_a_post_goes():
    plug = "{name: plug, material: W, via: {x: @ nm, y: 300 nm, diameter: 200 nm}, " + FILMS + "}"
    (found,) = overlaps(spanning("upper", extra=plug.replace("@", "500")))
    assert (found.layer, {found.feature, found.other}, found.passing) == ("lower", {"plug", "post"}, True)
    assert not overlaps(spanning("upper", extra=plug.replace("@", "600")))


@pytest.mark.closed_form
@pytest.mark.parametrize(("lower_nm", "full"), [(209, True), (211, False)])
def test_films_need_room_in_the_region_with_the_fewest_layers(lower_nm, full):
    stack = spanning(regions="\n  - {name: all}\n  - {name: low, absent: {layers: [upper]}}\n")
    layers = [
        layer.model_copy(update={"thickness": Measure(float(lower_nm))}) if layer.name == "lower" else layer
        for layer in stack.layers
    ]
    found = liner_too_thick(stack.model_copy(update={"layers": tuple(layers)}))
    assert [(one.films_nm, one.room_nm) for one in found] == [(210.0, lower_nm)] * full


# --- level over the die, and the scale ------------------------------------------------------------------------


def terraces(level):
    layers = f"""
  - {{name: cap, material: SiN, thickness: 100 nm}}
  - {{name: oxide, material: SiO2, thickness: 300 nm, level: {level}}}
  - {{name: metal, material: none, thickness: 500 nm, features: [
      {{name: bar, material: Al, line: {{along: y, centre: 500 nm, width: 200 nm}}}}]}}
  - {{name: base oxide, material: SiO2, thickness: 200 nm}}
"""
    regions = """
  - {name: dense}
  - {name: open, absent: {features_of: [metal]}}
  - {name: cut, absent: {layers: [oxide, metal]}}
"""
    return die(layers, cell="{x: 1 um, y: 1 um}", regions=regions)


@pytest.mark.closed_form
def test_a_layer_level_over_the_die_ends_at_one_height_in_all_regions():
    region, whole = build(terraces("region")), build(terraces("die"))
    assert [float(r.top_nm[0]) for r in region.regions] == [1100.0, 600.0, 300.0]
    assert [float(r.top_nm[0]) for r in whole.regions] == [1100.0, 1100.0, 300.0]
    field = whole.regions[1]
    assert field.thickness_nm[0, :3].tolist() == [100.0, 800.0, 200.0]
    names = [i.name for i in whole.inputs]
    assert dict(zip(names, field.dthickness[0, 1].tolist(), strict=True)) == {
        "cap": 0.0,
        "oxide": 1.0,
        "metal": 1.0,
        "base oxide": 0.0,
        "substrate": 0.0,
    }


@pytest.mark.closed_form
def test_the_scale_error_is_the_maps():
    plain = terraces("die")
    assert build(plain).scale_sd == 0.0
    scaled = Stack.model_validate({"measured": {"scale": "± 2 %"}, "layers": plain.layers, "cell": plain.cell})
    assert build(scaled).scale_sd == 0.02
