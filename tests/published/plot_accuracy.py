"""Draws docs/accuracy.png: predicted against measured yields, and every material's misses beside its sd.

python -m tests.published.write_accuracy        # writes it together with the page

The picture repeats byte for byte on one machine; its description holds a digest of the numbers drawn, by which a
test knows whether it is fresh.
"""

from __future__ import annotations

import hashlib
import io
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from stackmill.materials.library import Library
from stackmill.materials.material import Material
from stackmill.rates.yields import ln_yield_sd, normal_yield
from tests.published.fit_yields import evidence

PICTURE = Path(__file__).parents[2] / "docs" / "accuracy.png"
INK, GREY, BLUE, ORANGE = "#222222", "#bbbbbb", "#2060a0", "#c05a00"
BOUNDS = ("baer-2010",)
SIZE_INCHES, DOTS_PER_INCH = (14.0, 12.0), 110


@dataclass(frozen=True)
class Point:
    """One datum: yields in atoms/ion; kind: element, low (an element's row at 100 eV), compound or bound.

    A bound is the middle of a published range of ratios to thermal SiO2, no measurement.
    """

    material: str
    energy_ev: float
    measured: float
    predicted: float
    kind: str


def points(library: Library) -> list[Point]:
    """Every row of every element and compound against the law as tied."""
    found = []
    everything = evidence(library).everything
    kinds = {True: "low", False: "element"}
    for name in library.names():
        material = library.get(name)
        if name in everything:
            rows = [(r.energy_ev, r.atoms_per_ion, kinds[r.energy_ev < 150.0]) for r in everything[name]]
        else:
            tied = material.tie.rows if material.tie else ()
            rows = [(r.energy_ev, r.atoms_per_ion, "bound" if r.source in BOUNDS else "compound") for r in tied]
        found += [Point(name, e, y, float(normal_yield(material, energy_ev=e)), kind) for e, y, kind in rows]
    return found


def digest(data: Sequence[Point], sds: dict[str, float]) -> str:
    """A digest of the numbers drawn, to four digits."""
    text = [f"{p.material} {p.energy_ev:g} {p.measured:.4g} {p.predicted:.4g} {p.kind}" for p in data]
    text += [f"{name} {sd:.4g}" for name, sd in sds.items()]
    return hashlib.sha256("\n".join(text).encode()).hexdigest()


def sds_of(library: Library) -> dict[str, float]:
    """Sd of ln yield of every material, within its measured energies."""
    return {name: _inside_sd(library.get(name)) for name in library.names()}


def _inside_sd(material: Material) -> float:
    low = material.tie.range_ev[0] if material.tie else 500.0
    return float(ln_yield_sd(material, energy_ev=low))


def current_digest() -> str:
    """The digest a fresh picture holds."""
    library = Library.load()
    return digest(points(library), sds_of(library))


def draw(library: Library) -> Figure:
    """The picture: a scatter of all rows, and two strips of measured/predicted, elements and compounds."""
    data, sds = points(library), sds_of(library)
    figure = Figure(figsize=SIZE_INCHES, layout="constrained")
    grid = figure.add_gridspec(2, 2, width_ratios=(1.0, 1.25), height_ratios=(1.0, 1.0))
    _scatter(figure.add_subplot(grid[0, 0]), data)
    elements = [name for name in sds if any(p.material == name and p.kind == "element" for p in data)]
    others = [name for name in sds if name not in elements]
    _strip(figure.add_subplot(grid[0, 1]), elements, data, sds, "elements")
    _strip(figure.add_subplot(grid[1, :]), others, data, sds, "compounds, alloys and elements without such rows")
    return figure


def _scatter(axes: Any, data: Sequence[Point]) -> None:
    span = np.array([0.03, 20.0])
    axes.fill_between(span, span / 1.5, span * 1.5, color="#eeeeee", label="within a factor 1.5", zorder=0)
    axes.plot(span, span, color=INK, linewidth=0.8, zorder=1)
    styles = (
        ("element", "elements, 200 eV and above", {"color": BLUE, "marker": "o"}),
        ("low", "elements, 100 eV (not in the ties)", {"color": BLUE, "marker": "o", "facecolors": "none"}),
        ("compound", "compounds", {"color": ORANGE, "marker": "s"}),
        ("bound", "oxides, middle of a published range", {"color": ORANGE, "marker": "^", "facecolors": "none"}),
    )
    for kind, label, style in styles:
        chosen = [p for p in data if p.kind == kind]
        axes.scatter([p.measured for p in chosen], [p.predicted for p in chosen], s=16, label=label, **style)
    axes.set(xscale="log", yscale="log", xlim=span, ylim=span, aspect="equal")
    axes.set_xlabel("measured or circulated yield under argon, 0 deg [atoms/ion]")
    axes.set_ylabel("law as tied [atoms/ion]")
    axes.legend(loc="upper left", frameon=False)


def _strip(axes: Any, names: Sequence[str], data: Sequence[Point], sds: dict[str, float], title: str) -> None:
    at = {name: k for k, name in enumerate(names)}
    chosen = [p for p in data if p.material in at]
    up = np.exp([sds[name] for name in names])
    axes.bar(range(len(names)), up - 1.0 / up, bottom=1.0 / up, width=0.7, color="#dddddd", label="± 1 sd told")
    axes.axhline(1.0, color=INK, linewidth=0.8)
    styles = (
        (("element", "compound"), "row in the tie", {"color": BLUE}),
        (("low",), "row at 100 eV, not in the tie", {"facecolors": "none", "edgecolors": BLUE}),
        (("bound",), "middle of a published range, a factor 2 either way", {"color": ORANGE, "marker": "^"}),
    )
    for kinds, label, style in styles:
        some = [p for p in chosen if p.kind in kinds]
        if some:
            ratio = [p.measured / p.predicted for p in some]
            axes.scatter([at[p.material] for p in some], ratio, s=18, label=label, zorder=3, **style)
    axes.set(yscale="log", ylim=(0.4, 2.5), xlim=(-0.7, len(names) - 0.3), title=title)
    axes.set_yticks([0.5, 0.67, 1.0, 1.5, 2.0], ["0.5", "0.67", "1", "1.5", "2"])
    axes.minorticks_off()
    axes.set_xticks(range(len(names)), names, rotation=90)
    axes.set_ylabel("known yield / law as tied [no unit]")
    axes.grid(axis="y", color=GREY, linewidth=0.4)
    axes.set_axisbelow(True)
    axes.legend(loc="upper right", frameon=True, ncols=3)


def png() -> bytes:
    """The picture as PNG, the same bytes each time."""
    library = Library.load()
    figure = draw(library)
    FigureCanvasAgg(figure)
    out = io.BytesIO()
    told = {"Software": None, "Description": f"data {digest(points(library), sds_of(library))}"}
    figure.savefig(out, format="png", dpi=DOTS_PER_INCH, metadata=told)
    return out.getvalue()
