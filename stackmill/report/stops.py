"""The stop table on paper: layers as rows, columns by region, and the window in words."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from stackmill.documents.recipe import Beam, Process
from stackmill.documents.wording import listed
from stackmill.jobs import Job, taken_as_exact
from stackmill.planning.stops import Reach, StopTable
from stackmill.planning.windows import weighted_quantile
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped
from stackmill.report.window_words import (
    column_name,
    goal_name,
    goal_regions,
    leg_name,
    lost_by,
    window_in_words,
)
from stackmill.report.words import moment, percent, step_in_words
from stackmill.units import clock

ROW_NAMES = (
    "region",
    "column",
    "layer",
    "time_s",
    "time_early_s",
    "time_late_s",
    "depth_nm",
    "height_nm",
    "step",
    "flat_ok",
    "basis",
)
_NARROW = 0.01  # columns under this share of a region count as first or last down only if nothing is wider
_NARROWEST_CELL = 19  # characters of "12:30 (11:40–13:25)"


def machine_rows(table: StopTable) -> list[dict[str, Any]]:
    """One dict a column and layer, by the names that others build on."""
    return [
        {**{name: getattr(row, name) for name in ROW_NAMES}, "present": row.present, "area_share": row.share}
        for row in table.rows
    ]


def machine_windows(table: StopTable) -> list[dict[str, Any]]:
    """The goal's window as a list of one dict; empty without a goal."""
    job, window = table.ensemble.inputs.job, table.window
    if window is None or job.goal is None:
        return []
    return [
        {
            "goal": goal_name(table),
            "regions": list(goal_regions(table)),
            "exposed_s": window.exposed_s,
            "lost_s": window.lost_s,
            "stop_s": window.stop_s,
            "chance": window.chance,
            "best_chance": window.best_chance,
            "confidence": window.confidence,
            "first_look_s": window.first_look_s,
            "lost_by": lost_by(table, window),
            "left_standing_share": window.left_standing,
            "provisional": table.provisional,
            "basis": "surface" if table.correction and table.correction.surfaces else "flat",
            "surface_error_s": table.correction.error_s if table.correction else None,
            "flat_best_stop_s": table.flat_window.best_stop_s if table.flat_window else None,
            "flat_best_stop_chance": table.flat_window.best_stop_chance if table.flat_window else None,
            "best_stop_s": window.best_stop_s,
            "best_stop_chance": window.best_stop_chance,
            "exposed_by": column_name(table, *window.exposed_by) if window.exposed_by else None,
            "lost_before_leg": window.lost_before,
            "counted_from_s": window.leg_start_s,
            "counted_from": leg_name(table, window.leg),
        }
    ]


def as_json(table: StopTable, warnings: Sequence[str], paper: Paper) -> str:
    """The whole answer for machines."""
    job = table.ensemble.inputs.job
    envelope = {
        "inputs_sha256": job.inputs_sha256,
        "seed": table.ensemble.seed,
        "draws": len(table.ensemble.weights),
        "warnings": list(warnings),
        "windows": machine_windows(table),
        "surfaces": _machine_surfaces(table),
        "taken_as_exact": list(taken_as_exact(job)),
        "variance_shares": [{"input": s.name, "share": s.share} for s in table.shares],
    }
    return json_text(machine_rows(table), envelope, paper)


def _machine_surfaces(table: StopTable) -> list[dict[str, Any]]:
    """The surfaces that were run, as dicts."""
    regions = table.ensemble.inputs.job.column_map.regions
    return [
        {
            "region": regions[surface.region].name,
            "fixed": surface.cut.fixed if surface.cut else None,
            "at_nm": surface.cut.at_nm if surface.cut else None,
            "points": surface.points,
            "columns": [regions[surface.region].label(c) for c in sorted(surface.columns)],
        }
        for surface in (table.correction.surfaces if table.correction else ())
    ]


def as_csv(table: StopTable, paper: Paper) -> str:
    """The rows as CSV."""
    return csv_text(machine_rows(table), [*ROW_NAMES, "present", "area_share"], paper)


def as_text(table: StopTable, paper: Paper, *, markdown: bool = False, every: bool = False) -> str:
    """The answer for people, as wide as the paper."""
    parts = [_heading(table, paper)]
    parts += _grids(table, paper, "github" if markdown else "simple", every=every)
    bullet = "- " if markdown else ""
    parts.append("\n".join(wrapped(bullet + line, paper.width, "  ") for line in _notes(table, every=every)))
    if table.window is not None:
        words = [bullet + line.lstrip() if markdown else line for line in window_in_words(table, table.window)]
        parts.append("\n".join(wrapped(line, paper.width, "  ") for line in words))
    return paper.plain("\n\n".join(part for part in parts if part))


def _heading(table: StopTable, paper: Paper) -> str:
    job = table.ensemble.inputs.job
    lines = [job.title, f"Mill: {job.mill.title}"]
    lines += [f"{n}. {step_in_words(step, job.mill.stage)}" for n, step in enumerate(job.recipe.steps, 1)]
    return "\n".join(wrapped(line, paper.width, "   ") for line in lines)


def _grids(table: StopTable, paper: Paper, style: str, *, every: bool) -> list[str]:
    layers = _shown_layers(table)
    first = max(len("layer"), *(len(layer) for layer in layers))
    columns = shown_columns(table, every=every)
    cells = {key: [_cell(row) for row in rows] for key, rows in _by_column(table, layers).items()}
    width = max(_NARROWEST_CELL, *(len(cell) for key in columns for cell in cells[key]))
    per_grid = max(1, (paper.width - first) // (width + 2))
    grids = []
    for k in range(0, len(columns), per_grid):
        part = columns[k : k + per_grid]
        headers = ["layer", *(_header(table, key, width) for key in part)]
        rows = [[layer, *(cells[key][n] for key in part)] for n, layer in enumerate(layers)]
        grids.append(Grid(headers, rows).text(style))
    return grids


_Key = tuple[int, int]  # region and column


def _by_column(table: StopTable, layers: Sequence[str]) -> dict[_Key, list[Reach]]:
    regions = [region.name for region in table.ensemble.inputs.job.column_map.regions]
    found: dict[_Key, list[Reach]] = {}
    for row in table.rows:
        if row.layer in layers:
            found.setdefault((regions.index(row.region), row.column_number), []).append(row)
    return found


def _header(table: StopTable, key: _Key, width: int) -> str:
    region = table.ensemble.inputs.job.column_map.regions[key[0]]
    label = _folded(region.label(key[1]), width)
    return "\n".join([region.name, *label, f"{100 * region.area[key[1]]:.3g} % of area"])


def shown_columns(table: StopTable, *, every: bool) -> list[_Key]:
    """The columns for people: those that decide, the first and the last down, and the widest of each region.

    every: all columns of all regions instead.
    """
    regions = table.ensemble.inputs.job.column_map.regions
    if every:
        return [(r, c) for r, region in enumerate(regions) for c in range(len(region.area))]
    window = table.window
    deciding = {window.exposed_by, window.lost_by} - {None} if window else set()
    last = _shown_layers(table)[-1]
    chosen = []
    for r, region in enumerate(regions):
        rows = [row for row in table.rows if row.region == region.name and row.layer == last]
        wide = [row for row in rows if row.share >= _NARROW] or rows
        by_time = sorted(wide, key=lambda row: math.inf if row.time_s is None else row.time_s)
        keep = {0, by_time[0].column_number, by_time[-1].column_number}
        keep |= {key[1] for key in deciding if key and key[0] == r}
        chosen += [(r, c) for c in sorted(keep)]
    return chosen


def _folded(label: str, width: int) -> list[str]:
    import textwrap

    return textwrap.wrap(label, width, break_long_words=True) or [""]


def _cell(row: Reach) -> str:
    """One time with its bounds; `^` by the surface, `*` by a column alone that is not to be trusted."""
    if not row.present:
        return "·"
    if row.time_s is None and row.time_early_s is None:
        return "not reached"
    if row.time_s == 0.0 and row.time_late_s == 0.0:
        return "0:00"
    early, late = moment(row.time_early_s), moment(row.time_late_s)
    return f"{moment(row.time_s)} ({early}–{late}){'^' if row.basis == 'surface' else '' if row.flat_ok else '*'}"


def _shown_layers(table: StopTable) -> list[str]:
    """All layers down to the one below the goal; all of them without a goal."""
    job = table.ensemble.inputs.job
    layers = list(job.column_map.layers)
    if job.goal is None:
        return layers
    return layers[: layers.index(job.goal.layer) + 2]


def _notes(table: StopTable, *, every: bool) -> list[str]:
    job = table.ensemble.inputs.job
    q = table.confidence
    beam = any(isinstance(step, Beam) for step in job.recipe.steps)
    notes = [
        f"Times are {'beam-on' if beam else 'process'} time (min:s, from an hour on h:min:s), best value (early–late):"
        f" {percent(0.5 * (1 - q))} of draws come before the early one and as many after the late one. A dot: the layer"
        " is not in this column."
    ]
    if any(row.basis == "surface" for row in table.rows):
        notes.append(
            "^ from the surface, facets and shadows with it. Unmarked: by the column alone, which is flat and lit."
        )
    if any(not row.flat_ok and row.basis == "flat" for row in table.rows):
        notes.append(
            "* by the column alone: a facet or a shadow from a neighbour gets to the column's centre before,"
            " so the true time may differ."
        )
    if beam and any(isinstance(step, Process) for step in job.recipe.steps):
        notes.append(
            "Strips and processes with rates take no beam-on time: what they reach is reached at their moment."
        )
    exact = taken_as_exact(job)
    if exact:
        notes.append(
            f"NO ± GIVEN for {listed([f'the {name}' for name in exact], last='and')}: taken as exact, so the times look"
            " surer than they are and the chances may be off. Write what is known of each, such as ± 8 %."
        )
    notes += _look_notes(table)
    notes += cautions(job)
    hidden = len(shown_columns(table, every=True)) - len(shown_columns(table, every=every))
    if hidden:
        notes.append(
            f"{hidden} more column{'s' if hidden > 1 else ''} left out: shown are those that decide, the first and the"
            " last down, and the widest of each region (--all shows every one)."
        )
    return notes


def cautions(job: Job) -> list[str]:
    """A line for each material of the stack whose dust is toxic; local rules and trained staff decide."""
    toxic = [m for m in job.milled_materials.values() if m.toxicity]
    lines = [f"CAUTION, {m.name}: {m.toxicity.note.rstrip('.')}." for m in toxic if m.toxicity]
    return [*lines, "Local rules and trained staff decide what is done about it."] if lines else []


def _look_notes(table: StopTable) -> list[str]:
    """For each step that the eye stops: when to start watching, and how its end restarts the stopwatch."""
    best, draws = table.ensemble.best_outcome.leg_start_s, table.ensemble.outcome.leg_start_s
    notes = []
    for leg in range(1, len(best)):
        at, before = float(best[leg][0]), float(best[leg - 1][0])
        early = weighted_quantile(draws[leg] - draws[leg - 1], table.ensemble.weights, 0.5 * (1 - table.confidence))
        name = leg_name(table, leg)
        until = f" and before {clock(float(best[leg + 1][0]))}" if leg + 1 < len(best) else ""
        notes.append(
            f"{name!r} is stopped by eye: watch from {clock(before + early)} on. Times after {clock(at)}{until} are"
            f" for a stop at {clock(at)} sharp: restart the stopwatch when the eye stops it, and subtract {clock(at)}"
            " from them."
        )
    return notes
