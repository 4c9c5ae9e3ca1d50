"""Derivatives to the thickness inputs, against rebuilding the die with each thickness a little off."""

from __future__ import annotations

import dies
import pytest
import yaml

from stackmill.columns import build
from stackmill.documents.stack import Stack
from stackmill.units import Measure

STEP_NM = 0.5


def with_thickness(stack: Stack, number: int, by_nm: float) -> Stack:
    """The same stack with the numbered input thicker."""
    counter = iter(range(10_000))

    def film(one):
        return one.model_copy(update={"thickness": grown(one.thickness)}) if one else None

    def grown(thickness):
        more = by_nm if next(counter) == number else 0.0
        return Measure(thickness.value + more, thickness.sd, thickness.across_sd)

    def feature(one):
        cap = film(one.cap)
        liner = tuple(film(f) for f in one.liner)
        return one.model_copy(update={"cap": cap, "liner": liner, "base": film(one.base)})

    layers = []
    for layer in stack.layers:
        thickness = grown(layer.thickness)
        layers.append(
            layer.model_copy(update={"thickness": thickness, "features": tuple(map(feature, layer.features))})
        )
    return stack.model_copy(update={"layers": tuple(layers)})


@pytest.mark.independent
@pytest.mark.parametrize(("name", "tolerance"), [("two_metals", 1e-6), ("buried", 0.06)])
def test_derivatives_are_finite_differences(name, tolerance):
    # Around corners a thicker film moves the classes a little; its footprint is held fixed in the derivatives.
    stack = getattr(dies, name)()
    base = build(stack)
    for number in range(len(base.inputs)):
        moved = [build(with_thickness(stack, number, sign * STEP_NM)) for sign in (-1, 1)]
        for r, region in enumerate(base.regions):
            low, high = (m.regions[r] for m in moved)
            for c, label in enumerate(region.labels):
                at = [m.labels.index(label) for m in (low, high)]
                k = region.segments[c]
                top = (high.top_nm[at[1]] - low.top_nm[at[0]]) / (2 * STEP_NM)
                thick = (high.thickness_nm[at[1], :k] - low.thickness_nm[at[0], :k]) / (2 * STEP_NM)
                floor = (high.floor_nm[at[1], :k] - low.floor_nm[at[0], :k]) / (2 * STEP_NM)
                assert region.dtop_dthickness[c, number] == pytest.approx(top, abs=tolerance), (label, number)
                assert region.dthickness[c, :k, number] == pytest.approx(thick, abs=tolerance)
                assert region.dfloor_dthickness[c, :k, number] == pytest.approx(floor, abs=tolerance)


@pytest.mark.closed_form
def test_inputs_are_named_by_what_they_are_the_thickness_of():
    found = build(dies.two_metals())
    assert [i.name for i in found.inputs] == [
        "overcoat",
        "metal 2",
        "metal 2 / bus / cap",
        "metal 2 / bus / base",
        "via 1",
        "via 1 / plug / liner 1",
        "via 1 / plug / liner 2",
        "metal 1",
        "metal 1 / strap / cap",
        "oxide",
        "substrate",
    ]
    assert [i.layer for i in found.inputs] == [0, 1, 1, 1, 2, 2, 2, 3, 3, 4, 5]
    assert found.features == ((1, "bus"), (2, "plug"), (3, "strap"), (3, "pad land"))


@pytest.mark.closed_form
def test_a_thickness_keeps_its_uncertainty():
    film = "{name: film, material: SiN, thickness: 600 nm ± 8 %}"
    text = f"layers: [{film}, {{name: substrate, material: Si, thickness: 1 um}}]"
    (film, _) = build(Stack.model_validate(yaml.safe_load(text))).inputs
    assert film.thickness.sd == pytest.approx(48.0)
