"""Material files: the entries of the library, and a lab's own materials laid over it.

Every text with a unit is read on entry; the records hold inside units (eV, g/cm3, K, nm/s, mA/cm2, deg).
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from stackmill.documents.wording import Refusal, Sentence
from stackmill.units import Measure, UnitsError, read_measure, read_number

MaterialKind = Literal["metal", "semiconductor", "dielectric", "organic", "carbon", "composite"]


def _quantity(kind: str) -> BeforeValidator:
    """Reads text such as `2.2 g/cm3 ± 1 %` into a Measure; a Measure passes as it is."""

    def read(value: Any) -> Any:
        return read_measure(value, kind) if isinstance(value, str) else value

    return BeforeValidator(read)


def _exact(kind: str) -> BeforeValidator:
    """Reads text such as `500 eV` into a float; a float passes as it is."""

    def read(value: Any) -> Any:
        return read_number(value, kind) if isinstance(value, str) else value

    return BeforeValidator(read)


def _yes_no(value: Any) -> Any:
    """`yes` and `no` as the only words for a truth value."""
    if isinstance(value, str):
        if value not in ("yes", "no"):
            raise UnitsError(f"'{value}' is neither yes nor no", "write yes or no")
        return value == "yes"
    return value


YesNo = Annotated[bool, BeforeValidator(_yes_no)]
Density = Annotated[Measure, _quantity("density")]
BindingEnergy = Annotated[Measure, _quantity("binding_energy")]
Temperature = Annotated[Measure, _quantity("temperature")]
MillingRate = Annotated[Measure, _quantity("rate")]
CurrentDensity = Annotated[Measure, _quantity("current_density")]
EnergyEv = Annotated[float, _exact("energy")]
AngleDeg = Annotated[float, _exact("angle")]
Finite = Annotated[float, Field(allow_inf_nan=False)]
Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]


class Record(BaseModel):
    """Base of all records here: frozen, unknown keys refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", arbitrary_types_allowed=True)


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
    """One measured yield the law was tied to: ln is ln(measured/law) before the tie, sd that of the row's ln."""

    ev: Positive
    atoms_per_ion: Positive
    ln: Finite
    sd: Positive
    source: str
    seen: YesNo


class FitEntry(Record):
    """How the law was tied to measured yields: yield = law x factor x (E/at)^exponent.

    ln_sd: of ln yield between the ends of `range`; outside them it grows with the distance in ln E, by `below`
    or `above` a factor e. rms: of the rows about the tie.
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
            raise Refusal(
                Sentence("an angular shape needs all of f, b and c, or none of them", "add the missing ones")
            )
        return self


class MeltingEntry(Record):
    """A melting point."""

    value: Temperature
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
    composition: dict[str, Positive]
    density: DensityEntry
    law: str
    constants: ConstantsEntry
    formation: FormationEntry | None = None
    fit: FitEntry
    other_gases: OtherGasesEntry | None = None
    angular: AngularEntry
    estimate: YesNo = False
    melting: MeltingEntry | None = None
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

    rate: MillingRate
    energy: EnergyEv
    incidence: AngleDeg
    current_density: CurrentDensity
    same_day: YesNo = False

    @model_validator(mode="after")
    def _plausible(self) -> MeasuredRate:
        if self.rate.value <= 0.0 or self.energy <= 0.0 or self.current_density.value <= 0.0:
            raise Refusal(
                Sentence(
                    "a measured rate needs a rate, an energy and a current density above zero",
                    "write it like {rate: 41 nm/min ± 4 %, energy: 1 keV, incidence: 45 deg,"
                    " current_density: 0.5 mA/cm2}",
                )
            )
        if not 0.0 <= self.incidence < 90.0:
            raise Refusal(
                Sentence(
                    f"an incidence of {self.incidence:g} deg is not from the surface normal",
                    "give the angle from the normal, 0 deg to below 90 deg",
                ),
                "incidence",
            )
        return self


def _as_list(value: Any) -> Any:
    return [value] if isinstance(value, dict) else value


class LabMaterial(Record):
    """A lab's own material: lays its keys over the library's entry of that name, or is `like` another one.

    A material the library does not know and that is like no other needs composition and density; its yield is
    then an estimate. density in g/cm3; formation: heat of formation per formula unit of composition, eV.
    """

    name: str
    like: str | None = None
    title: str | None = None
    kind: MaterialKind | None = None
    aliases: tuple[str, ...] = ()
    composition: dict[str, Positive] | None = None
    density: Density | None = None
    formation: BindingEnergy | None = None
    measured_rate: Annotated[tuple[MeasuredRate, ...], BeforeValidator(_as_list)] = ()
    toxicity: str | None = None

    @model_validator(mode="after")
    def _complete(self) -> LabMaterial:
        if self.density is not None and self.density.value <= 0.0:
            raise Refusal(
                Sentence("a density has to be above zero", "write it like 2.2 g/cm3 ± 2 %"), "density"
            )
        if self.composition is not None and self.density is None and self.like is None:
            raise Refusal(
                Sentence("a composition needs a density beside it", "add density: 2.2 g/cm3 ± 5 %"),
                "composition",
            )
        if self.formation is not None and self.composition is None:
            raise Refusal(
                Sentence(
                    "a formation heat needs the composition it belongs to", "add composition: {Si: 1, O: 2}"
                ),
                "formation",
            )
        if self.like is not None and self.composition is not None:
            raise Refusal(
                Sentence(
                    "like and composition together: one of them would be ignored", "keep one of the two"
                ),
                "composition",
            )
        return self


class MaterialsFile(Record):
    """A lab's materials file."""

    materials: tuple[LabMaterial, ...]
