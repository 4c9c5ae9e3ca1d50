"""stackmill stops: when each layer is reached in every column, and when to stop."""

from __future__ import annotations

import typer

from stackmill.cli.options import (
    Ascii,
    Calibration,
    Cell,
    Confidence,
    CurrentDensity,
    Debug,
    Energy,
    Every,
    File,
    Flat,
    Force,
    Format,
    FormatOption,
    GoalOption,
    Incidence,
    Jobs,
    Motion,
    Output,
    Quiet,
    Seed,
    Set,
    Strict,
    Why,
)


def stops(
    file: File,
    calibration: Calibration = None,
    confidence: Confidence = None,
    goal: GoalOption = None,
    energy: Energy = None,
    incidence: Incidence = None,
    current_density: CurrentDensity = None,
    motion: Motion = None,
    flat: Flat = False,
    cell: Cell = False,
    every: Every = False,
    why: Why = False,
    output: Output = "-",
    format_: FormatOption = None,
    force: Force = False,
    set_: Set = None,
    seed: Seed = 2026,
    jobs: Jobs = 1,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """Forecast when each layer is reached in every column, and the window in which to stop.

    Where a column that decides is not flat and lit until it does, a section through it is run as a surface.
    Leaves with exit code 1 where no stop has the chance asked for.

    Example: stackmill stops job.yaml --confidence "95 %"
    """
    from stackmill.cli.output import chosen_format, gathered_warnings, paper, refuse_unused, say_notes, write
    from stackmill.cli.progress import progress
    from stackmill.errors import UsageError
    from stackmill.jobs import load_job, overrides
    from stackmill.planning.stops import stop_table
    from stackmill.report import stops as report

    form = chosen_format(format_, output)
    refuse_unused(form, why=why, all=every)
    if flat and cell:
        raise UsageError("--flat runs no surface", cure="leave out --flat or --cell")
    with gathered_warnings(quiet=quiet, strict=strict) as warned, progress(quiet=quiet) as watch:
        job = load_job(
            file,
            overrides=overrides(set_ or []),
            goal=goal,
            energy=energy,
            incidence=incidence,
            current_density=current_density,
            motion=motion,
            confidence=confidence,
            calibration=calibration,
        )
        table = stop_table(job, seed=seed, jobs=jobs, flat=flat, cell=cell, watch=watch)
    say_notes(job.notes, quiet=quiet)
    if form is Format.json:
        text = report.as_json(table, warned, paper(output, ascii_only))
    elif form is Format.csv:
        text = report.as_csv(table, paper(output, ascii_only))
    else:
        text = report.as_text(table, paper(output, ascii_only), markdown=form is Format.markdown, every=every)
        if why:
            from stackmill.report.trail import why_stops

            text += "\n\n" + paper(output, ascii_only).plain(why_stops(table, warned))
    write(text, output, force=force)
    if table.window is not None and table.window.exposed_s is None:
        raise typer.Exit(1)
