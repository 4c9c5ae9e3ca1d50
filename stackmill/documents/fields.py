"""The kinds of value a key can have: how each is read from text, and the limits of what can be true.

A text is read as it would be from a file; a number or a record, from a library user, is taken as it is, in
inside units, and held to the same limits.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Annotated, Any

from pydantic import BeforeValidator, PlainValidator, WithJsonSchema

from stackmill.documents.wording import refuse
from stackmill.frozen import frozen
from stackmill.units import (
    KINDS,
    Measure,
    UnitsError,
    example,
    plain,
    quoted,
    read_measure,
    read_number,
    read_plus_minus,
)


@frozen
class Limits:
    """What a quantity of this kind can be, in its inside unit, with words for what lies outside.

    low is itself allowed unless `above` is set; high likewise unless `below` is set.
    """

    kind: str
    low: float
    high: float
    too_low: str
    too_high: str
    cure: str
    above: bool = False
    below: bool = False

    def check(self, value: float, text: str) -> None:
        """Raise UnitsError where a value lies outside, quoting the text it was read from."""
        if not math.isfinite(value):
            raise UnitsError(f"{text} is not a finite number", self.cure)
        if value < 0.0 <= self.low:
            raise UnitsError(f"{text} is below zero", "check its sign")
        if value < self.low or (self.above and value == self.low):
            raise UnitsError(f"{text} {self.too_low}", self.cure)
        if value > self.high or (self.below and value == self.high):
            raise UnitsError(f"{text} {self.too_high}", self.cure)


def _as_text(value: Any, kind: str) -> str:
    """A value that came as a number, in words for a message."""
    unit = KINDS[kind].inside
    return f"{value:g} {unit}".removesuffix(" 1") if isinstance(value, int | float) else repr(value)


def _text_of(value: Any, kind: str) -> str:
    if not isinstance(value, str):
        shape = {list: "a list", tuple: "a list", dict: "a group of keys", type(None): "nothing"}
        raise UnitsError(f"{shape.get(type(value), 'this')} stands where a number belongs", example(kind))
    return value


def _number_reader(limits: Limits) -> Callable[[Any], float]:
    def read(value: Any) -> float:
        if isinstance(value, int | float) and not isinstance(value, bool):
            limits.check(float(value), _as_text(value, limits.kind))
            return float(value)
        number = read_number(_text_of(value, limits.kind), limits.kind)
        limits.check(number, " ".join(value.split()))
        return number

    return read


def _measure_reader(limits: Limits) -> Callable[[Any], Measure]:
    def read(value: Any) -> Measure:
        if isinstance(value, Measure):
            limits.check(value.value, _as_text(value.value, limits.kind))
            return value
        if isinstance(value, int | float) and not isinstance(value, bool):
            return read(Measure(float(value)))
        measure = read_measure(_text_of(value, limits.kind), limits.kind)
        limits.check(measure.value, " ".join(value.replace("+/-", "±").split("±")[0].split()).rstrip(","))
        if measure.across_sd and limits is not _THICKNESS:
            what = KINDS[limits.kind].name
            cure = "give the mill a profile or a uniformity" if limits is _CURRENT else "leave 'across die' out"
            raise UnitsError(f"only a thickness may differ across the die, not {what}", cure)
        if measure.value == 0.0 and (measure.sd or measure.across_sd):
            raise UnitsError(f"{quoted(value)} is an uncertain nothing", "give the value you expect, and its ±")
        return measure

    return read


def _error_reader(limits: Limits) -> Callable[[Any], Measure]:
    def read(value: Any) -> Measure:
        if isinstance(value, Measure):
            return value
        if isinstance(value, int | float) and not isinstance(value, bool):
            return Measure(0.0, float(value))
        try:
            sd = read_plus_minus(_text_of(value, limits.kind), limits.kind)
        except UnitsError as error:
            raise UnitsError(
                error.what, error.cure.replace("write ", "write ± ").replace("or ", "or ± ").replace("± ±", "±")
            ) from None
        limits.check(sd, " ".join(value.split()))
        return Measure(0.0, sd)

    return read


def _schema(limits: Limits, form: str) -> WithJsonSchema:
    name = KINDS[limits.kind].name
    return WithJsonSchema({"type": "string", "description": f"{name}, written as {form}", "examples": [form]})


# A third of an atomic layer is no film, and 1 mm is thicker than any wafer.
_THICKNESS = Limits(
    "length", 0.1, 1e6, "is thinner than an atom", "is thicker than a wafer", "check its number and unit"
)
_TOP = Limits("length", 0.0, 1e6, "is no height", "is thicker than a wafer", "check its number and unit")
_SIGN = "check its sign and unit"
# One atom across; a cell repeats, so 10 mm is a die, not a cell.
_SIZE = Limits("length", 0.1, 1e7, "is smaller than an atom", "is larger than a die", _SIGN)
_PLAN = Limits("length", -1e7, 1e7, "is further away than a die is wide", "is further away than a die is wide", _SIGN)
# The largest wafer is 450 mm across.
_ON_DIE = Limits("length", -4.5e8, 4.5e8, "is off any wafer", "is off any wafer", _SIGN)
# Ions slower than 10 eV sputter nothing; above 50 keV they are implanted more than they mill.
# Narrower than 0.1 mm it is no broad beam; 1 m is wider than any mill.
_WIDTH = Limits("length", 1e5, 1e9, "is narrower than any broad beam", "is wider than any mill", _SIGN)
_ENERGY = Limits("energy", 10.0, 5e4, "is too slow to mill", "is beyond any ion mill", "mills run at 0.1 to 10 keV")
_INCIDENCE = Limits(
    "angle",
    0.0,
    90.0,
    "is not an incidence",
    "does not hit the surface",
    "0 deg is straight down, and it must stay below 90 deg",
    below=True,
)
_HALF_ANGLE = Limits(
    "angle", 0.0, 90.0, "swings not at all", "swings past grazing", "write rocking ± 20 deg", above=True
)
_AZIMUTH = Limits("angle", -360.0, 360.0, "is no azimuth", "is no azimuth", "write an angle from 0 to 360 deg")
# 45 deg either way is no beam any more.
_DIVERGENCE = Limits("angle", 0.0, 45.0, "is no half-angle", "is no beam", "a mill's beam has 1 to 10 deg")
_ZERO_ERROR = Limits("angle", 0.0, 10.0, "is no error", "is no dial", "give the dial's sd, as in ± 1 deg")
# A focused beam may reach more, but this program's rates are for broad beams.
_CURRENT = Limits(
    "current_density",
    0.0,
    100.0,
    "mills nothing",
    "is beyond any broad beam",
    "broad beams carry 0.1 to 2 mA/cm2",
    above=True,
)
_SHARE = Limits("fraction", 0.0, 1.0, "is no share", "is more than everything", "write 0 to 100 %")
_SOME_SHARE = Limits(
    "fraction",
    0.0,
    1.0,
    "is no share of anything",
    "is more than everything",
    "write up to 100 %",
    above=True,
)
_DENSITY = Limits(
    "fraction",
    0.0,
    1.0,
    "is no share of anything",
    "leaves nothing between",
    "write a share below 100 %, or make the feature solid in a region",
    above=True,
    below=True,
)
# A scale off by a third is no measurement.
_SCALE = Limits("fraction", 0.0, 0.3, "is no error", "is no measured scale", "give the scale's sd, as in ± 2 %")
_UNEVEN = Limits("fraction", 0.0, 1.0, "is no error", "is no uniformity", "give (max-min)/(max+min), as in ± 3 %")
_CHANCE = Limits(
    "fraction",
    0.0,
    1.0,
    "asks for nothing",
    "can never be had",
    "write a chance such as 90 %",
    above=True,
    below=True,
)
_SIDEWALL = Limits("fraction", 0.0, 1.0, "leaves no side wall", "is more than on top", "write 1 to 100 %", above=True)
# No step runs for a thousand hours.
_DURATION = Limits("time", 0.0, 3.6e6, "is no time", "is longer than a month", "check its unit", above=True)
_LATENESS = Limits("time", 0.0, 3.6e4, "is no time", "is not stopping by eye", "give the eye's sd, as in ± 20 s")
# 100 um/min etches through a wafer in minutes.
_RATE = Limits("rate", 0.0, 1e5 / 60.0, "would grow, not mill", "is too fast to be true", "write 0 nm/min or more")

Thickness = Annotated[Measure, PlainValidator(_measure_reader(_THICKNESS)), _schema(_THICKNESS, "600 nm ± 8 %")]
Top = Annotated[Measure, PlainValidator(_measure_reader(_TOP)), _schema(_TOP, "5.37 um ± 50 nm")]
Depth = Annotated[float, PlainValidator(_number_reader(_THICKNESS)), _schema(_THICKNESS, "300 nm")]
Size = Annotated[float, PlainValidator(_number_reader(_SIZE)), _schema(_SIZE, "1.6 um")]
PlanPosition = Annotated[float, PlainValidator(_number_reader(_PLAN)), _schema(_PLAN, "2.4 um")]
DiePosition = Annotated[float, PlainValidator(_number_reader(_ON_DIE)), _schema(_ON_DIE, "2.1 mm")]
Energy = Annotated[float, PlainValidator(_number_reader(_ENERGY)), _schema(_ENERGY, "2 keV")]
Incidence = Annotated[float, PlainValidator(_number_reader(_INCIDENCE)), _schema(_INCIDENCE, "45 deg")]
Divergence = Annotated[float, PlainValidator(_number_reader(_DIVERGENCE)), _schema(_DIVERGENCE, "2 deg")]
ZeroError = Annotated[Measure, PlainValidator(_error_reader(_ZERO_ERROR)), _schema(_ZERO_ERROR, "± 1 deg")]
Share = Annotated[Measure, PlainValidator(_measure_reader(_SHARE)), _schema(_SHARE, "3 % ± 1 %")]
SomeShare = Annotated[float, PlainValidator(_number_reader(_SOME_SHARE)), _schema(_SOME_SHARE, "50 %")]
PatternDensity = Annotated[float, PlainValidator(_number_reader(_DENSITY)), _schema(_DENSITY, "20 %")]
ScaleError = Annotated[Measure, PlainValidator(_error_reader(_SCALE)), _schema(_SCALE, "± 2 %")]
Uniformity = Annotated[Measure, PlainValidator(_error_reader(_UNEVEN)), _schema(_UNEVEN, "± 3 %")]
Distance = Annotated[float, PlainValidator(_number_reader(_WIDTH)), _schema(_WIDTH, "10 mm")]
Chance = Annotated[float, PlainValidator(_number_reader(_CHANCE)), _schema(_CHANCE, "90 %")]
Sidewall = Annotated[float, PlainValidator(_number_reader(_SIDEWALL)), _schema(_SIDEWALL, "70 %")]
Duration = Annotated[float, PlainValidator(_number_reader(_DURATION)), _schema(_DURATION, "25 min")]
Lateness = Annotated[Measure, PlainValidator(_error_reader(_LATENESS)), _schema(_LATENESS, "± 20 s")]
Rate = Annotated[Measure, PlainValidator(_measure_reader(_RATE)), _schema(_RATE, "90 nm/min ± 10 %")]

read_half_angle = _number_reader(_HALF_ANGLE)
read_azimuth = _number_reader(_AZIMUTH)
read_thickness = _number_reader(_THICKNESS)
read_some_share = _number_reader(_SOME_SHARE)
_read_current = _measure_reader(_CURRENT)


FROM_COUPON = "from coupon"
UNKNOWN_CURRENT = Measure(1.0, 3.0)
"""What stands for a current that only coupons know: 1 mA/cm2 within a factor 20, which is as good as nothing."""


def _current_density(value: Any) -> Measure:
    if isinstance(value, str) and value.strip().casefold() == FROM_COUPON:
        return UNKNOWN_CURRENT
    return _read_current(value)


CurrentDensity = Annotated[
    Measure,
    PlainValidator(_current_density),
    WithJsonSchema({"anyOf": [_schema(_CURRENT, "0.5 mA/cm2 ± 6 %").json_schema, {"const": FROM_COUPON}]}),
]


def _name(value: Any) -> Any:
    if not isinstance(value, str):
        return value
    text = " ".join(value.split())
    if not text:
        raise refuse("this name is empty", "write a name")
    if len(text) > 80:
        raise refuse(f"the name {quoted(text)} has {len(text)} letters", "use at most 80")
    if "/" in text:
        raise refuse(f"the name {quoted(text)} has a / in it", "use another sign; LAYER / FEATURE points to a feature")
    return text


Name = Annotated[str, BeforeValidator(_name)]
"""A layer's, feature's, region's or step's name: one line, without /, at most 80 letters."""


def _label(value: Any) -> Any:
    return " ".join(value.split()) if isinstance(value, str) else value


Label = Annotated[str, BeforeValidator(_label)]
"""A text that is matched against names, or shown: spaces count once."""


def one_or_more(value: Any) -> Any:
    """A single item as a list of one."""
    return value if isinstance(value, list | tuple) or value is None else [value]


def _on_off(value: Any) -> bool:
    if isinstance(value, bool):
        return value
    choices = {"on": True, "yes": True, "off": False, "no": False}
    word = str(value).strip().casefold()
    if word not in choices:
        raise UnitsError(f"{quoted(str(value))} is neither on nor off", "write on or off")
    return choices[word]


OnOff = Annotated[bool, PlainValidator(_on_off), WithJsonSchema({"enum": ["on", "off", "yes", "no"]})]


def split_reference(text: str) -> tuple[str, str | None]:
    """`metal 2 / bus` as a layer and a feature; the feature is None where only a layer is named."""
    layer, slash, feature = text.partition("/")
    if slash and not (layer.strip() and feature.strip()):
        raise refuse(f"{quoted(text)} names no layer and feature", "write LAYER / FEATURE")
    return " ".join(layer.split()), " ".join(feature.split()) if slash else None


def percent(share: float) -> str:
    """A share as people write it."""
    return f"{plain(100 * share)} %"
