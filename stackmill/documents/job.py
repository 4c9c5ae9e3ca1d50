"""The job file: binds stack, mill, recipe and materials, and says what is wanted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from pydantic import BeforeValidator, Field, PlainValidator, WithJsonSchema, model_validator

from stackmill.documents.fields import Chance, Depth, Label, SomeShare, one_or_more, percent, split_reference
from stackmill.documents.reading import Record
from stackmill.documents.wording import refuse
from stackmill.units import plain, quoted, read_number

DEFAULT_CONFIDENCE = 0.9
DEFAULT_CLEAR = 0.95


@dataclass(frozen=True, slots=True)
class Level:
    """How far down a goal lies: its top, or a band of ± half_width (nm) about a share of its height.

    fraction: height of the band's middle above the goal's floor, as a share of its thickness.
    """

    top: bool = True
    fraction: float = 1.0
    half_width: float = 0.0

    def __str__(self) -> str:
        return "top" if self.top else f"{percent(self.fraction)} ± {plain(self.half_width)} nm"


def read_level(value: Any) -> Level:
    """`top`, or `50 % ± 30 nm`."""
    if isinstance(value, Level):
        return value
    text = " ".join(str(value).replace("+/-", "±").replace("+-", "±").split())
    if text == "top":
        return Level()
    middle, band, half = text.partition("±")
    if not band or not middle.strip():
        cure = f"write {text} ± 30 nm" if text.endswith("%") and not band else "write top, or 50 % ± 30 nm"
        raise refuse(f"{quoted(text)} is no level", cure)
    if half.strip().endswith("%"):
        raise refuse(f"the band of {quoted(text)} is a share", "give it as a length, as in 50 % ± 30 nm")
    fraction, half_width = read_number(middle, "fraction"), read_number(half, "length")
    if not 0.0 <= fraction <= 1.0:
        raise refuse(f"{middle.strip()} lies outside the layer", "write 0 to 100 % of its height above its floor")
    if not 0.1 <= half_width <= 1e6:
        raise refuse(f"a band of ± {half.strip()} cannot be hit or missed", "write a band such as ± 30 nm")
    return Level(False, fraction, half_width)


def _goal_reference(value: Any) -> Any:
    """`goal: metal 1 / strap` as the short form of {layer, feature}; `feature: metal 1 / strap` likewise."""
    if isinstance(value, str):
        value = {"feature" if "/" in value else "layer": value}
    if not isinstance(value, Mapping):
        return value
    feature = value.get("feature")
    if isinstance(feature, str) and "/" in feature:
        layer, name = split_reference(feature)
        if "layer" in value and value["layer"] != layer:
            raise refuse(
                f"{quoted(feature)} is not in layer {quoted(str(value['layer']))}",
                "leave layer out",
                "feature",
            )
        return {**value, "layer": layer, "feature": name}
    if isinstance(feature, str) and "layer" not in value:
        raise refuse(f"{quoted(feature)} does not say in which layer it is", f"write LAYER / {feature}", "feature")
    return value


Regions = Annotated[tuple[Label, ...], BeforeValidator(one_or_more)]


class Goal(Record):
    """What must be exposed: a layer or a feature in it, in which regions (none named: all that have it).

    at: which level; clear: the share of its area that must have come down.
    """

    what: ClassVar[str] = "goal"
    layer: Label = Field(examples=["metal 1"])
    feature: Label | None = None
    in_: Regions = Field(default=(), alias="in")
    at: Annotated[
        Level,
        PlainValidator(read_level),
        WithJsonSchema({"type": "string", "examples": ["top", "50 % ± 30 nm"]}),
    ] = Level()
    clear: SomeShare = DEFAULT_CLEAR

    _short = model_validator(mode="before")(_goal_reference)


class Keep(Record):
    """What must survive: a layer or feature, in which regions (none named: all), at least how thick (nm)."""

    what: ClassVar[str] = "keep"
    layer: Label = Field(examples=["metal 2"])
    feature: Label | None = None
    in_: Regions = Field(default=(), alias="in")
    at_least: Depth = Field(examples=["300 nm"])

    _short = model_validator(mode="before")(_goal_reference)


def _bound(value: Any) -> Any:
    """A path, or the block itself written in place."""
    if isinstance(value, str):
        if not value.strip():
            raise refuse("this names no file", "write its path")
        return value
    if isinstance(value, Mapping):
        return value
    raise refuse("a path or a group of keys belongs here", "write the path of a file")


def _bound_materials(value: Any) -> Any:
    if isinstance(value, list | tuple):
        return tuple(_bound(item) for item in value)
    return (_bound(value),)


_PATH_OR_BLOCK = WithJsonSchema({"type": ["string", "object"]})
Bound = Annotated[Any, PlainValidator(_bound), _PATH_OR_BLOCK]


class JobFile(Record):
    """A job as it is written: each bound file a path, beside the job file, or its content in place."""

    what: ClassVar[str] = "job file"
    title: Label = ""
    stack: Bound = Field(examples=["stack.yaml"])
    mill: Bound | None = None
    recipe: Bound = Field(examples=["recipe.yaml"])
    materials: Annotated[
        Any, PlainValidator(_bound_materials), WithJsonSchema({"type": ["string", "object", "array"]})
    ] = ()
    calibration: Bound | None = Field(default=None, examples=["gun-a-today.yaml"])
    goal: Goal | None = None
    keep: Annotated[tuple[Keep, ...], BeforeValidator(one_or_more)] = ()
    confidence: Chance = DEFAULT_CONFIDENCE
