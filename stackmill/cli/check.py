"""stackmill check: is everything in order, and what does it say?"""

from __future__ import annotations

import typer

from stackmill.cli.options import Ascii, Debug, File, Force, Output, Plot, Quiet, Set, Strict


def check(
    file: File,
    plot: Plot = None,
    output: Output = "-",
    force: Force = False,
    set_: Set = None,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """Check a job or stack file and every file it binds; report every mistake, or describe what it says.

    Example: stackmill check job.yaml --plot stack.png
    """
    from stackmill.cli.output import (
        gathered_warnings,
        paper,
        picture_suffix,
        refuse_taken,
        say_notes,
        write,
        write_bytes,
    )
    from stackmill.jobs import load_job, overrides
    from stackmill.report.describe import describe

    suffix = picture_suffix(plot) if plot is not None else ""
    if plot is not None:
        refuse_taken(plot, force=force)
    with gathered_warnings(quiet=quiet, strict=strict):
        job = load_job(file, overrides=overrides(set_ or []))
        text = describe(job, paper(output, ascii_only))
    say_notes(job.notes, quiet=quiet)
    if plot is not None:
        from stackmill.report import plots

        write_bytes(plots.render(plots.draw_stack(job), suffix), plot, force=force)
    write(text, output, force=force)
    if not quiet:
        typer.echo("in order", err=True)
