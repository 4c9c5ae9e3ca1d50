"""Milling rates on paper."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

from stackmill.jobs import Job
from stackmill.planning.rates import RateRow
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped
from stackmill.report.trail import why_rates
from stackmill.report.words import energy

ROW_NAMES = (
    "material",
    "energy_ev",
    "incidence_deg",
    "current_density_ma_per_cm2",
    "yield_atoms_per_ion",
    "rate_nm_per_min",
    "rate_rel_sd",
    "source",
    "step",
)


def machine_rows(rows: Sequence[RateRow]) -> list[dict[str, Any]]:
    """One dict a row, by the names that others build on."""
    return [{name: asdict(row)[name] for name in ROW_NAMES} for row in rows]


def as_json(job: Job, rows: Sequence[RateRow], warnings: Sequence[str]) -> str:
    """The rates for machines."""
    return json_text(machine_rows(rows), {"inputs_sha256": job.inputs_sha256, "seed": None, "warnings": list(warnings)})


def as_csv(rows: Sequence[RateRow]) -> str:
    """The rates as CSV."""
    return csv_text(machine_rows(rows), ROW_NAMES)


def as_text(job: Job, rows: Sequence[RateRow], paper: Paper, *, markdown: bool, why: bool) -> str:
    """The rates for people, one table a step."""
    parts = [wrapped(f"Mill: {job.mill.title}", paper.width)]
    for step in dict.fromkeys(row.step for row in rows):
        of_step = [row for row in rows if row.step == step]
        first = of_step[0]
        parts.append(
            f"{step}: {energy(first.energy_ev)}, {first.incidence_deg:.4g}° from the normal,"
            f" {first.current_density_ma_per_cm2:.4g} mA/cm²"
        )
        cells = [
            [
                r.material,
                f"{r.yield_atoms_per_ion:.3g}",
                f"{r.rate_nm_per_min:.3g}",
                f"± {100 * r.rate_rel_sd:.2g} %",
                r.source,
            ]
            for r in of_step
        ]
        headers = ["material", "atoms/ion", "nm/min", "sd", "rests on"]
        parts.append(Grid(headers, cells, frozenset({1, 2, 3})).text("github" if markdown else "simple"))
    if why:
        parts.append(why_rates(job))
    return paper.plain("\n\n".join(parts))
