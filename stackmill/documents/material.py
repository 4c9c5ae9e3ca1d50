"""Material files: the entries of the library, and a lab's own materials laid over it.

Every text with a unit is read on entry; the records hold inside units (eV, g/cm3, K, nm/s, mA/cm2, deg).
"""

from __future__ import annotations

import math
from typing import Annotated, Any, ClassVar, Literal, get_args

from pydantic import BeforeValidator, Field, PlainValidator, WithJsonSchema, model_validator

from stackmill.documents.fields import CurrentDensity, Energy, Incidence, Label, Rate, one_or_more
from stackmill.documents.film_forms import Mixture, RelativeRateText
from stackmill.documents.reading import Record
from stackmill.documents.wording import refuse
from stackmill.units import Measure, UnitsError, quoted, read_measure, read_number

MaterialKind = Literal["metal", "semiconductor", "dielectric", "organic", "carbon", "composite"]


def _quantity(kind: str, *, above_zero: bool = False) -> PlainValidator:
    """Reads text such as `2.2 g/cm3 ± 1 %` into a Measure; a Measure passes as it is."""

    def read(value: Any) -> Measure:
        measure = value if isinstance(value, Measure) else read_measure(_text(value), kind)
        if measure.across_sd:
            raise UnitsError("only a layer's thickness may differ across the die", "leave 'across die' out")
        if above_zero and measure.value <= 0.0:
            raise UnitsError(f"{quoted(str(value))} is not above zero", "check its sign and unit")
        return measure

    return PlainValidator(read)


def _exact(kind: str) -> PlainValidator:
    """Reads text such as `500 eV` into a float; a number passes as it is."""

    def read(value: Any) -> float:
        return float(value) if isinstance(value, int | float) else read_number(_text(value), kind)

    return PlainValidator(read)


def _text(value: Any) -> str:
    if not isinstance(value, str):
        raise UnitsError("something else stands where a number with its unit belongs", "write it like 2.2 g/cm3")
    return value


def _written_as(form: str) -> WithJsonSchema:
    return WithJsonSchema({"type": "string", "description": f"written as {form}"})


def _yes_no(value: Any) -> bool:
    """`yes` and `no` as the only words for a truth value."""
    if isinstance(value, bool):
        return value
    if value not in ("yes", "no"):
        raise UnitsError(f"{quoted(str(value))} is neither yes nor no", "write yes or no")
    return bool(value == "yes")


def _kind(value: Any) -> Any:
    """One of the kinds of material."""
    kinds = get_args(MaterialKind)
    if value is not None and value not in kinds:
        raise UnitsError(f"{quoted(str(value))} is no kind of material", f"write one of {', '.join(kinds)}")
    return value


def _share(value: Any) -> float:
    """The atoms of one element in a formula: a plain number above zero."""
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = math.nan
    if not 0.0 < number < math.inf:
        raise UnitsError(f"{quoted(str(value))} is no number of atoms", "write it like {Si: 1, O: 2}")
    return number


YesNo = Annotated[bool, PlainValidator(_yes_no), WithJsonSchema({"enum": ["yes", "no"]})]
Share = Annotated[float, PlainValidator(_share), WithJsonSchema({"type": ["number", "string"]})]
Density = Annotated[Measure, _quantity("density", above_zero=True), _written_as("2.2 g/cm3 ± 2 %")]
BindingEnergy = Annotated[Measure, _quantity("binding_energy"), _written_as("910.7 kJ/mol ± 1 %")]
Temperature = Annotated[Measure, _quantity("temperature"), _written_as("1358 K")]
EnergyEv = Annotated[float, _exact("energy"), _written_as("500 eV")]
Finite = Annotated[float, Field(allow_inf_nan=False)]
LabKind = Annotated[MaterialKind | None, PlainValidator(_kind), WithJsonSchema({"enum": list(get_args(MaterialKind))})]
Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]


class DensityEntry(Record):
    """A density, what it was the density of, and who says so."""

    value: Density
    form: Literal["bulk", "film"]
    conditions: str
    source: str
    seen: YesNo


class FormationEntry(Record):
    """Heat given off when one formula unit of `composition` forms from its elements."""

    value: BindingEnergy
    conditions: str
    source: str
    seen: YesNo


class ConstantsEntry(Record):
    """The constants a law needs, by the law's own names (units are in the names)."""

    values: dict[str, Finite]
    source: str
    seen: YesNo


class RowEntry(Record):
    """One measured yield the law was tied to: ln is ln(measured/law) before the tie, sd that of this ln."""

    ev: Positive
    atoms_per_ion: Positive
    ln: Finite
    sd: Positive
    source: str
    seen: YesNo


class FitEntry(Record):
    """How the law was tied to measured yields: yield = law x factor x (E/at)^exponent.

    ln_sd: of ln yield between the ends of `range`; outside them it grows with the distance in ln E, by
    `below` or `above` for each factor e. rms: of the rows about the tie.
    """

    factor: Positive
    exponent: Finite
    at: EnergyEv
    ln_sd: Positive
    range: tuple[EnergyEv, EnergyEv]
    below: Positive
    above: Positive
    rms: Annotated[float, Field(ge=0.0, allow_inf_nan=False)]
    basis: str
    rows: tuple[RowEntry, ...] = ()


class OtherGasesEntry(Record):
    """What serves for gases the main law does not hold for: Yamamura-Tawara with its own factor.

    ln_sd: of the step from argon to another gas, added to the material's own.
    """

    values: dict[str, Finite]
    factor: Positive
    ln_sd: Positive
    source: str
    seen: YesNo


class AngularEntry(Record):
    """Constants of the angular shape: polynomials in s = sqrt(Eth/E), lowest power first.

    Without f, b and c the rule in the mass ratio is used. ln_sd_60: sd of ln(Y/Y0) at 60 degrees.
    """

    f: tuple[Finite, ...] = ()
    b: tuple[Finite, ...] = ()
    c: tuple[Finite, ...] = ()
    ln_sd_60: Positive
    conditions: str
    source: str
    seen: YesNo

    @model_validator(mode="after")
    def _all_or_none(self) -> AngularEntry:
        if len({bool(self.f), bool(self.b), bool(self.c)}) != 1:
            raise refuse("an angular shape needs all of f, b and c, or none of them", "add the missing ones")
        return self


class MeltingEntry(Record):
    """A melting point."""

    value: Temperature
    source: str
    seen: YesNo


class AlarmEntry(Record):
    """What goes wrong with the material when it gets hot, and at what temperature."""

    what: str
    temperature: Temperature
    source: str
    seen: YesNo


class ToxicityEntry(Record):
    """A short caution; local rules and trained staff decide."""

    note: str
    source: str
    seen: YesNo


class DisagreementEntry(Record):
    """Two sources that differ: both sides, which one is taken and why."""

    what: str
    taken: str
    other: str
    why: str
    sources: tuple[str, ...]


class LibraryEntry(Record):
    """One material of the library, as its file says it."""

    name: str
    aliases: tuple[str, ...] = ()
    title: str
    kind: MaterialKind
    composition: dict[str, Share]
    density: DensityEntry
    law: str
    constants: ConstantsEntry
    formation: FormationEntry | None = None
    fit: FitEntry
    other_gases: OtherGasesEntry | None = None
    angular: AngularEntry
    estimate: YesNo = False
    melting: MeltingEntry | None = None
    alarms: tuple[AlarmEntry, ...] = ()
    toxicity: ToxicityEntry | None = None
    disagreements: tuple[DisagreementEntry, ...] = ()
    notes: str = ""


class AtomEntry(Record):
    """One element as a constituent: what the effective target of a compound is averaged from."""

    z: Annotated[int, Field(ge=1, le=118)]
    m_u: Positive
    us_ev: Positive
    q: Positive
    w_ev: Positive
    s: Positive
    source: str
    seen: YesNo


class AtomsFile(Record):
    """The elements' table."""

    atoms: dict[str, AtomEntry]


class CautionsFile(Record):
    """Cautions an element brings into any compound of it, by symbol."""

    cautions: dict[str, ToxicityEntry]


class SourceEntry(Record):
    """A full citation. kind says what sort of source it is."""

    kind: Literal["paper", "handbook", "data base", "package", "common practice", "own work", "web page"]
    citation: str


class SourcesFile(Record):
    """Source keys and what they stand for."""

    sources: dict[str, SourceEntry]


class MeasuredRate(Record):
    """A milling rate measured on this mill: rate in nm/s, energy in eV, incidence in deg, current in mA/cm2.

    same_day: measured with the current density the job states, so that the mill's current error is shared.
    """

    what: ClassVar[str] = "measured rate"
    rate: Rate = Field(examples=["41 nm/min ± 4 %"])
    energy: Energy = Field(examples=["1 keV"])
    incidence: Incidence = Field(examples=["45 deg"])
    current_density: CurrentDensity = Field(examples=["0.5 mA/cm2"])
    same_day: YesNo = False

    @model_validator(mode="after")
    def _above_zero(self) -> MeasuredRate:
        if self.rate.value <= 0.0:
            raise refuse("a measured rate has to be above zero", "write it like 41 nm/min ± 4 %", "rate")
        if self.rate.sd == 0.0:
            raise refuse("a measured rate needs its error", "write it like 41 nm/min ± 4 %", "rate")
        return self


class LabMaterial(Record):
    """A lab's own material: lays its keys over the library's entry of that name, or is told by other materials.

    like: a copy of another one; rate: mills at a multiple of another one's rate; mixture: volume shares of
    others. A material the library does not know and that is told by none of these needs composition and
    density; its yield is then an estimate. density in g/cm3; formation: heat of formation per formula unit of
    composition, eV.
    """

    what: ClassVar[str] = "material"
    name: Label = Field(examples=["SiO2 PECVD"])
    like: Label | None = None
    rate: RelativeRateText = None
    mixture: Mixture = None
    title: Label | None = None
    kind: LabKind = None
    aliases: Annotated[tuple[Label, ...], BeforeValidator(one_or_more)] = ()
    composition: dict[str, Share] | None = None
    density: Density | None = None
    formation: BindingEnergy | None = None
    measured_rate: Annotated[tuple[MeasuredRate, ...], BeforeValidator(one_or_more)] = ()
    toxicity: Label | None = None

    @property
    def references(self) -> tuple[str, ...]:
        """The names of the materials it is told by."""
        told = (self.like, self.rate.material if self.rate else None)
        return tuple(name for name in (*told, *(self.mixture or ())) if name is not None)

    @model_validator(mode="after")
    def _complete(self) -> LabMaterial:
        if not self.name:
            raise refuse("this material has no name", "give it one", "name")
        self._told_one_way()
        if self.composition is not None and self.density is None:
            raise refuse("a composition needs a density beside it", "add density: 2.2 g/cm3 ± 5 %", "composition")
        if self.formation is not None and self.composition is None:
            raise refuse(
                "a formation heat needs the composition it belongs to",
                "add composition: {Si: 1, O: 2}",
                "formation",
            )
        return self

    def _told_one_way(self) -> None:
        """Refuse two keys of which one would be ignored."""
        ways = [key for key in ("like", "rate", "mixture", "composition") if getattr(self, key) is not None]
        if len(ways) > 1:
            raise refuse(
                f"{ways[0]} and {ways[1]} stand together; one of them would be ignored",
                "keep one of the two",
                ways[1],
            )
        if self.density is not None and ways and ways[0] in ("rate", "mixture"):
            cure = "leave it out" if ways[0] == "rate" else "leave it out; the parts' densities are used"
            raise refuse(f"a density beside {ways[0]} would be ignored", cure, "density")


class MaterialsFile(Record):
    """A lab's materials file."""

    what: ClassVar[str] = "materials file"
    materials: Annotated[tuple[LabMaterial, ...], BeforeValidator(one_or_more)] = Field(
        examples=["[{name: my oxide, like: SiO2 PECVD, density: 2.1 g/cm3 ± 3 %}]"]
    )
