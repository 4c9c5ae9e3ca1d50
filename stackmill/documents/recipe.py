"""The recipe file: steps in order, each of which lowers, strips, covers or uncovers.

Energies are held in eV, angles in degrees from the normal, times in s, rates in nm/s.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar, Literal

from pydantic import (
    BeforeValidator,
    Discriminator,
    Field,
    PlainValidator,
    Tag,
    WithJsonSchema,
    field_validator,
    model_validator,
)

from stackmill.documents.fields import (
    CurrentDensity,
    Duration,
    Energy,
    Incidence,
    Label,
    Lateness,
    Name,
    Rate,
    SomeShare,
    one_or_more,
    read_azimuth,
    read_half_angle,
    split_reference,
)
from stackmill.documents.reading import Record
from stackmill.documents.wording import Refusal, Sentence, nearest, refuse
from stackmill.units import Measure, plain, quoted

OTHER = "other"
"""The name under which a process states the rate of every material it does not list."""

Labels = Annotated[tuple[Label, ...], BeforeValidator(one_or_more), Field(min_length=1)]


@dataclass(frozen=True, slots=True)
class Motion:
    """How the sample moves under the beam. Angles in deg; the azimuth is the beam's, in plan.

    Rocking swings the incidence by ± half_angle about the set one, uniformly in time.
    """

    kind: Literal["rotating", "still", "rocking"]
    half_angle: float = 0.0
    azimuth: float = 0.0

    def __str__(self) -> str:
        swing = f" ± {plain(self.half_angle)} deg" if self.kind == "rocking" else ""
        at = f" at {plain(self.azimuth)} deg" if self.azimuth else ""
        return f"{self.kind}{swing}{at}"


_MOTIONS = ("rotating", "still", "rocking ± 20 deg")
_MOTION = re.compile(r"(?P<kind>[a-z]+)\s*(?:±(?P<half>[^±]*?))?\s*(?:\bat\b(?P<at>.*))?")


def read_motion(value: Any) -> Motion:
    """`rotating`, `still`, `still at 30 deg`, `rocking ± 20 deg`, `rocking ± 20 deg at 90 deg`."""
    if isinstance(value, Motion):
        return value
    text = " ".join(str(value).replace("+/-", "±").replace("+-", "±").split())
    found = _MOTION.fullmatch(text)
    kind = found["kind"] if found else ""
    if found is None or kind not in ("rotating", "still", "rocking"):
        first = text.split(" ")[0]
        near = nearest(first, ("rotating", "still", "rocking"))
        cure = f"did you mean {near}?" if near else "write rotating, still or rocking ± 20 deg"
        if near == "rocking":
            cure = "write rocking ± 20 deg"
        raise refuse(f"{quoted(text)} is no motion", cure)
    if (found["half"] is not None) != (kind == "rocking"):
        if kind == "rocking":
            raise refuse("this rocking does not say how far", "write rocking ± 20 deg")
        raise refuse(f"{kind} has no half-angle", f"write {kind}, or rocking ± {found['half'].strip()}")
    if found["at"] is not None and kind == "rotating":
        raise refuse("rotating has no azimuth", "write rotating, or still at 30 deg")
    half = read_half_angle(found["half"]) if found["half"] is not None else 0.0
    azimuth = read_azimuth(found["at"]) if found["at"] is not None else 0.0
    return Motion(kind, half, azimuth)  # type: ignore[arg-type]  # kind is one of the three: refused above


def _reference(value: Any) -> Any:
    """`via 1` and `via 1 / plug` as the short forms of {layer, feature}."""
    if not isinstance(value, str):
        return value
    layer, feature = split_reference(value)
    return {"layer": layer} if feature is None else {"layer": layer, "feature": feature}


class Target(Record):
    """What ends a step by being reached: a layer's top, or that of a feature in it.

    in_: the regions that count (the goal's, or all); area: the share of their area that must be down.
    """

    what: ClassVar[str] = "'to'"
    layer: Label = Field(examples=["via 1"])
    feature: Label | None = None
    in_: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = Field(default=(), alias="in")
    area: SomeShare | None = None


class Seen(Record):
    """What the eye stops a step on: as Target; within: sd (s) of when it is noticed, as `± 20 s`."""

    what: ClassVar[str] = "'seen'"
    layer: Label = Field(examples=["metal 1"])
    feature: Label | None = None
    in_: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = Field(default=(), alias="in")
    area: SomeShare = 0.5
    within: Lateness = Measure(0.0)


class Cover(Record):
    """Protect regions with a material until they are uncovered."""

    what: ClassVar[str] = "cover step"
    kind: ClassVar[str] = "cover"
    name: Name
    cover: Labels = Field(examples=["[bond pad]"])
    with_: Label = Field(alias="with", examples=["silver paint"])


class Uncover(Record):
    """Bare covered regions again."""

    what: ClassVar[str] = "uncover step"
    kind: ClassVar[str] = "uncover"
    name: Name
    uncover: Labels = Field(examples=["[bond pad]"])


class Strip(Record):
    """Take the leading segments of some materials off every bare column, in no time of the clock."""

    what: ClassVar[str] = "strip step"
    kind: ClassVar[str] = "strip"
    name: Name
    strips: Labels = Field(examples=["[AlCu, TiN]"])


class _Ending(Record):
    """A step that goes on until its `for`, `to` or `seen` (exactly one)."""

    for_: Duration | None = Field(default=None, alias="for", examples=["25 min"])
    to: Annotated[Target | None, BeforeValidator(_reference)] = None
    seen: Annotated[Seen | None, BeforeValidator(_reference)] = None

    @model_validator(mode="after")
    def _one_end(self) -> _Ending:
        ends = {"for": self.for_, "to": self.to, "seen": self.seen}
        given = [key for key, value in ends.items() if value is not None]
        if not given:
            name = quoted(str(getattr(self, "name", "")))
            raise Refusal(Sentence(f"step {name} never ends", "add for: 10 min, to: LAYER or seen: {layer: LAYER}"))
        if len(given) > 1:
            raise Refusal(
                Sentence(f"a step with '{given[0]}' cannot have '{given[1]}' too", "keep one of them"),
                given[1],
            )
        return self


class Process(_Ending):
    """Lower by known rates (nm/s): a wet or plasma etch. `other` is the rate of all materials not listed."""

    what: ClassVar[str] = "process step"
    kind: ClassVar[str] = "process"
    name: Name
    rates: dict[Label, Rate] = Field(min_length=1, examples=["{SiN PECVD: 90 nm/min ± 10 %, other: 0 nm/min}"])

    def rate(self, material: str) -> Measure | None:
        """The rate of a material, listed or `other`; None where neither is given."""
        return self.rates.get(material, self.rates.get(OTHER))


class Beam(_Ending):
    """Mill with the beam. energy (eV), incidence (deg from the normal), motion of the sample.

    current_density (mA/cm2) stands in for the mill's own in this step.
    """

    what: ClassVar[str] = "beam step"
    kind: ClassVar[str] = "beam"
    name: Name
    energy: Energy = Field(examples=["1 keV"])
    incidence: Incidence = Field(examples=["45 deg"])
    motion: Annotated[
        Motion, PlainValidator(read_motion), WithJsonSchema({"type": "string", "examples": list(_MOTIONS)})
    ] = Field(examples=["rotating"])
    current_density: CurrentDensity | None = None

    @model_validator(mode="after")
    def _stays_above_the_surface(self) -> Beam:
        if self.motion.kind == "rocking" and self.incidence + self.motion.half_angle >= 90.0:
            incidence, half_angle = plain(self.incidence), plain(self.motion.half_angle)
            says = Sentence(
                f"rocking {incidence} deg by ± {half_angle} deg goes past grazing",
                f"rock by less than ± {plain(90.0 - self.incidence)} deg, or tilt less",
            )
            raise Refusal(says, "motion")
        return self


Step = Cover | Uncover | Strip | Process | Beam

_KEYS = {"cover": "cover", "uncover": "uncover", "strips": "strip", "rates": "process"}
_BEAM_KEYS = {"energy", "incidence", "motion", "current_density"}


def _kind_of(value: Any) -> str | None:
    """Which kind of step a block of keys is, by the key that only that kind has."""
    if not isinstance(value, Mapping):
        return f"<{getattr(value, 'kind', 'beam')}>"
    found = next((kind for key, kind in _KEYS.items() if key in value), None)
    if found is None:
        found = "beam" if _BEAM_KEYS & value.keys() else None
    if found is None:
        near = [nearest(str(key), [*_KEYS, *_BEAM_KEYS]) for key in value if key not in ("name", "for", "to", "seen")]
        found = next((_KEYS.get(key, "beam") for key in near if key), None)
    return f"<{found}>" if found else None


_AnyStep = Annotated[
    Annotated[Cover, Tag("<cover>")]
    | Annotated[Uncover, Tag("<uncover>")]
    | Annotated[Strip, Tag("<strip>")]
    | Annotated[Process, Tag("<process>")]
    | Annotated[Beam, Tag("<beam>")],
    Discriminator(
        _kind_of,
        custom_error_type="no_kind",
        custom_error_message="this step does not say what it does",
        custom_error_context={
            "cure": "a beam step has energy, incidence and motion; others rates, strips, cover or uncover"
        },
    ),
]


DEFAULT_RECIPE = """\
title: default recipe (one step)
steps: [{name: mill down, energy: 1 keV, incidence: 45 deg, motion: rotating}]
"""
"""The recipe file that stands in for a lone stack; its step goes on to the goal, or to the substrate."""


class Recipe(Record):
    """Steps in order; a step without a name is called `step 3` by its place."""

    what: ClassVar[str] = "recipe file"
    title: Label = ""
    steps: tuple[_AnyStep, ...] = Field(
        examples=["[{energy: 1 keV, incidence: 45 deg, motion: rotating, for: 10 min}]"]
    )

    @field_validator("steps", mode="before")
    @classmethod
    def _name_the_nameless(cls, steps: Any) -> Any:
        if not isinstance(steps, list | tuple):
            return steps
        return [
            {"name": f"step {k + 1}", **step} if isinstance(step, Mapping) else step for k, step in enumerate(steps)
        ]

    @model_validator(mode="after")
    def _has_steps(self) -> Recipe:
        if not self.steps:
            raise Refusal(Sentence("this recipe has no steps", "add at least one"), "steps")
        seen: set[str] = set()
        for k, step in enumerate(self.steps):
            if step.name in seen:
                says = Sentence(f"a second step is called {quoted(step.name)}", "give each a name of its own")
                raise Refusal(says, "steps", k, "name")
            seen.add(step.name)
        return self
