"""stackmill calibrate: what coupons say about this mill today."""

from __future__ import annotations

from typing import Annotated

import typer

from stackmill.cli.options import Ascii, Debug, Force, Format, FormatOption, Quiet, Strict

Coupons = Annotated[str, typer.Argument(help="The coupons, as CSV with units in its header.", show_default=False)]
MillOption = Annotated[str, typer.Option("--mill", help="The mill's file; its current, dial and charge errors count.")]
Materials = Annotated[
    list[str] | None, typer.Option("--materials", help="A lab's materials file; repeat it for several.", metavar="FILE")
]
Write = Annotated[
    str | None, typer.Option("-o", "--output", help="Write the calibration for jobs to bind.", metavar="FILE.yaml")
]


def calibrate(
    coupons: Coupons,
    mill: MillOption,
    materials: Materials = None,
    output: Write = None,
    format_: FormatOption = None,
    force: Force = False,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """Fit this mill's rates to coupons: how much of every sd is left, and which coupon is out of line.

    Leaves with exit code 1, and writes nothing, where the coupons cannot be believed.

    Example: stackmill calibrate coupons.csv --mill gun-a.yaml -o gun-a-today.yaml
    """
    from datetime import date
    from pathlib import Path

    from stackmill.cli.output import gathered_warnings, paper, refuse_taken, write, write_bytes
    from stackmill.documents.reading import read_bytes
    from stackmill.jobs.coupons import read_calibrating
    from stackmill.logbook.coupons import fit_coupons
    from stackmill.report import calibration as report

    if output is not None:
        refuse_taken(output, force=force)
    with gathered_warnings(quiet=quiet, strict=strict) as warned:
        told = read_calibrating(Path(coupons), Path(mill), [Path(one) for one in materials or []])
        fit = fit_coupons(told.mill, told.coupons, told.materials)
    form = format_ or Format.table
    if form is Format.json:
        text = report.as_json(fit, warned, paper("-", ascii_only))
    elif form is Format.csv:
        text = report.as_csv(fit, paper("-", ascii_only))
    else:
        text = report.as_text(fit, told.mill, paper("-", ascii_only), markdown=form is Format.markdown)
    write(text, "-", force=force)
    if fit.verdict == "refused":
        raise typer.Exit(1)
    if output is not None:
        content = read_bytes(Path(coupons))
        made = date.today().isoformat()
        written = report.as_file(fit, told.mill, made=made, data=Path(coupons).name, content=content)
        write_bytes((written + "\n").encode(), output, force=force)
