"""The calibration file: what coupons said about this mill on this day. The program writes it; jobs bind it."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import BeforeValidator, Field

from stackmill.documents.fields import CurrentDensity, Energy, Incidence, Label, Rate, SomeShare, one_or_more
from stackmill.documents.mill import Gas
from stackmill.documents.reading import Record


class CouponRate(Record):
    """One coupon as the fit took it.

    rate: with the sd of its own measurement; weight: what it counts, 100 % unless it is out of line with the rest;
    out_of_line: how far it was from the rest, in sds, for the reader.
    """

    what: ClassVar[str] = "coupon"
    name: Label
    material: Label
    energy: Energy = Field(examples=["1 keV"])
    incidence: Incidence = Field(examples=["45 deg"])
    current_density: CurrentDensity = Field(examples=["0.5 mA/cm2"])
    rate: Rate = Field(examples=["41 nm/min ± 4 %"])
    weight: SomeShare = 1.0
    out_of_line: Label = ""


class CalibrationFile(Record):
    """A calibration. Whatever is not under `coupons` tells the reader where it comes from and how good it is.

    verdict: good or doubtful (a refused fit is not written); data, data_sha256: the coupon file; made: the day.
    """

    what: ClassVar[str] = "calibration file"
    title: Label = ""
    mill: Label = ""
    gas: Gas = Field(examples=["argon"])
    made: Label = ""
    data: Label = ""
    data_sha256: Label = ""
    verdict: Literal["good", "doubtful"] = "good"
    reduced_chi_square: Label = ""
    learnt: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = ()
    coupons: tuple[CouponRate, ...] = Field(min_length=1)
