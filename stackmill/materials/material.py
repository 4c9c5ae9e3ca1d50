"""What is known of a material. Numbers only: the laws that use them are met in stackmill.rates."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from stackmill.constants import ATOMS_1E22_PER_MOL_CM3
from stackmill.documents.film_forms import RelativeRate
from stackmill.frozen import frozen
from stackmill.units import Measure


@frozen
class Sourced:
    """A number with everything it must not travel without.

    value and sd in `unit`; conditions: what it is true of; source: a key of the library's sources; seen:
    whether a copy of the source was seen, or the number is from memory.
    """

    value: float
    sd: float
    unit: str
    conditions: str
    source: str
    seen: bool


@frozen
class YieldRow:
    """A measured yield: energy [eV], atoms/ion, ln(measured/law) before the tie, sd of that ln, source."""

    energy_ev: float
    atoms_per_ion: float
    ln_over_law: float
    ln_sd: float
    source: str
    seen: bool


@frozen
class YieldTie:
    """yield = law x factor x (E/at_ev)^exponent, and how well that is known.

    ln_sd: of ln yield within range_ev; below_per_efold, above_per_efold: what the sd gains for each factor e
    in energy outside it. rms: of the rows' ln about the tie. basis: in words, what it rests on.
    """

    factor: float
    exponent: float
    at_ev: float
    ln_sd: float
    range_ev: tuple[float, float]
    below_per_efold: float
    above_per_efold: float
    rms: float
    basis: str
    rows: tuple[YieldRow, ...] = ()


@frozen
class AngularData:
    """f, b, c of the angular shape as polynomials in s = sqrt(Eth/E), lowest power first; empty: mass rule.

    ln_sd_60: sd of ln(Y/Y0) at 60 degrees; it enters elsewhere times sin^2(th)/sin^2(60 deg).
    """

    f: tuple[float, ...]
    b: tuple[float, ...]
    c: tuple[float, ...]
    ln_sd_60: float
    conditions: str
    source: str
    seen: bool


@frozen
class OtherGases:
    """Constants and factor of Yamamura-Tawara for the gases the main law does not know; ln_sd is added."""

    constants: Mapping[str, float]
    factor: float
    ln_sd: float
    source: str
    seen: bool


@frozen
class Atom:
    """An element as a constituent of a compound: what an effective target is averaged from."""

    symbol: str
    z: int
    m_u: float
    us_ev: float
    q: float
    w_ev: float
    s: float
    source: str
    seen: bool


@frozen
class LabRate:
    """A milling rate measured on this mill: rate [nm/s], energy [eV], incidence [deg], current [mA/cm2]."""

    rate: Measure
    energy_ev: float
    incidence_deg: float
    current_density: Measure
    same_day: bool


@frozen
class Disagreement:
    """Two sources that differ: both sides, the one taken, and why."""

    what: str
    taken: str
    other: str
    why: str
    sources: tuple[str, ...]


@frozen
class Caution:
    """A short warning about a material and who says so; local rules and trained staff decide."""

    note: str
    source: str
    seen: bool


@frozen
class Alarm:
    """What goes wrong with the material when it gets hot; temperature in K."""

    what: str
    temperature: Sourced


@frozen
class Part:
    """One part of a mixture and its share of the volume."""

    material: Material
    share: float


@dataclass(frozen=True)
class Material:
    """One material, as the library (and the lab's overlay) knows it.

    composition: atoms of each element, any scale. mean_mass_u: mean atomic mass [u]. law: a name in
    laws.sputtering.LAWS; constants: by the law's names; empty means that they are to be averaged from `atoms`
    with formation_ev_per_atom, which makes the material an estimate. origin: library file or lab file.
    relative: the material mills at this multiple of the rate that all else here describes; follows: the material
    it was told as a multiple of, which may be one itself, and follows_ln_sd what that alone is worth; mixture: its rate
    is made of its parts' (law, constants and tie say nothing then), with mixing_ln_sd for what mixing is worth.
    """

    name: str
    title: str
    kind: str
    aliases: tuple[str, ...]
    composition: Mapping[str, float]
    density: Sourced
    mean_mass_u: float
    law: str
    constants: Mapping[str, float]
    constants_source: str
    constants_seen: bool
    tie: YieldTie | None
    angular: AngularData
    estimate: bool
    other_gases: OtherGases | None = None
    formation: Sourced | None = None
    atoms: tuple[Atom, ...] = ()
    melting: Sourced | None = None
    alarms: tuple[Alarm, ...] = ()
    toxicity: Caution | None = None
    disagreements: tuple[Disagreement, ...] = ()
    measured_rates: tuple[LabRate, ...] = ()
    notes: str = ""
    origin: str = "library"
    like: str = ""
    relative: RelativeRate | None = None
    follows: str = ""
    follows_ln_sd: float = 0.0
    mixture: tuple[Part, ...] = ()
    mixing_ln_sd: float = 0.0

    @property
    def atom_density_1e22(self) -> float:
        """Atoms per cm3, in 1e22."""
        return ATOMS_1E22_PER_MOL_CM3 * self.density.value / self.mean_mass_u

    @property
    def density_rel_sd(self) -> float:
        """Relative sd of the density, and so of the milling rate for a given yield."""
        return self.density.sd / self.density.value

    @property
    def formation_ev_per_atom(self) -> float:
        """Heat of formation [eV per atom of composition]; 0 where none is known."""
        if self.formation is None:
            return 0.0
        return self.formation.value / sum(self.composition.values())

    @property
    def angular_sd(self) -> float:
        """Sd of ln(Y/Y0) at 60 degrees."""
        return self.angular.ln_sd_60

    @property
    def source_keys(self) -> tuple[str, ...]:
        """Every source key this material leans on, in order of first use, each once."""
        keys = [self.density.source, self.constants_source, self.angular.source]
        keys += [row.source for row in self.tie.rows] if self.tie else []
        keys += [item.source for item in (self.formation, self.melting, self.toxicity) if item is not None]
        keys += [alarm.temperature.source for alarm in self.alarms]
        keys += [self.other_gases.source] if self.other_gases else []
        keys += [key for clash in self.disagreements for key in clash.sources]
        keys += [atom.source for atom in self.atoms]
        keys += [key for part in self.mixture for key in part.material.source_keys]
        return tuple(dict.fromkeys(keys))
