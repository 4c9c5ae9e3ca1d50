"""What the four kinds of file come out as, and that the records hold library users to the same limits."""

from __future__ import annotations

import pytest
from documents_examples import RECIPE, STACK
from pydantic import BaseModel, ValidationError

from stackmill.documents import read_job, read_mill, read_recipe, read_stack
from stackmill.documents.job import JobFile, Level, read_level
from stackmill.documents.mill import DEFAULT_MILL, Mill
from stackmill.documents.recipe import Beam, Cover, Motion, Process, Recipe, Strip, Uncover, read_motion
from stackmill.documents.stack import Block, Feature, Film, Layer, Line, Region, Stack, Via
from stackmill.documents.wording import Refusal
from stackmill.errors import InputErrors
from stackmill.units import Measure


def test_a_stack() -> None:
    stack = read_stack(STACK).model
    overcoat, metal, substrate = stack.layers
    assert overcoat.thickness == Measure(600.0, 48.0, 18.0)
    assert (overcoat.coverage, overcoat.sidewall) == ("conformal", 0.7)
    assert (substrate.coverage, substrate.sidewall, substrate.features) == ("planarised", 1.0, ())
    bus, dot, pad = metal.features
    assert bus.shape == Line(along="y", centre=2400.0, width=1600.0)
    assert bus.cap == Film(material="TiN", thickness=Measure(60.0))
    assert dot.shape == Via(x=1000.0, y=1000.0, diameter=400.0)
    assert [film.material for film in dot.liner] == ["TiN"]
    assert pad.shape == Block(x=(0.0, 800.0), y=(0.0, 500.0))
    assert [film.material for film in pad.liner] == ["Ti", "TiN"]
    array, bond_pad, field = stack.regions
    assert array.at is not None
    assert (array.at.x, array.at.y) == (0.0, -1e6)
    assert (bond_pad.absent.layers, bond_pad.solid) == (("overcoat",), {"metal 2": "bus"})
    assert (field.absent.layers, field.absent.features_of) == (("overcoat",), ("metal 2",))


def test_a_stack_without_regions_is_one_die() -> None:
    stack = read_stack("layers: [{name: substrate, material: Si, thickness: 300 um}]").model
    assert stack.regions == (Region(name="die"),)
    assert stack.cell is None


@pytest.mark.closed_form
def test_a_mill() -> None:
    mill = read_mill(
        "gas: argon\ncurrent_density: 0.5 mA/cm2 ± 6 %\ndivergence: 2 deg\ndoubly_charged: 3 % ± 1 %\n"
        "stage: {dial: from surface, zero_error: ± 0.5 deg}\nmount: {contact: silver paste}\nneutraliser: off"
    ).model
    assert mill.current_density.value == 0.5
    assert mill.current_density.rel_sd == pytest.approx(0.06)
    assert mill.doubly_charged == Measure(0.03, 0.01)
    assert (mill.stage.dial, mill.stage.zero_error) == ("from surface", Measure(0.0, 0.5))
    assert (mill.mount.contact, mill.neutraliser) == ("silver paste", False)


def test_the_default_mill_says_that_it_is_invented() -> None:
    mill = read_mill(DEFAULT_MILL).model
    assert "invented" in mill.title
    assert (mill.gas, mill.divergence, mill.neutraliser) == ("argon", 2.0, True)


def test_a_recipe() -> None:
    cover, etch, strip, bulk, creep, touch, last, uncover = read_recipe(RECIPE).model.steps
    assert isinstance(cover, Cover)
    assert (cover.name, cover.cover, cover.with_) == ("step 1", ("bond pad",), "silver paint")
    assert isinstance(etch, Process)
    assert etch.rates == {"SiN PECVD": Measure(1.5, 0.15), "other": Measure(0.0)}
    assert (etch.for_, etch.rate("W"), etch.rate("SiN PECVD")) == (
        480.0,
        Measure(0.0),
        etch.rates["SiN PECVD"],
    )
    assert isinstance(strip, Strip)
    assert (strip.name, strip.strips) == ("step 3", ("AlCu", "TiN"))
    assert isinstance(bulk, Beam)
    assert bulk.to is not None
    assert (bulk.energy, bulk.incidence, bulk.to.layer, bulk.to.feature) == (2000.0, 30.0, "via 1", None)
    assert isinstance(creep, Beam)
    assert (creep.motion, creep.for_) == (Motion("rocking", 20.0, 90.0), 750.0)
    assert creep.current_density == Measure(0.4)
    assert isinstance(touch, Beam)
    assert touch.seen is not None
    assert (touch.seen.in_, touch.seen.area, touch.seen.within) == (("array",), 0.5, Measure(0.0, 20.0))
    assert isinstance(last, Beam)
    assert last.to is not None
    assert (last.to.feature, last.to.in_, last.to.area) == ("strap", ("array", "field"), 0.6)
    assert isinstance(uncover, Uncover)
    assert uncover.kind == "uncover"


def test_a_job() -> None:
    job = read_job(
        "stack: a.yaml\nrecipe: b.yaml\ngoal: {layer: metal 1, feature: strap, in: [array], at: 50 % ± 30 nm}\n"
        "keep: [{in: bond pad, feature: metal 2 / bus, at_least: 300 nm}]"
    ).model
    assert job.goal is not None
    assert (job.goal.layer, job.goal.feature, job.goal.in_, job.goal.clear) == (
        "metal 1",
        "strap",
        ("array",),
        0.95,
    )
    assert job.goal.at == Level(False, 0.5, 30.0)
    assert [(k.layer, k.feature, k.in_, k.at_least) for k in job.keep] == [("metal 2", "bus", ("bond pad",), 300.0)]
    assert (job.confidence, job.mill, job.materials) == (0.9, None, ())


@pytest.mark.parametrize(
    ("text", "layer", "feature"), [("metal 1", "metal 1", None), ("metal 1 / strap", "metal 1", "strap")]
)
def test_short_goals_and_ends(text: str, layer: str, feature: str | None) -> None:
    goal = read_job(f"stack: a\nrecipe: b\ngoal: {text}").model.goal
    step = read_recipe(f"steps: [{{energy: 1 keV, incidence: 0 deg, motion: still, to: {text}}}]").model.steps[0]
    assert isinstance(step, Beam)
    for found in (goal, step.to):
        assert found is not None
        assert (found.layer, found.feature) == (layer, feature)


@pytest.mark.parametrize(
    ("text", "motion"),
    [
        ("rotating", Motion("rotating")),
        ("still", Motion("still")),
        ("still at 30 deg", Motion("still", 0.0, 30.0)),
        ("rocking ± 20 deg", Motion("rocking", 20.0)),
        ("rocking +/- 20 deg at 90 deg", Motion("rocking", 20.0, 90.0)),
    ],
)
def test_motions_come_back(text: str, motion: Motion) -> None:
    assert read_motion(text) == motion
    assert read_motion(str(motion)) == motion


@pytest.mark.parametrize(
    "text",
    ["", "spinning", "rotating ± 5 deg", "rotating at 3 deg", "still ± 5 deg", "rocking", "rocking 20 deg"],
)
def test_motions_refused(text: str) -> None:
    with pytest.raises(Refusal):
        read_motion(text)


def test_levels_come_back() -> None:
    for level in (Level(), Level(False, 0.5, 30.0)):
        assert read_level(str(level)) == level


@pytest.mark.parametrize("text", ["bottom", "50 %", "50 % ± 3 %", "120 % ± 30 nm", "50 % ± 0 nm", "± 30 nm"])
def test_levels_refused(text: str) -> None:
    with pytest.raises(Refusal):
        read_level(text)


def test_records_made_in_python_keep_the_same_limits() -> None:
    line = Line(along="x", centre=100.0, width=50.0)
    feature = Feature(name="bus", material="Al", line=line, liner=(Film(material="TiN", thickness=Measure(5.0)),))
    layer = Layer(name="metal", material="SiO2", thickness=Measure(600.0, 48.0), features=(feature,))
    assert layer.features[0].shape is line
    with pytest.raises(ValidationError, match="below zero"):
        Line(along="x", centre=100.0, width=-50.0)
    with pytest.raises(ValidationError, match="thicker than a wafer"):
        Film(material="TiN", thickness=Measure(5e9))
    with pytest.raises(ValidationError, match="cell"):
        Stack(layers=(layer, Layer(name="substrate", material="Si", thickness=Measure(3e5))))


def test_records_are_frozen() -> None:
    mill = read_mill(DEFAULT_MILL).model
    with pytest.raises(ValidationError, match="frozen"):
        mill.gas = "neon"  # type: ignore[misc]  # that it is frozen is the test


@pytest.mark.parametrize("model", [Stack, Mill, Recipe, JobFile])
def test_json_schemas_can_be_made(model: type[BaseModel]) -> None:
    schema = model.model_json_schema()
    assert schema["additionalProperties"] is False
    assert "with_" not in str(schema)


def test_documents_know_their_places() -> None:
    document = read_recipe(RECIPE, file="r.yaml")
    place = document.place("steps", 5, "seen", "within")
    assert (str(place), place.excerpt[place.column - 1 :][:6]) == ("r.yaml:7:111", "± 20 s")
    assert document.text == RECIPE


def test_all_mistakes_of_a_file_come_at_once_in_order() -> None:
    text = (
        STACK.replace("along: y", "along: q").replace("900 nm", "900").replace("thickness: 300 um", "thicknes: 300 um")
    )
    with pytest.raises(InputErrors) as refused:
        read_stack(text, file="s.yaml")
    assert [(e.line, e.what) for e in refused.value.errors] == [
        (7, "900 has no unit"),
        (9, "along cannot be 'q'"),
        (12, "layer 'substrate' has no key 'thicknes'"),
    ]


def test_a_bad_word_for_one_of_some_words_or_nothing() -> None:
    """A choice that may also be left out is complained about like any other."""
    from typing import Literal

    from pydantic import Field

    from stackmill.documents.healing import healed
    from stackmill.documents.reading import Record, read_document

    class Sieve(Record):
        mesh: Literal["fine", "coarse"] | None = Field(default=None, examples=["fine"])

    with pytest.raises(InputErrors) as refused:
        read_document(Sieve, "mesh: coarze\n")
    assert refused.value.errors[0].headline() == "<text>:1:7: error: mesh cannot be 'coarze' (did you mean coarse?)"
    with pytest.raises(ValidationError) as invalid:
        Sieve.model_validate({"mesh": "coarze"})
    assert healed(invalid.value, Sieve, {"mesh": "coarze"}) == ({"mesh": "fine"}, (("mesh",),))
    assert read_document(Sieve, "{}").model.mesh is None
