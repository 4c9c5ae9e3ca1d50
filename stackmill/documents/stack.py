"""The stack file: the layers of a die from the top down, their features, and its regions.

All lengths are held in nm. A `Measure` carries value, sd and across-die sd.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from typing import Annotated, ClassVar, Literal

from pydantic import BeforeValidator, Field, model_validator

from stackmill.documents import wording
from stackmill.documents.fields import (
    DiePosition,
    Label,
    Name,
    PlanPosition,
    Sidewall,
    Size,
    Thickness,
    one_or_more,
)
from stackmill.documents.reading import Record
from stackmill.documents.wording import Refusal, Refusals, Sentence
from stackmill.units import quoted

NO_FILL = "none"
"""The material of a layer that has nothing between its features."""


class Film(Record):
    """A thin film on a feature: material and thickness (nm)."""

    what: ClassVar[str] = "film"
    material: Label = Field(examples=["TiN"])
    thickness: Thickness = Field(examples=["30 nm"])


class Line(Record):
    """A line through the whole cell, along x or y: centre and width (nm) across it."""

    what: ClassVar[str] = "line"
    along: Literal["x", "y"] = Field(examples=["y"])
    centre: PlanPosition = Field(examples=["2.4 um"])
    width: Size = Field(examples=["1.6 um"])


class Via(Record):
    """A round via: centre and diameter (nm)."""

    what: ClassVar[str] = "via"
    x: PlanPosition = Field(examples=["2.4 um"])
    y: PlanPosition = Field(examples=["2.4 um"])
    diameter: Size = Field(examples=["400 nm"])


class Block(Record):
    """A rectangle: its two edges in x and in y (nm)."""

    what: ClassVar[str] = "block"
    x: tuple[PlanPosition, PlanPosition] = Field(examples=["[0 um, 0.8 um]"])
    y: tuple[PlanPosition, PlanPosition] = Field(examples=["[0 um, 0.8 um]"])

    @model_validator(mode="after")
    def _has_area(self) -> Block:
        thin = [axis for axis in ("x", "y") if getattr(self, axis)[0] >= getattr(self, axis)[1]]
        if thin:
            says = Sentence("this block's first edge is not below its second", "write the lower edge first")
            raise Refusals(Refusal(says, axis) for axis in thin)
        return self


Shape = Line | Via | Block


class Feature(Record):
    """A line, via or block of another material inside a layer, with the films on it.

    Exactly one of line, via and block; liner: films on its sides and bottom, outermost first; cap: on its
    top; base: under it. Sizes are outer: the films are carved inside the outline.
    """

    what: ClassVar[str] = "feature"
    name: Name = Field(examples=["bus"])
    material: Label = Field(examples=["AlCu"])
    line: Line | None = None
    via: Via | None = None
    block: Block | None = None
    liner: Annotated[tuple[Film, ...], BeforeValidator(one_or_more)] = ()
    cap: Film | None = None
    base: Film | None = None

    @property
    def shape(self) -> Shape:
        """The outline: the one of line, via and block that is given."""
        shape = self.line or self.via or self.block
        assert shape is not None
        return shape

    @model_validator(mode="after")
    def _one_shape(self) -> Feature:
        given = [key for key in ("line", "via", "block") if getattr(self, key) is not None]
        if not given:
            raise Refusal(
                Sentence(
                    f"feature {quoted(self.name)} has no outline",
                    "give it a line, via or block, such as line: {along: y, centre: 2.4 um, width: 1.6 um}",
                )
            )
        if len(given) > 1:
            says = Sentence(f"feature {quoted(self.name)} has a {given[0]} and a {given[1]}", "keep one of them")
            raise Refusal(says, given[1])
        return self


class Layer(Record):
    """One level of the stack: what fills it between its features, and how it lies on what is below.

    coverage: `planarised` fills and ends flat, `conformal` has the same thickness over everything; sidewall:
    the share of the thickness that a conformal film has on a wall.
    """

    what: ClassVar[str] = "layer"
    name: Name = Field(examples=["metal 2"])
    material: Label = Field(examples=["SiO2 PECVD"])
    thickness: Thickness = Field(examples=["600 nm ± 8 %"])
    coverage: Literal["planarised", "conformal"] = "planarised"
    sidewall: Sidewall = 1.0
    features: tuple[Feature, ...] = ()

    @model_validator(mode="after")
    def _consistent(self) -> Layer:
        refusals = list(self._refusals())
        if refusals:
            raise Refusals(refusals)
        return self

    def _refusals(self) -> Iterator[Refusal]:
        if "sidewall" in self.model_fields_set and self.coverage != "conformal":
            cure = "add coverage: conformal, or leave sidewall out"
            yield Refusal(Sentence("only a conformal layer has a sidewall share", cure), "sidewall")
        if self.coverage == "conformal" and self.features:
            cure = "make it planarised, or put the features in a layer of their own"
            yield Refusal(Sentence("a conformal layer cannot have features", cure), "features")
        if self.coverage == "conformal" and self.material == NO_FILL:
            yield Refusal(Sentence("a conformal layer needs a material", "name it instead of none"), "material")
        if self.material == NO_FILL and not self.features and self.coverage == "planarised":
            cure = "add its features, or remove the layer"
            yield Refusal(Sentence(f"layer {quoted(self.name)} has neither fill nor features", cure), "material")
        yield from _same_names("feature", [f.name for f in self.features], lambda k: ("features", k, "name"))


class Point(Record):
    """A position on the die (nm)."""

    what: ClassVar[str] = "position"
    x: DiePosition = Field(examples=["2.1 mm"])
    y: DiePosition = Field(examples=["0 mm"])


class Absent(Record):
    """What a region lacks: whole layers, or the features of layers."""

    what: ClassVar[str] = "absent"
    layers: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = ()
    features_of: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = ()


class Region(Record):
    """A kind of location on the die. solid: layer -> the feature that covers the whole cell there."""

    what: ClassVar[str] = "region"
    name: Name = Field(examples=["array"])
    at: Point | None = None
    absent: Absent = Absent()
    solid: dict[Label, Label] = Field(default_factory=dict)


class Cell(Record):
    """The plan rectangle that repeats (nm)."""

    what: ClassVar[str] = "cell"
    x: Size = Field(examples=["4.8 um"])
    y: Size = Field(examples=["4.8 um"])


class Stack(Record):
    """A die: its layers from the top down, the last being the substrate, and its regions."""

    what: ClassVar[str] = "stack file"
    title: Label = ""
    cell: Cell | None = None
    layers: tuple[Layer, ...] = Field(examples=["[{name: substrate, material: Si, thickness: 300 um}]"])
    regions: tuple[Region, ...] = (Region(name="die"),)

    @model_validator(mode="after")
    def _consistent(self) -> Stack:
        refusals = list(self._refusals())
        if refusals:
            raise Refusals(refusals)
        return self

    def layer(self, name: str) -> Layer | None:
        """The layer of that name, or None."""
        return next((layer for layer in self.layers if layer.name == name), None)

    def _refusals(self) -> Iterator[Refusal]:
        if not self.layers:
            yield Refusal(Sentence("this stack has no layers", "list them from the top down"), "layers")
            return
        if not self.regions:
            yield Refusal(Sentence("this stack has no regions", "leave the key out, or name one"), "regions")
        yield from _same_names("layer", [layer.name for layer in self.layers], lambda k: ("layers", k, "name"))
        yield from _same_names("region", [r.name for r in self.regions], lambda k: ("regions", k, "name"))
        patterned = next((k for k, layer in enumerate(self.layers) if layer.features), None)
        if self.cell is None and patterned is not None:
            says = Sentence("features need a cell to lie in", "add cell: {x: 4.8 um, y: 4.8 um}")
            yield Refusal(says, "layers", patterned, "features")
        yield from self._substrate_refusals(len(self.layers) - 1)
        for k, region in enumerate(self.regions):
            for refusal in self._region_refusals(region):
                yield Refusal(refusal.says, "regions", k, *refusal.path)

    def _substrate_refusals(self, last: int) -> Iterator[Refusal]:
        substrate = self.layers[last]
        for wrong, key, what in (
            (bool(substrate.features), "features", "cannot have features"),
            (substrate.coverage == "conformal", "coverage", "cannot be conformal"),
            (substrate.material == NO_FILL, "material", "needs a material"),
        ):
            if wrong:
                says = Sentence(f"the last layer is the substrate and {what}", "add the substrate below it")
                yield Refusal(says, "layers", last, key)

    def _region_refusals(self, region: Region) -> Iterator[Refusal]:
        names = [layer.name for layer in self.layers]
        patterned = {layer.name: [f.name for f in layer.features] for layer in self.layers if layer.features}
        for k, name in enumerate(region.absent.layers):
            if name not in names:
                yield Refusal(wording.no_such("layer", name, names), "absent", "layers", k)
            elif name == names[-1]:
                cure = "keep at least the substrate"
                yield Refusal(Sentence(f"region {quoted(region.name)} removes everything", cure), "absent", "layers", k)
        for k, name in enumerate(region.absent.features_of):
            if name not in patterned:
                yield Refusal(self._no_features(name, patterned, names), "absent", "features_of", k)
        for name, feature in region.solid.items():
            if name not in patterned:
                yield Refusal(self._no_features(name, patterned, names), "solid", name)
            elif feature not in patterned[name]:
                yield Refusal(wording.no_such_feature(name, feature, patterned[name]), "solid", name)
            elif name in region.absent.layers or name in region.absent.features_of:
                says = Sentence(f"layer {quoted(name)} is both absent and solid here", "keep one of them")
                yield Refusal(says, "solid", name)

    @staticmethod
    def _no_features(name: str, patterned: Iterable[str], names: Iterable[str]) -> Sentence:
        if name in names:
            cure = f"layers with features: {wording.listed(list(patterned), last='and')}" if patterned else ""
            return Sentence(f"layer {quoted(name)} has no features", cure or "leave this out")
        return wording.no_such("layer", name, list(patterned))


def _same_names(what: str, names: Iterable[str], path: Callable[[int], tuple[str | int, ...]]) -> Iterator[Refusal]:
    seen: set[str] = set()
    for k, name in enumerate(names):
        if name in seen:
            says = Sentence(f"a second {what} is called {quoted(name)}", "give each a name of its own")
            yield Refusal(says, *path(k))
        seen.add(name)
