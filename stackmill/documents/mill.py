"""The mill file: what the machine is, and was measured to be."""

from __future__ import annotations

import math
from typing import ClassVar, Literal

from pydantic import Field

from stackmill.documents.fields import (
    UNKNOWN_CURRENT,
    CurrentDensity,
    Divergence,
    Label,
    OnOff,
    Share,
    Uniformity,
    ZeroError,
)
from stackmill.documents.profile import Profile
from stackmill.documents.reading import Record
from stackmill.units import Measure

Gas = Literal["neon", "argon", "krypton", "xenon"]


class Stage(Record):
    """The tilt stage. dial: from what its scale counts; zero_error: the sd (deg) of where its zero is."""

    what: ClassVar[str] = "stage"
    dial: Literal["from normal", "from surface"] = Field(default="from normal", examples=["from normal"])
    zero_error: ZeroError = Field(default=Measure(0.0, 1.0), examples=["± 1 deg"])


class Mount(Record):
    """How the sample is held; a note for the run."""

    what: ClassVar[str] = "mount"
    contact: Label = Field(default="", examples=["silver paste"])


class Mill(Record):
    """A broad-beam ion mill.

    current_density (mA/cm2) in the plane normal to the beam; divergence: half-angle (deg) that holds 63 %
    (1 - 1/e) of the current; doubly_charged: share of the current carried by doubly charged ions; profile: how
    the current density changes across the die; uniformity: (max - min) / (max + min) of it where its course is
    not known.
    """

    what: ClassVar[str] = "mill file"
    title: Label = ""
    gas: Gas = Field(examples=["argon"])
    current_density: CurrentDensity = Field(examples=["0.5 mA/cm2 ± 6 %"])
    divergence: Divergence = 0.0
    doubly_charged: Share = Measure(0.0)
    profile: Profile | None = None
    uniformity: Uniformity = Measure(0.0)
    stage: Stage = Field(default_factory=Stage)
    mount: Mount = Mount()
    neutraliser: OnOff = True

    @property
    def from_coupon(self) -> bool:
        """Whether only a calibration knows the current."""
        return self.current_density == UNKNOWN_CURRENT

    @property
    def uniformity_sd(self) -> float:
        """Relative sd of the current density from region to region.

        Values spread evenly over ± u have an sd of u / sqrt(3).
        """
        return self.uniformity.sd / math.sqrt(3.0)


DEFAULT_MILL = """\
title: "default mill (invented round numbers, not your machine)"
gas: argon
current_density: 0.5 mA/cm2 ± 10 %
divergence: 2 deg
doubly_charged: 3 %
stage: {dial: from normal, zero_error: ± 1 deg}
"""
"""The mill file that stands in where none is given."""
