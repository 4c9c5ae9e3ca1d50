"""stackmill rates: how fast materials mill at a setting."""

from __future__ import annotations

from typing import Annotated

import typer

from stackmill.cli.options import (
    Ascii,
    Calibration,
    CurrentDensity,
    Debug,
    Energy,
    Force,
    Format,
    FormatOption,
    Incidence,
    Motion,
    Output,
    Quiet,
    Set,
    Strict,
    Why,
)


def rates(
    file: Annotated[
        str | None, typer.Argument(help="A job or a lone stack; or give --material.", show_default=False)
    ] = None,
    material: Annotated[
        list[str] | None, typer.Option("--material", help="A material's name; repeat for more.")
    ] = None,
    gas: Annotated[str | None, typer.Option("--gas", help="neon, argon, krypton or xenon (with --material).")] = None,
    energy: Energy = None,
    incidence: Incidence = None,
    current_density: CurrentDensity = None,
    motion: Motion = None,
    calibration: Calibration = None,
    why: Why = False,
    output: Output = "-",
    format_: FormatOption = None,
    force: Force = False,
    set_: Set = None,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """List milling rates with their sd and source: of a job's materials in each step, or of named ones.

    Example: stackmill rates --material W --material Al --energy "1 keV" --incidence "45 deg"
    """
    from stackmill.cli.output import chosen_format, gathered_warnings, paper, refuse_unused, say_notes, write
    from stackmill.errors import UsageError
    from stackmill.jobs import bare_job, load_job, overrides
    from stackmill.planning.rates import rate_rows
    from stackmill.report import rates as report

    if (file is None) == (not material):
        raise UsageError("rates takes a file or --material", cure="give one of the two")
    settings = {
        "energy": energy,
        "incidence": incidence,
        "current_density": current_density,
        "motion": motion,
    }
    form = chosen_format(format_, output)
    refuse_unused(form, why=why)
    with gathered_warnings(quiet=quiet, strict=strict) as warned:
        if file is not None:
            if gas is not None:
                raise UsageError("--gas goes with --material", cure="a file's gas is in its mill file; use --set")
            job = load_job(file, overrides=overrides(set_ or []), calibration=calibration, **settings)
        else:
            if set_:
                raise UsageError("--set goes with a file", cure="use the options for the setting")
            if calibration is not None:
                raise UsageError("--calibration goes with a file", cure="name the materials in a job")
            job = bare_job(material or [], gas=gas, **settings)
        rows = rate_rows(job)
    say_notes(job.notes, quiet=quiet)
    if form is Format.json:
        text = report.as_json(job, rows, warned, paper(output, ascii_only))
    elif form is Format.csv:
        text = report.as_csv(rows, paper(output, ascii_only))
    else:
        text = report.as_text(job, rows, paper(output, ascii_only), markdown=form is Format.markdown, why=why)
    write(text, output, force=force)
