"""Materials on paper: the list, and one in full with every source."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from stackmill.materials.material import Material, Sourced
from stackmill.rates.yields import angular_shape, ln_yield_sd, normal_yield, rate_nm_per_s, threshold_ev
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped

_ENERGY_EV, _INCIDENCE_DEG, _CURRENT = 1000.0, 45.0, 0.5  # the setting the list quotes rates at
ROW_NAMES = (
    "material",
    "title",
    "kind",
    "density_g_per_cm3",
    "density_sd_g_per_cm3",
    "atom_density_1e22_per_cm3",
    "yield_atoms_per_ion",
    "yield_rel_sd",
    "rate_nm_per_min",
    "angular_sd",
    "threshold_ev",
    "estimate",
)


def machine_rows(materials: Sequence[Material]) -> list[dict[str, Any]]:
    """One dict a material: yields straight down at 1 keV argon, rates at 1 keV, 45 deg, 0.5 mA/cm2."""
    return [
        {
            "material": m.name,
            "title": m.title,
            "kind": m.kind,
            "density_g_per_cm3": m.density.value,
            "density_sd_g_per_cm3": m.density.sd,
            "atom_density_1e22_per_cm3": m.atom_density_1e22,
            "yield_atoms_per_ion": float(normal_yield(m, energy_ev=_ENERGY_EV)),
            "yield_rel_sd": float(ln_yield_sd(m, energy_ev=_ENERGY_EV)),
            "rate_nm_per_min": _rate(m),
            "angular_sd": m.angular_sd,
            "threshold_ev": threshold_ev(m),
            "estimate": m.estimate,
        }
        for m in materials
    ]


def as_json(materials: Sequence[Material], warnings: Sequence[str], paper: Paper) -> str:
    """The materials for machines."""
    return json_text(machine_rows(materials), {"inputs_sha256": None, "seed": None, "warnings": list(warnings)}, paper)


def as_csv(materials: Sequence[Material], paper: Paper) -> str:
    """The materials as CSV."""
    return csv_text(machine_rows(materials), ROW_NAMES, paper)


def listed(materials: Sequence[Material], paper: Paper, *, markdown: bool) -> str:
    """The library as one table."""
    rows = [
        [
            m.name,
            m.kind,
            f"{m.density.value:.4g}",
            f"{_rate(m):.3g}",
            f"± {100 * _rate_sd(m):.2g} %",
            _basis(m),
        ]
        for m in materials
    ]
    headers = ["material", "kind", "g/cm3", "nm/min", "sd", "rests on"]
    note = wrapped(
        f"Milling rates: argon, {_ENERGY_EV / 1e3:g} keV, {_INCIDENCE_DEG:g}° from the normal, {_CURRENT} mA/cm²;"
        " the sd is the yield's at 1 keV and the density's; an estimate is good to a factor 1.5 at best."
        " `stackmill materials NAME` shows every value and its source.",
        paper.width,
    )
    table = Grid(headers, rows, frozenset({2, 3, 4})).text("github" if markdown else "simple", paper.width)
    return paper.plain(f"{table}\n\n{note}")


def _basis(m: Material) -> str:
    if m.estimate:
        return "estimate"
    rows = len(m.tie.rows) if m.tie else 0
    return f"{rows} row{'s' if rows > 1 else ''}" if rows else "relatives"


def _rate(m: Material) -> float:
    at = {
        "energy_ev": _ENERGY_EV,
        "incidence_rad": np.radians(_INCIDENCE_DEG),
        "current_density_ma_per_cm2": _CURRENT,
    }
    return 60.0 * float(rate_nm_per_s(m, **at))


def _rate_sd(m: Material) -> float:
    return float(np.hypot(ln_yield_sd(m, energy_ev=_ENERGY_EV), m.density_rel_sd))


def in_full(materials: Sequence[Material], citation: Callable[[str], str], paper: Paper) -> str:
    """Every value of some materials, each with unit, sd, conditions and source."""
    parts = ["\n".join(wrapped(line, paper.width, "    ") for line in _full(m, citation)) for m in materials]
    return paper.plain("\n\n".join(parts))


def _full(m: Material, citation: Callable[[str], str]) -> list[str]:
    def told(source: str, seen: bool) -> str:
        return f"[{citation(source)}{'' if seen else '; from memory'}]"

    shape = angular_shape(m, energy_ev=_ENERGY_EV)
    rise = float(shape.ratio(np.radians(60.0)))
    sd = float(ln_yield_sd(m, energy_ev=_ENERGY_EV))
    atoms_per_ion = float(normal_yield(m, energy_ev=_ENERGY_EV))
    return [
        *_what_it_is(m, told),
        *_law_and_tie(m, told),
        f"  angular shape: Y(60°)/Y(0) = {rise:.3g} ± {100 * m.angular_sd:.0f} % at 1 keV argon, {m.angular.conditions}"
        f" {told(m.angular.source, m.angular.seen)}",
        *(f"  sources differ on {d.what}: {d.taken} taken, not {d.other}: {d.why}" for d in m.disagreements),
        *([f"  caution: {m.toxicity.note} {told(m.toxicity.source, m.toxicity.seen)}"] if m.toxicity else []),
        *([f"  note: {m.notes}"] if m.notes else []),
        f"  so: {atoms_per_ion:.3g} atoms/ion straight down at 1 keV ± {100 * sd:.0f} %;"
        f" {_rate(m):.3g} nm/min at 1 keV, 45°, 0.5 mA/cm²",
    ]


_Told = Callable[[str, bool], str]


def _what_it_is(m: Material, told: _Told) -> list[str]:
    def sourced(what: str, s: Sourced) -> str:
        return f"  {what}: {s.value:.5g} ± {s.sd:.2g} {s.unit}, {s.conditions} {told(s.source, s.seen)}"

    lines = [f"{m.name}: {m.title} ({m.kind}; from the {m.origin})"]
    if m.aliases:
        lines.append(f"  also called: {', '.join(m.aliases)}")
    if m.estimate:
        lines.append("  ESTIMATE: no trustworthy yield is known; good to a factor 1.5 at best: mill a coupon")
    lines.append("  atoms: " + ", ".join(f"{symbol} {share:g}" for symbol, share in m.composition.items()))
    lines += [sourced("density", m.density), f"  atom density: {m.atom_density_1e22:.4g}e22 per cm3"]
    lines += [sourced("heat of formation", m.formation)] if m.formation else []
    lines += [sourced("melting point", m.melting)] if m.melting else []
    lines += [sourced(f"alarm, {alarm.what}", alarm.temperature) for alarm in m.alarms]
    return lines


def _law_and_tie(m: Material, told: _Told) -> list[str]:
    lines = []
    if m.constants:
        values = ", ".join(f"{key} {value:g}" for key, value in m.constants.items())
        lines.append(f"  law: {m.law} with {values} {told(m.constants_source, m.constants_seen)}")
    if m.tie is None:
        return lines
    lines.append(
        f"  tie to measured yields: factor {m.tie.factor:.3g}, exponent {m.tie.exponent:+.3f} in E/{m.tie.at_ev:g} eV,"
        f" sd {100 * m.tie.ln_sd:.0f} % from {m.tie.range_ev[0]:g} to {m.tie.range_ev[1]:g} eV,"
        f" rms {100 * m.tie.rms:.0f} % ({m.tie.basis})"
    )
    return lines + [
        f"    {row.energy_ev:g} eV: {row.atoms_per_ion:g} atoms/ion, {100 * (np.exp(row.ln_over_law) - 1):+.0f} % from"
        f" the untied law {told(row.source, row.seen)}"
        for row in m.tie.rows
    ]
