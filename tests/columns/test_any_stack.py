"""What must hold for every stack: random ones, drawn anywhere."""

from __future__ import annotations

import re
from collections import Counter

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.columns import build, liner_too_thick, overlaps
from stackmill.documents.stack import Block, Feature, Layer, Line, Stack, Via

CELL = 1000.0


@st.composite
def shapes(draw):
    def whole(low, high):
        return float(draw(st.integers(low, high)))

    kind = draw(st.sampled_from(["line", "via", "block"]))
    x, y = whole(0, 999), whole(0, 999)
    if kind == "line":
        along = draw(st.sampled_from(["x", "y"]))
        return {"line": Line.model_construct(along=along, centre=x, width=whole(120, 600))}
    if kind == "via":
        return {"via": Via.model_construct(x=x, y=y, diameter=whole(120, 700))}
    half = whole(60, 350), whole(60, 350)
    return {"block": Block.model_construct(x=(x - half[0], x + half[0]), y=(y - half[1], y + half[1]))}


@st.composite
def layers(draw, number, most):
    films = draw(
        st.sampled_from(
            [
                {},
                {"liner": [("TiN", 20)]},
                {"liner": [("Ti", 15), ("TiN", 25)], "cap": ("Co", 30)},
                {"base": ("TiN", 40)},
            ]
        )
    )
    made = []
    for k in range(draw(st.integers(1, most))):
        made.append(feature(f"part {number}.{k}", draw(shapes()), films))
    fill = draw(st.sampled_from(["none", "SiO2"]))
    return layer(f"level {number}", fill, float(draw(st.integers(150, 500))), features=tuple(made))


def measure(value):
    from stackmill.units import Measure

    return Measure(float(value), 0.05 * value)


def film(pair):
    from stackmill.documents.stack import Film

    return Film.model_construct(material=pair[0], thickness=measure(pair[1]))


def feature(name, shape, films):
    return Feature.model_construct(
        name=name,
        material="W",
        liner=tuple(film(f) for f in films.get("liner", ())),
        cap=film(films["cap"]) if "cap" in films else None,
        base=film(films["base"]) if "base" in films else None,
        **shape,
    )


def layer(name, material, thickness, *, coverage="planarised", sidewall=1.0, features=()):
    return Layer.model_construct(
        name=name,
        material=material,
        thickness=measure(thickness),
        coverage=coverage,
        sidewall=sidewall,
        features=features,
    )


def stack_of(found):
    from stackmill.documents.stack import Cell, Region

    substrate = layer("substrate", "Si", 1000.0)
    regions = (Region(name="die"), Region(name="bare", absent={"features_of": ["level 1"]}))
    return Stack.model_construct(
        title="", cell=Cell.model_construct(x=CELL, y=CELL), layers=(*found, substrate), regions=regions
    )


@st.composite
def stacks(draw):
    upper = draw(layers(1, 2))
    lower = layer("level 2", "SiO2", 300.0, features=draw(layers(2, 3)).features)
    found = [upper, lower]
    for k in range(draw(st.integers(0, 2))):
        sidewall = draw(st.sampled_from([1.0, 0.6]))
        found.insert(
            0, layer(f"film {k}", "SiN", float(draw(st.integers(50, 150))), coverage="conformal", sidewall=sidewall)
        )
    if draw(st.booleans()):
        found.insert(0, layer("lid", "SiO2", 200.0))
    return stack_of(found)


def sound(stack):
    return not overlaps(stack) and not liner_too_thick(stack)


def moved(stack, change):
    """The stack with every shape changed."""

    def one(feature_):
        key = next(k for k in ("line", "via", "block") if getattr(feature_, k) is not None)
        return feature_.model_copy(update={key: change(getattr(feature_, key))})

    return stack.model_copy(
        update={
            "layers": tuple(la.model_copy(update={"features": tuple(map(one, la.features))}) for la in stack.layers)
        }
    )


def shifted(shape, dx, dy):
    def into_cell(span, by):
        low, high = span[0] + by, span[1] + by
        back = CELL * np.floor((low + high) / 2 / CELL)
        return (low - back, high - back)

    if isinstance(shape, Via):
        return shape.model_copy(update={"x": (shape.x + dx) % CELL, "y": (shape.y + dy) % CELL})
    if isinstance(shape, Line):
        return shape.model_copy(update={"centre": (shape.centre + (dx if shape.along == "y" else dy)) % CELL})
    return shape.model_copy(update={"x": into_cell(shape.x, dx), "y": into_cell(shape.y, dy)})


def mirrored(shape):
    if isinstance(shape, Via):
        return shape.model_copy(update={"x": CELL - shape.x})
    if isinstance(shape, Line):
        return shape.model_copy(update={"centre": CELL - shape.centre}) if shape.along == "y" else shape
    return shape.model_copy(update={"x": (CELL - shape.x[1], CELL - shape.x[0])})


@pytest.mark.independent
@settings(max_examples=25, deadline=None)
@given(stacks())
def test_areas_add_up_segments_chain_and_the_grid_agrees(stack):
    if not sound(stack):
        return
    found = build(stack)
    best = np.array([i.thickness.value for i in found.inputs])
    for region in found.regions:
        assert abs(region.area.sum() - 1.0) < 1e-9
        assert np.all(np.diff(region.area) <= 1e-12)
        assert len(set(region.labels)) == len(region.labels)
        for c, k in enumerate(region.segments):
            tops = np.concatenate([[region.top_nm[c]], region.floor_nm[c, : k - 1]])
            assert np.allclose(tops - region.floor_nm[c, :k], region.thickness_nm[c, :k], atol=1e-9)
            assert (region.thickness_nm[c, :k] > 0.0).all()
            assert region.floor_nm[c, k - 1] == pytest.approx(-1000.0)
            assert (np.diff(region.layer[c, :k]) >= 0).all()
            assert (region.material[c, k:] == -1).all()
        assert np.allclose(region.dtop_dthickness @ best, region.top_nm)
        assert np.allclose(region.dfloor_dthickness @ best, region.floor_nm)
        own = region.plan(region.centre_nm[:, 0], region.centre_nm[:, 1])
        assert own.tolist() == list(range(len(own)))
        counted = np.bincount(region.grid(400, 400).ravel(), minlength=len(region.area)) / 400**2
        assert np.abs(counted - region.area).max() < 0.012


@pytest.mark.independent
@settings(max_examples=12, deadline=None)
@given(stacks(), st.integers(0, 999), st.integers(0, 999))
def test_moving_everything_or_looking_in_a_mirror_changes_no_area(stack, dx, dy):
    if not sound(stack):
        return
    slopes, areas = areas_of(build(stack))
    for other in (moved(stack, lambda s: shifted(s, dx, dy)), moved(stack, mirrored)):
        slopes_again, again = areas_of(build(other))
        for label in areas.keys() | again.keys():
            assert areas.get(label, 0.0) == pytest.approx(again.get(label, 0.0), abs=1e-5), label
        for label in slopes.keys() | slopes_again.keys():  # where classes part is found to this precision only
            assert slopes.get(label, 0.0) == pytest.approx(slopes_again.get(label, 0.0), abs=2e-4), label


def areas_of(column_map):
    """Areas of classes on slopes, and of all columns with the classes of a slope together."""
    region = column_map.regions[0]
    slopes, together = {}, Counter()
    for label, slope, area in zip(region.labels, region.slope, region.area.tolist(), strict=True):
        together[re.sub(r"slope \d", "slope", label)] += area
        if slope:
            slopes[label] = area
    return slopes, together
