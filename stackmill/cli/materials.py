"""stackmill materials: what the library knows."""

from __future__ import annotations

from typing import Annotated

import typer

from stackmill.cli.options import Ascii, Debug, Force, Format, FormatOption, Output, Quiet, Strict


def materials(
    names: Annotated[
        list[str] | None,
        typer.Argument(help="Materials to show in full; none lists all.", show_default=False),
    ] = None,
    output: Output = "-",
    format_: FormatOption = None,
    force: Force = False,
    ascii_only: Ascii = False,
    quiet: Quiet = False,
    strict: Strict = False,
    debug: Debug = False,
) -> None:
    """List the library's materials, or show every value of some with its source.

    Example: stackmill materials W "SiO2 PECVD"
    """
    from stackmill.cli.output import chosen_format, gathered_warnings, paper, write
    from stackmill.materials.library import Library
    from stackmill.report import materials as report

    form = chosen_format(format_, output)
    with gathered_warnings(quiet=quiet, strict=strict) as warned:
        library = Library.load()
        chosen = [library.get(name) for name in names or library.names()]
    if form is Format.json:
        text = report.as_json(chosen, warned, paper(output, ascii_only))
    elif form is Format.csv:
        text = report.as_csv(chosen, paper(output, ascii_only))
    elif names:
        text = report.in_full(chosen, library.citation, paper(output, ascii_only))
    else:
        text = report.listed(chosen, paper(output, ascii_only), markdown=form is Format.markdown)
    write(text, output, force=force)
