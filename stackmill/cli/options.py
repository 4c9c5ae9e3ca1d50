"""Options that several commands share, declared once."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

import typer


class Format(StrEnum):
    """How an answer is written."""

    table = "table"
    csv = "csv"
    json = "json"
    markdown = "markdown"


File = Annotated[
    str,
    typer.Argument(help="A job or a lone stack, as YAML; - reads it from standard input.", show_default=False),
]
Output = Annotated[
    str, typer.Option("-o", "--output", help="Write to this file (- is standard output).", metavar="PATH")
]
FormatOption = Annotated[
    Format | None,
    typer.Option("-f", "--format", help="table, csv, json or markdown; otherwise from the suffix of -o."),
]
Force = Annotated[bool, typer.Option("--force", help="Overwrite an existing output file.")]
Quiet = Annotated[bool, typer.Option("-q", "--quiet", help="No notes or warnings on standard error.")]
Strict = Annotated[bool, typer.Option("--strict", help="Refuse to answer where a warning would be given.")]
Ascii = Annotated[bool, typer.Option("--ascii", help="Only ASCII characters.")]
Debug = Annotated[bool, typer.Option("--debug", help="Show a traceback where stackmill itself is at fault.")]
Set = Annotated[
    list[str] | None,
    typer.Option(
        "--set", help="Override one value, e.g. --set 'mill.current_density=0.4 mA/cm2'.", metavar="KEY=VALUE"
    ),
]
Seed = Annotated[int, typer.Option("--seed", min=0, help="Seed of the draws; the same seed gives the same answer.")]
Jobs = Annotated[int, typer.Option("--jobs", min=1, help="Threads to use; the answer is the same for any number.")]
Every = Annotated[bool, typer.Option("--all", help="Show every column, not only those that matter most.")]
Why = Annotated[bool, typer.Option("--why", help="Say where every number comes from, and what would narrow it most.")]
Confidence = Annotated[
    str | None,
    typer.Option("--confidence", help="The chance asked for, e.g. 90 %; otherwise the job's.", metavar="SHARE"),
]
GoalOption = Annotated[
    str | None,
    typer.Option("--goal", help="What to expose: LAYER or LAYER / FEATURE (a lone stack only).", metavar="LAYER"),
]
Energy = Annotated[
    str | None,
    typer.Option("--energy", help="Beam energy, e.g. 1 keV (a lone stack only).", metavar="ENERGY"),
]
Incidence = Annotated[
    str | None,
    typer.Option("--incidence", help="Angle from the normal, e.g. 45 deg (a lone stack only).", metavar="ANGLE"),
]
CurrentDensity = Annotated[
    str | None,
    typer.Option("--current-density", help="e.g. '0.5 mA/cm2 ± 6 %' (a lone stack only).", metavar="CURRENT"),
]
Motion = Annotated[
    str | None,
    typer.Option("--motion", help="rotating, still, or 'rocking ± 20 deg' (a lone stack only).", metavar="MOTION"),
]
Flat = Annotated[
    bool, typer.Option("--flat", help="By columns alone: run no surface where a deciding column is not flat and lit.")
]
Cell = Annotated[bool, typer.Option("--cell", help="Run the surface of the whole cell, not of a section.")]
Plot = Annotated[str | None, typer.Option("--plot", help="Draw it into this file, .png or .svg.", metavar="FILE")]
Calibration = Annotated[
    str | None,
    typer.Option("--calibration", help="What coupons say of this mill today; stands in for the job's.", metavar="FILE"),
]
