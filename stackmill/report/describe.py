"""What `check` says of a job that is in order: its layers, regions and columns, and a section drawn in text."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from stackmill.columns.columns import RegionColumns
from stackmill.documents.stack import NO_FILL, Feature, Layer
from stackmill.jobs import Job
from stackmill.report.render import Grid, Paper, wrapped
from stackmill.report.words import length, percent, step_in_words
from stackmill.units import Measure

_SECTION_ROWS = 18
_READABLE = 40  # characters under which a sequence of materials is no longer read at a glance
_SECTION_WIDTH = 48
_BELOW_SUBSTRATE_TOP = 0.06  # of the height drawn
_INKS = {"metal": "#%@&+=*$", "dielectric": ".:-,'`", "semiconductor": "~^", "organic": "o0"}
_OTHER_INKS = "?!xvz"


def describe(job: Job, paper: Paper) -> str:
    """The whole description, as wide as the paper."""
    parts = [
        wrapped(job.title, paper.width),
        _layers(job, paper.width),
        _regions(job, paper.width),
        _seams(job),
        _recipe(job, paper),
    ]
    parts += [section(job, region) for region in job.column_map.regions]
    parts.append(_legend(job, paper))
    return paper.plain("\n\n".join(part for part in parts if part))


def _layers(job: Job, width: int) -> str:
    rows = []
    for layer in job.stack.layers:
        fill = "nothing" if layer.material == NO_FILL else layer.material
        rows.append([layer.name, fill, _measure(layer.thickness), _coverage(layer)])
        rows += [["", f"  {feature.material}", feature.name, _films(feature)] for feature in layer.features]
    return Grid(["layer", "material", "thickness", "coverage, films"], rows).text(width=width)


def _coverage(layer: Layer) -> str:
    if layer.coverage == "planarised":
        return ""
    return layer.coverage if layer.sidewall == 1.0 else f"{layer.coverage}, sidewall {percent(layer.sidewall)}"


def _films(feature: Feature) -> str:
    named = [("cap", feature.cap), *(("liner", film) for film in feature.liner), ("base", feature.base)]
    return ", ".join(f"{what} {film.material} {length(film.thickness.value)}" for what, film in named if film)


def _measure(thickness: Measure) -> str:
    text = length(thickness.value)
    if thickness.sd:
        text += f" ± {100 * thickness.rel_sd:.3g} %"
    if thickness.across_sd:
        text += f", across die ± {100 * thickness.across_sd / thickness.value:.3g} %"
    return text


def _regions(job: Job, width: int) -> str:
    """Every column by its sequence; with the materials it goes through where there is room to read them."""
    rows = []
    for region in job.column_map.regions:
        for c in range(len(region.area)):
            name = region.name if c == 0 else ""
            share = f"{100 * region.area[c]:.3g} %"
            rows.append([name, region.label(c), share, length(float(region.top_nm[c])), _sequence(job, region, c)])
    used = sum(2 + max(map(len, column)) for column in list(zip(*rows, strict=True))[:-1])
    headers = ["region", "column", "area", "height", "materials from the top"]
    if width - used < _READABLE:
        headers, rows = headers[:-1], [row[:-1] for row in rows]
    return Grid(headers, rows, frozenset({2, 3})).text(width=width)


def _sequence(job: Job, region: RegionColumns, c: int) -> str:
    names = [job.column_map.materials[m] for m in region.material[c, : region.segments[c]]]
    return " / ".join(name for k, name in enumerate(names) if k == 0 or name != names[k - 1])


def _seams(job: Job) -> str:
    return "\n".join(f"note: {seam.in_words()}" for seam in job.column_map.seams)


def _recipe(job: Job, paper: Paper) -> str:
    lines = [f"{n}. {step_in_words(step, job.mill.stage)}" for n, step in enumerate(job.recipe.steps, 1)]
    return "\n".join(wrapped(line, paper.width, "   ") for line in lines)


def section(job: Job, region: RegionColumns) -> str:
    """A section through the cell along x, through the centre of the region's column with the most segments."""
    deepest = int(np.argmax(region.segments))
    y = float(region.centre_nm[deepest, 1])
    across = job.column_map.cell[0]
    x = (np.arange(_SECTION_WIDTH) + 0.5) / _SECTION_WIDTH * across
    columns = region.plan(x, np.full_like(x, y))
    top = float(region.top_nm.max())
    step = top * (1.0 + _BELOW_SUBSTRATE_TOP) / _SECTION_ROWS
    inks = _inks(job)
    lines = [f"{region.name}: section along x at y = {length(y)}, {length(across)} wide, {length(step)} a row"]
    for k in range(_SECTION_ROWS):
        height = top - (k + 0.5) * step
        inked = "".join(inks.get(_material_at(region, int(c), height), " ") for c in columns)
        lines.append(f"{round(top - k * step):8d} nm |{inked}|")
    return "\n".join(lines)


def _material_at(region: RegionColumns, c: int, height_nm: float) -> int:
    """The material at a height in a column; -1 above it."""
    if height_nm > region.top_nm[c]:
        return -1
    floors = region.floor_nm[c, : region.segments[c]]
    return int(region.material[c, int(np.argmax(floors < height_nm))])


def _inks(job: Job) -> dict[int, str]:
    """A letter for each material, so that metals look dense and dielectrics light."""
    free = {kind: iter(letters) for kind, letters in _INKS.items()}
    other = iter(_OTHER_INKS)
    inks = {}
    for number, name in enumerate(job.column_map.materials):
        letters: Iterator[str] = free.get(job.materials[name].kind, other)
        inks[number] = next(letters, "?")
    return inks


def _legend(job: Job, paper: Paper) -> str:
    inks = _inks(job)
    names: Sequence[str] = [f"{inks[k]} {name}" for k, name in enumerate(job.column_map.materials)]
    return wrapped("Legend: " + "   ".join(names), paper.width, "        ")
