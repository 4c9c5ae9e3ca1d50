"""From the words of a library entry to a Material."""

from __future__ import annotations

from types import MappingProxyType

from stackmill.documents.material import AngularEntry, FitEntry, LibraryEntry
from stackmill.materials.material import (
    Alarm,
    AngularData,
    Caution,
    Disagreement,
    Material,
    OtherGases,
    Sourced,
    YieldRow,
    YieldTie,
)


def material_from_entry(entry: LibraryEntry) -> Material:
    """The Material an entry of the library describes."""
    density = entry.density
    return Material(
        name=entry.name,
        title=entry.title,
        kind=entry.kind,
        aliases=entry.aliases,
        composition=MappingProxyType(dict(entry.composition)),
        density=Sourced(
            density.value.value,
            density.value.sd,
            "g/cm3",
            f"{density.form}; {density.conditions}",
            density.source,
            density.seen,
        ),
        mean_mass_u=entry.constants.values["m2_u"],
        law=entry.law,
        constants=MappingProxyType(dict(entry.constants.values)),
        constants_source=entry.constants.source,
        constants_seen=entry.constants.seen,
        tie=_tie(entry.fit),
        angular=_angular(entry.angular),
        estimate=entry.estimate,
        other_gases=_other_gases(entry),
        formation=_formation(entry),
        melting=_melting(entry),
        alarms=_alarms(entry),
        toxicity=_toxicity(entry),
        disagreements=tuple(
            Disagreement(clash.what, clash.taken, clash.other, clash.why, clash.sources)
            for clash in entry.disagreements
        ),
        notes=entry.notes,
    )


def _tie(fit: FitEntry) -> YieldTie:
    rows = tuple(YieldRow(row.ev, row.atoms_per_ion, row.ln, row.sd, row.source, row.seen) for row in fit.rows)
    return YieldTie(
        factor=fit.factor,
        exponent=fit.exponent,
        at_ev=fit.at,
        ln_sd=fit.ln_sd,
        range_ev=fit.range,
        below_per_efold=fit.below,
        above_per_efold=fit.above,
        rms=fit.rms,
        basis=fit.basis,
        rows=rows,
    )


def _angular(entry: AngularEntry) -> AngularData:
    return AngularData(entry.f, entry.b, entry.c, entry.ln_sd_60, entry.conditions, entry.source, entry.seen)


def _other_gases(entry: LibraryEntry) -> OtherGases | None:
    other = entry.other_gases
    if other is None:
        return None
    return OtherGases(MappingProxyType(dict(other.values)), other.factor, other.ln_sd, other.source, other.seen)


def _formation(entry: LibraryEntry) -> Sourced | None:
    heat = entry.formation
    if heat is None:
        return None
    return Sourced(heat.value.value, heat.value.sd, "eV per formula unit", heat.conditions, heat.source, heat.seen)


def _melting(entry: LibraryEntry) -> Sourced | None:
    point = entry.melting
    if point is None:
        return None
    return Sourced(point.value.value, point.value.sd, "K", "at 1 atm", point.source, point.seen)


def _alarms(entry: LibraryEntry) -> tuple[Alarm, ...]:
    return tuple(
        Alarm(
            alarm.what,
            Sourced(alarm.temperature.value, alarm.temperature.sd, "K", "in vacuum", alarm.source, alarm.seen),
        )
        for alarm in entry.alarms
    )


def _toxicity(entry: LibraryEntry) -> Caution | None:
    caution = entry.toxicity
    return None if caution is None else Caution(caution.note, caution.source, caution.seen)
