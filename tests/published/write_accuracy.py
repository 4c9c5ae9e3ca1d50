"""Writes the tables of docs/accuracy.md: predicted against measured, material by material.

python -m tests.published.write_accuracy        # replaces what stands between the markers, and the picture
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np

from stackmill.materials.library import Library
from stackmill.rates.yields import ln_yield_sd, normal_yield
from tests.published import plot_accuracy
from tests.published.fit_compounds import ALLOYS, ESTIMATES, RULED_RATIOS, SETTLED_ALLOYS, TIED_TO, rule
from tests.published.fit_yields import Evidence, LeftOut, evidence, leave_one_out

PAGE = Path(__file__).parents[2] / "docs" / "accuracy.md"
BEGIN, END = "<!-- begin: {} -->", "<!-- end: {} -->"


def figures(known: Evidence, left_out: list[LeftOut]) -> str:
    """The figures in words."""
    inside = 100.0 * float(np.mean([item.inside for item in left_out]))
    median = 100.0 * float(np.median([item.sd for item in left_out]))
    return (
        f"{len(left_out)} measured yields at 200 eV and above were each foretold from the other rows of their"
        f" element. {inside:.0f} % of them lie inside their 95 % interval; the median sd is {median:.0f} %. "
        f"The scatter within the elements, pooled, is {100 * known.scatter:.0f} %. Outside the rows the sd"
        f" grows by {100 * known.growth[0]:.0f} % for each factor e towards lower energies and by"
        f" {100 * known.growth[1]:.0f} % towards higher ones."
    )


def outside_table(left_out: list[LeftOut]) -> str:
    """The rows outside their interval, named."""
    lines = ["| element | energy, eV | measured | foretold | sd |", "|---|---|---|---|---|"]
    for item in left_out:
        if not item.inside:
            row = item.row
            lines.append(
                f"| {row.element} | {row.energy_ev:g} | {row.atoms_per_ion:.3g} |"
                f" {row.atoms_per_ion / math.exp(item.miss):.3g} | {100 * item.sd:.0f} % |"
            )
    return "\n".join(lines)


def element_table(known: Evidence) -> str:
    """Every row of every element: measured, as tied, the difference and the sd told for it."""
    lines = [
        "| element | energy, eV | measured, atoms/ion | tied law | measured/law | sd told | note |",
        "|---|---|---|---|---|---|---|",
    ]
    for name, rows in known.everything.items():
        material = known.elements[name]
        for row in rows:
            law = float(normal_yield(material, energy_ev=row.energy_ev))
            sd = float(ln_yield_sd(material, energy_ev=row.energy_ev))
            note = "from a rate" if not row.measured else "doubtful" if row.doubtful else ""
            note = note or ("not in the tie" if row.energy_ev < 150.0 else "")
            lines.append(
                f"| {name} | {row.energy_ev:g} | {row.atoms_per_ion:.3g} | {law:.3g} |"
                f" {row.atoms_per_ion / law:.2f} | {100 * sd:.0f} % | {note} |"
            )
        if not rows:
            lines.append(f"| {name} | | no measured row held | | | 20 % | the law as published |")
    return "\n".join(lines)


def compound_table(library: Library) -> str:
    """Every tied compound: what is known of it against the tied law; then what has no row of its own."""
    lines = [
        "| material | energy, eV | known, atoms/ion | tied law | known/law | sd told |",
        "|---|---|---|---|---|---|",
    ]
    for name in (*TIED_TO, *RULED_RATIOS):
        material = library.get(name)
        assert material.tie is not None
        for row in material.tie.rows:
            law = float(normal_yield(material, energy_ev=row.energy_ev))
            lines.append(
                f"| {name} | {row.energy_ev:g} | {row.atoms_per_ion:.3g} | {law:.3g} |"
                f" {row.atoms_per_ion / law:.2f} | {100 * material.tie.ln_sd:.0f} % |"
            )
    return "\n".join([*lines, "", *_without_rows(library)])


def _without_rows(library: Library) -> list[str]:
    fitted = rule()
    hosts = ", ".join(f"{name} on {host}" for name, (host, _) in ALLOYS.items())
    settled = " and ".join(SETTLED_ALLOYS)
    told = {name: 100.0 * (math.exp(_ln_sd(library, name)) - 1.0) for name in (*ESTIMATES, *SETTLED_ALLOYS)}
    wider = ", ".join(f"{name} {100 + sd:.0f} %" for name, sd in told.items() if sd > 51.0)
    return [
        f"Estimates ({', '.join(ESTIMATES)}) rest on the rule through {len(fitted.points)} compounds, about"
        f" which they scatter by {100 * fitted.scatter:.0f} % (ln), a factor {math.exp(fitted.scatter):.2f}; {settled}"
        " on the steady state of their elements' yields. All are told to be good to a factor 1.5, some to less"
        f" ({wider} of the best value as one sd upwards).",
        "",
        f"Without rows of their own, tied as their hosts are: {hosts}.",
    ]


def _ln_sd(library: Library, name: str) -> float:
    tie = library.get(name).tie
    assert tie is not None
    return tie.ln_sd


def page() -> str:
    """The page with its tables made anew."""
    library = Library.load()
    known = evidence(library)
    left_out = leave_one_out(known.data, known.scatter, known.growth)
    text = PAGE.read_text(encoding="utf-8")
    for name, table in (
        ("figures", figures(known, left_out)),
        ("outside", outside_table(left_out)),
        ("elements", element_table(known)),
        ("compounds", compound_table(library)),
    ):
        begin, end = BEGIN.format(name), END.format(name)
        head, _, rest = text.partition(begin)
        _, _, tail = rest.partition(end)
        text = f"{head}{begin}\n{table}\n{end}{tail}"
    return text


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8")
    plot_accuracy.PICTURE.write_bytes(plot_accuracy.png())
    print(f"wrote {PAGE.name} and {plot_accuracy.PICTURE.name}")
