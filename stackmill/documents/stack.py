"""The stack file: the layers of a die from the top down, their features, and its regions.

All lengths are held in nm. A `Measure` carries value, sd and across-die sd.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from pydantic import BeforeValidator, Field, model_validator

from stackmill.documents.fields import (
    DiePosition,
    Label,
    Name,
    PatternDensity,
    PlanPosition,
    ScaleError,
    Sidewall,
    Size,
    Thickness,
    Top,
    one_or_more,
)
from stackmill.documents.reading import Record
from stackmill.documents.stack_rules import same_names, stack_refusals
from stackmill.documents.wording import Refusal, Refusals, Sentence
from stackmill.units import Measure, quoted

NO_FILL = "none"
"""The material of a layer that has nothing between its features."""


_FROM_TOPS = Measure(1.0)  # stands in for a thickness until the tops of all layers are known


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

    Exactly one of line, via, block and pattern_density (a share of the area between the layer's other features,
    anywhere); liner: films on its sides and bottom, outermost first; cap: on its top; base: under it; through:
    the layers it goes through, its own among them (none: its own only). Sizes are outer: the films are carved
    inside the outline.
    """

    what: ClassVar[str] = "feature"
    name: Name = Field(examples=["bus"])
    material: Label = Field(examples=["AlCu"])
    line: Line | None = None
    via: Via | None = None
    block: Block | None = None
    pattern_density: PatternDensity | None = None
    liner: Annotated[tuple[Film, ...], BeforeValidator(one_or_more)] = ()
    cap: Film | None = None
    base: Film | None = None
    through: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = ()

    @property
    def is_drawn(self) -> bool:
        """Whether it has an outline, and so a place in the plan."""
        return self.pattern_density is None

    @property
    def shape(self) -> Shape:
        """The outline: the one of line, via and block that is given. Only drawn features have one."""
        shape = self.line or self.via or self.block
        assert shape is not None
        return shape

    @model_validator(mode="after")
    def _one_shape(self) -> Feature:
        given = [key for key in ("line", "via", "block", "pattern_density") if getattr(self, key) is not None]
        if not given:
            raise Refusal(
                Sentence(
                    f"feature {quoted(self.name)} has no outline",
                    "give it a line, via or block, such as line: {along: y, centre: 2.4 um, width: 1.6 um}",
                )
            )
        if len(given) > 1:
            one, other = (key.replace("_", " ") for key in given[:2])
            raise Refusal(
                Sentence(f"feature {quoted(self.name)} has a {one} and a {other}", "keep one of them"), given[1]
            )
        if self.through and not self.is_drawn:
            what = f"feature {quoted(self.name)} has a pattern density and cannot go through several layers"
            raise Refusal(Sentence(what, "give each layer its own"), "through")
        return self


class Layer(Record):
    """One level of the stack: what fills it between its features, and how it lies on what is below.

    thickness, or the height of its top over the substrate's (`top`; its thickness is then worked out); coverage:
    `planarised` fills and ends flat, `conformal` has the same thickness over everything; sidewall: the share of
    the thickness that a conformal film has on a wall; level: whether a planarised layer ends at one height in
    each region, or all over the die.
    """

    what: ClassVar[str] = "layer"
    name: Name = Field(examples=["metal 2"])
    material: Label = Field(examples=["SiO2 PECVD"])
    thickness: Thickness = Field(examples=["600 nm ± 8 %"])
    top: Top | None = None
    coverage: Literal["planarised", "conformal"] = "planarised"
    sidewall: Sidewall = 1.0
    level: Literal["region", "die"] = "region"
    features: tuple[Feature, ...] = ()

    @model_validator(mode="before")
    @classmethod
    def _thickness_from_top(cls, given: Any) -> Any:
        if isinstance(given, Mapping) and given.get("top") is not None and "thickness" not in given:
            return {**given, "thickness": _FROM_TOPS}
        return given

    @model_validator(mode="after")
    def _consistent(self) -> Layer:
        refusals = list(self._refusals())
        if refusals:
            raise Refusals(refusals)
        return self

    def _refusals(self) -> Iterator[Refusal]:
        if self.top is not None and self.thickness is not _FROM_TOPS:
            yield Refusal(Sentence("a layer has a thickness or a top, and not both", "keep one of them"), "top")
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
        if "level" in self.model_fields_set and (self.coverage == "conformal" or self.material == NO_FILL):
            cure = "make it planarised and name its material, or leave level out"
            yield Refusal(Sentence("only a planarised layer with a fill ends level", cure), "level")
        yield from same_names("feature", [f.name for f in self.features], lambda k: ("features", k, "name"))
        yield from self._density_refusals()

    def _density_refusals(self) -> Iterator[Refusal]:
        dense = [k for k, feature in enumerate(self.features) if not feature.is_drawn]
        if dense and self.material == NO_FILL:
            says = Sentence(
                "a pattern density needs a fill around it", "name the layer's material, or draw the feature"
            )
            yield Refusal(says, "features", dense[0], "pattern_density")
        for k in dense[1:]:
            says = Sentence(
                f"layer {quoted(self.name)} has a second pattern density", "add them up, or draw one of them"
            )
            yield Refusal(says, "features", k, "pattern_density")


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


class Measured(Record):
    """How the thicknesses were measured. scale: the error they all share, such as a microscope's."""

    what: ClassVar[str] = "'measured'"
    scale: ScaleError = Field(examples=["± 2 %"])


class Stack(Record):
    """A die: its layers from the top down, the last being the substrate, and its regions."""

    what: ClassVar[str] = "stack file"
    title: Label = ""
    measured: Measured | None = None
    cell: Cell | None = None
    layers: tuple[Layer, ...] = Field(examples=["[{name: substrate, material: Si, thickness: 300 um}]"])
    regions: tuple[Region, ...] = (Region(name="die"),)

    @model_validator(mode="after")
    def _consistent(self) -> Stack:
        refusals = list(stack_refusals(self))
        if refusals:
            raise Refusals(refusals)
        if any(layer.thickness is _FROM_TOPS for layer in self.layers):
            from stackmill.documents.heights import with_thicknesses

            # The record is still being made: nobody has seen it without its thicknesses.
            self.__dict__["layers"] = with_thicknesses(self.layers)
        return self

    def layer(self, name: str) -> Layer | None:
        """The layer of that name, or None."""
        return next((layer for layer in self.layers if layer.name == name), None)
