"""The relief on paper: every feature at every moment, and what a height field cannot show."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import Any

import numpy as np

from stackmill.planning.relief import FeatureRelief, Relief, too_coarse
from stackmill.relief.gridding import CELLS_ACROSS
from stackmill.relief.measure import FLUSH_NM
from stackmill.relief.undercut import Undercut
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped
from stackmill.report.stops import cautions
from stackmill.report.words import length, percent, step_in_words
from stackmill.units import clock

_SURE_DEG = 1.5  # slopes whose grid error is smaller stand without it
ROW_NAMES = (
    "time_s",
    "region",
    "layer",
    "feature",
    "kind",
    "height_nm",
    "width_nm",
    "base_width_nm",
    "side_slope_deg",
    "top_layer",
    "vanishes_s",
    "height_error_nm",
    "slope_error_deg",
    "state",
    "cells_across",
)


def machine_rows(relief: Relief) -> list[dict[str, Any]]:
    """One dict a feature and moment, by the names that others build on."""
    job = relief.job
    rows = []
    for row in relief.rows:
        s = row.standing
        layer, name = job.column_map.features[s.feature]
        rows.append(
            {
                "time_s": row.time_s,
                "region": _region(relief),
                "layer": job.column_map.layers[layer],
                "feature": name,
                "kind": s.kind,
                "height_nm": s.height_nm,
                "width_nm": s.width_nm,
                "base_width_nm": s.base_width_nm,
                "side_slope_deg": s.side_slope_deg,
                "top_layer": _layer(relief, s.top_layer),
                "vanishes_s": s.vanishes_s,
                "height_error_nm": row.height_error_nm,
                "slope_error_deg": row.slope_error_deg,
                "state": s.state,
                "cells_across": s.cells_across,
            }
        )
    return rows


def as_json(reliefs: Sequence[Relief], warnings: Sequence[str], paper: Paper) -> str:
    """The whole answer for machines: `surfaces` and `moments` name the region they belong to."""
    first = reliefs[0]
    envelope = {
        "inputs_sha256": first.job.inputs_sha256,
        "seed": first.ensemble.seed,
        "warnings": [*warnings, *(line for one in reliefs for line in (*_undercuts(one), *_coarse(one)))],
        "finished": all(one.run.finished for one in reliefs),
        "surfaces": [
            {
                "region": _region(one),
                "fixed": one.cut.fixed if one.cut else None,
                "at_nm": one.cut.at_nm if one.cut else None,
                "points": list(one.run.terrain.column.shape),
                "step_nm": list(one.grid.step_nm),
            }
            for one in reliefs
        ],
        "moments": [
            {"region": _region(one), "time_s": m.time_s, "relief_nm": m.relief_nm, "clear_share": m.clear_share}
            for one in reliefs
            for m in one.moments
        ],
    }
    return json_text([row for one in reliefs for row in machine_rows(one)], envelope, paper)


def as_csv(reliefs: Sequence[Relief], paper: Paper) -> str:
    """The rows as CSV."""
    return csv_text([row for one in reliefs for row in machine_rows(one)], ROW_NAMES, paper)


def as_text(reliefs: Sequence[Relief], paper: Paper, *, markdown: bool = False) -> str:
    """The answer for people, as wide as the paper: region after region, then what goes for all of them."""
    job = reliefs[0].job
    lines = [job.title, f"Mill: {job.mill.title}"]
    lines += [f"{n}. {step_in_words(step, job.mill.stage)}" for n, step in enumerate(job.recipe.steps, 1)]
    parts = ["\n".join(wrapped(line, paper.width, "   ") for line in lines)]
    for relief in reliefs:
        parts += _one_region(relief, paper, markdown=markdown)
    bullet = "- " if markdown else ""
    notes = list(dict.fromkeys(note for relief in reliefs for note in _notes(relief)))
    parts.append("\n".join(wrapped(bullet + line, paper.width, "  ") for line in [*notes, *cautions(job)]))
    return paper.plain("\n\n".join(parts))


def _region(relief: Relief) -> str:
    return relief.job.column_map.regions[relief.region].name


def _one_region(relief: Relief, paper: Paper, *, markdown: bool) -> list[str]:
    parts = [wrapped(_surface(relief), paper.width, "   ")]
    for n, moment in enumerate(relief.moments):
        clear = ""
        if moment.clear_share is not None:
            clear = f"; {percent(moment.clear_share)} of the goal's {_where(relief)} is clear"
        parts.append(wrapped(f"At {clock(moment.time_s)}: relief {length(moment.relief_nm)}{clear}.", paper.width))
        grid = _grid(relief, n)
        if grid.rows:
            parts.append(grid.text("github" if markdown else "simple", paper.width))
    if not relief.run.finished:
        parts.append("INTERRUPTED: the moments after the last one shown were not reached.")
    return parts


def _where(relief: Relief) -> str:
    return "area" if relief.cut is None else "stretch of the section"


def _surface(relief: Relief) -> str:
    """Which surface was run."""
    ny, nx = relief.run.terrain.column.shape
    step = length(max(relief.grid.step_nm))
    if relief.cut is None:
        return f"{_region(relief)}, the whole cell: {nx} x {ny} points, {step} apart."
    why = f" ({relief.why_cut})" if relief.why_cut else ""
    return f"{_region(relief)}, section {relief.cut}{why}: {nx} points, {step} apart."


def _grid(relief: Relief, moment: int) -> Grid:
    """The features at one moment that the surface has come down to, but for those gone over one that shows."""
    time_s = relief.moments[moment].time_s
    rows = [
        row
        for row in relief.rows
        if row.time_s == time_s and row.standing.state != "buried" and not row.standing.overshadowed
    ]
    headers = ["feature", "", "height\nnm", "top\nnm", "base\nnm", "side\n°", "its top\nis in", "gone\nat"]
    return Grid(headers, [_cells(relief, row) for row in rows], frozenset({2, 3, 4, 5}))


def _cells(relief: Relief, row: FeatureRelief) -> list[str]:
    s = row.standing
    layer, name = relief.job.column_map.features[s.feature]
    error = "" if row.height_error_nm is None else f" ± {max(row.height_error_nm, 1.0):.0f}"
    flush = s.kind == "flush"

    def nm(value: float | None) -> str:
        return "" if value is None else f"{value:.0f}"

    return [
        f"{relief.job.column_map.layers[layer]} / {name}",
        f"{s.kind}*" if s.state == "gone" else s.kind,
        "" if flush else f"{s.height_nm:.0f}{error}",
        nm(s.width_nm),
        nm(s.base_width_nm),
        _with_error(s.side_slope_deg, row.slope_error_deg),
        _layer(relief, s.top_layer) or "below all",
        f"> {clock(relief.run.end_s)}" if s.vanishes_s is None else clock(s.vanishes_s),
    ]


def _with_error(value: float | None, error: float | None) -> str:
    if value is None:
        return ""
    return f"{value:.0f}" if error is None or error < _SURE_DEG else f"{value:.0f} ± {error:.0f}"


def _layer(relief: Relief, number: int) -> str | None:
    return None if number < 0 else relief.job.column_map.layers[number]


def _notes(relief: Relief) -> list[str]:
    buried = sorted({row.standing.feature for row in relief.rows if row.standing.state == "buried"})
    notes = [
        "Heights are over the ground beside the feature, at the best values of all rates and thicknesses; the ± is"
        f" the grid's own error (from half as many points), not theirs. Under {FLUSH_NM:.0f} nm is flush. Widths are at"
        " 90 % (top) and 10 % (base) of the height.",
        "Widths exclude redeposition and reflected ions, which move heights by a few per cent, widths by 10 to 90 %.",
    ]
    if any(row.standing.state == "gone" and not row.standing.overshadowed for row in relief.rows):
        notes.append("* the feature itself is gone: this is what it has left on its ground.")
    if buried:
        names = ", ".join(_feature(relief, f) for f in buried)
        notes.append(f"{_region(relief)}: still buried at one of these moments, and not listed there: {names}.")
    if relief.cut is not None:
        notes.append("A section takes what it cuts as running on for ever: --cell takes vias as they are.")
    flat = [one.name for one in relief.job.column_map.regions if len(one.area) == 1]
    if flat:
        notes.append(f"Alike everywhere, so that nothing stands up: {', '.join(flat)}.")
    placeless = [one.name for one in relief.job.column_map.regions if one.placeless.any()]
    if placeless:
        notes.append(f"Left out, since a feature there is known by its pattern density alone: {', '.join(placeless)}.")
    return notes + _undercuts(relief) + _coarse(relief)


def _feature(relief: Relief, number: int) -> str:
    layer, name = relief.job.column_map.features[number]
    return f"{relief.job.column_map.layers[layer]} / {name}"


def _undercuts(relief: Relief) -> list[str]:
    return [_undercut(relief, one) for one in relief.run.undercuts]


def _undercut(relief: Relief, one: Undercut) -> str:
    names = relief.job.column_map.materials
    x, y = float(relief.grid.x_nm[one.y, one.x]), float(relief.grid.y_nm[one.y, one.x])
    most = "up to " if relief.cut is None else ""
    return (
        f"UNDERCUT in {_region(relief)}, not shown, at x = {length(x)}, y = {length(y)}: the wall of"
        f" {names[one.lower]} walks in under"
        f" {names[one.upper]} by {most}{one.depth_nm:.0f} nm more than that one's own wall; a surface of heights cannot"
        " overhang."
    )


def _coarse(relief: Relief) -> list[str]:
    return [
        f"TOO COARSE in {_region(relief)} for {name}: {across} points across it;"
        f" {CELLS_ACROSS} or more want --grid {needed}."
        for name, across, needed in too_coarse(relief)
    ]


def as_npz(relief: Relief) -> bytes:
    """The surfaces as a numpy archive.

    time_s (T,); height_nm, material (T, ny, nx): index into `materials`, -1 where nothing is left; x_nm, y_nm
    (ny, nx); materials; region; section. The same bytes for the same answer.
    """
    terrain = relief.run.terrain
    frames = relief.run.frames
    shape = (len(frames), *terrain.column.shape)
    held = np.minimum(
        np.stack([f.segment for f in frames]) if frames else np.zeros(shape, int), terrain.material.shape[1] - 1
    )
    material = terrain.material[terrain.column, held]
    for k, frame in enumerate(frames):
        material[k][frame.segment >= terrain.count[terrain.column]] = -1
    out = io.BytesIO()
    np.savez(
        out,
        time_s=np.array([f.time_s for f in frames]),
        height_nm=np.stack([f.height_nm for f in frames]) if frames else np.zeros(shape),
        material=material,
        x_nm=relief.grid.x_nm,
        y_nm=relief.grid.y_nm,
        materials=np.array(relief.job.column_map.materials),
        region=np.array(_region(relief)),
        section=np.array("" if relief.cut is None else str(relief.cut)),
    )
    return out.getvalue()
