"""Milling rates on paper."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

from stackmill.jobs import Job
from stackmill.planning.rates import RateRow
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped
from stackmill.report.trail import why_rates
from stackmill.report.words import step_in_words

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


def as_json(job: Job, rows: Sequence[RateRow], warnings: Sequence[str], paper: Paper) -> str:
    """The rates for machines."""
    envelope = {"inputs_sha256": job.inputs_sha256, "seed": None, "warnings": list(warnings)}
    return json_text(machine_rows(rows), envelope, paper)


def as_csv(rows: Sequence[RateRow], paper: Paper) -> str:
    """The rates as CSV."""
    return csv_text(machine_rows(rows), ROW_NAMES, paper)


def as_text(job: Job, rows: Sequence[RateRow], paper: Paper, *, markdown: bool, why: bool) -> str:
    """The rates for people, one table a step."""
    parts = [wrapped(f"Mill: {job.mill.title}", paper.width)]
    for n, step in enumerate(job.recipe.steps, 1):
        of_step = [row for row in rows if row.step == step.name]
        if of_step:
            parts.append(wrapped(f"{n}. {step_in_words(step, job.mill.stage)}", paper.width, "   "))
            parts.append(_table(of_step, paper, markdown))
    if not rows:
        parts.append("No step of this recipe lowers anything.")
    if why:
        parts.append("\n".join(wrapped(line, paper.width, "      ") for line in why_rates(job).split("\n")))
    return paper.plain("\n\n".join(parts))


def _table(rows: Sequence[RateRow], paper: Paper, markdown: bool) -> str:
    cells = [
        [
            row.material,
            "" if row.yield_atoms_per_ion is None else f"{row.yield_atoms_per_ion:.3g}",
            f"{row.rate_nm_per_min:.3g}",
            f"± {100 * row.rate_rel_sd:.2g} %",
            row.source,
        ]
        for row in rows
    ]
    headers = ["material", "atoms/ion", "nm/min", "sd", "rests on"]
    return Grid(headers, cells, frozenset({1, 2, 3})).text("github" if markdown else "simple", paper.width)
