"""stackmill relief: what stands up and what sinks while the layers fall."""

from __future__ import annotations

from typing import Annotated

import typer

from stackmill.cli.options import (
    Ascii,
    Calibration,
    Cell,
    Confidence,
    CurrentDensity,
    Debug,
    Energy,
    File,
    Force,
    Format,
    FormatOption,
    GoalOption,
    Incidence,
    Motion,
    Output,
    Plot,
    Quiet,
    Seed,
    Set,
    Strict,
)

Section = Annotated[
    str | None,
    typer.Option(
        "--section", help="Cut along this line, e.g. x=2.4um; otherwise through what decides.", metavar="LINE"
    ),
]
At = Annotated[list[str] | None, typer.Option("--at", help="Moments on the clock, e.g. 10min,20min.", metavar="TIMES")]
AtReach = Annotated[
    str | None,
    typer.Option(
        "--at-reach",
        help="When this layer's top is down over the goal's clear share (or 95 %) of the region.",
        metavar="LAYER",
    ),
]
AtStop = Annotated[
    bool, typer.Option("--at-stop", help="The stop that `stops` proposes (this is what you get without a moment).")
]
Points = Annotated[int | None, typer.Option("--grid", min=8, max=4000, help="Points along the section, or along x.")]
RegionOption = Annotated[
    str | None,
    typer.Option(
        "--region", help="This region alone; --plot and --save take the goal's, or this one.", metavar="REGION"
    ),
]
Order = Annotated[int, typer.Option("--order", min=1, max=2, help="2: finer facets from the same grid, slower.")]
Save = Annotated[
    str | None, typer.Option("--save", help="Keep heights, materials and grid in this file.", metavar="FILE.npz")
]


def relief(
    file: File,
    section: Section = None,
    cell: Cell = False,
    at: At = None,
    at_reach: AtReach = None,
    at_stop: AtStop = False,
    region: RegionOption = None,
    grid: Points = None,
    order: Order = 1,
    plot: Plot = None,
    save: Save = None,
    calibration: Calibration = None,
    confidence: Confidence = None,
    goal: GoalOption = None,
    energy: Energy = None,
    incidence: Incidence = None,
    current_density: CurrentDensity = None,
    motion: Motion = None,
    output: Output = "-",
    format_: FormatOption = None,
    force: Force = False,
    set_: Set = None,
    seed: Seed = 2026,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """Show the surface at any moment: every feature's height, widths, slope, and when it is gone.

    An interrupt keeps what was reached by then.

    Example: stackmill relief job.yaml --at 40min,90min --plot relief.png
    """
    from stackmill.cli.moments import asked_for, section_line
    from stackmill.cli.output import (
        archive_suffix,
        chosen_format,
        gathered_warnings,
        paper,
        picture_suffix,
        refuse_taken,
        say_notes,
        write,
        write_bytes,
    )
    from stackmill.cli.progress import progress
    from stackmill.jobs import load_job, overrides
    from stackmill.planning.relief import How, relief_tables
    from stackmill.report import relief as report

    form = chosen_format(format_, output)
    when, cut = asked_for(at or [], at_reach, at_stop=at_stop), section_line(section)
    suffix = picture_suffix(plot) if plot is not None else ""
    if save is not None:
        archive_suffix(save)
    for target in (plot, save):
        if target is not None:
            refuse_taken(target, force=force)
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
        how = How(cut, cell, grid, order == 2)
        found = relief_tables(job, when=when, how=how, region=region, seed=seed, watch=watch)
    say_notes(job.notes, quiet=quiet)
    first = found[0]
    if save is not None and first.run.frames:
        write_bytes(report.as_npz(first), save, force=force)
    if plot is not None and first.run.frames:
        from stackmill.report import plots

        picture = plots.draw_cell(first) if cell else plots.draw_section(first)
        write_bytes(plots.render(picture, suffix), plot, force=force)
    if form is Format.json:
        text = report.as_json(found, warned, paper(output, ascii_only))
    elif form is Format.csv:
        text = report.as_csv(found, paper(output, ascii_only))
    else:
        text = report.as_text(found, paper(output, ascii_only), markdown=form is Format.markdown)
    write(text, output, force=force)
    if not all(one.run.finished for one in found):
        raise typer.Exit(130)
