"""stackmill schema: what an editor needs to help with the files."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

import typer

from stackmill.cli.options import Ascii, Debug, Force, Output


class Kind(StrEnum):
    """A kind of file."""

    stack = "stack"
    mill = "mill"
    recipe = "recipe"
    job = "job"
    materials = "materials"
    calibration = "calibration"


def schema(
    kind: Annotated[Kind, typer.Argument(help="Which kind of file.", show_default=False)],
    output: Output = "-",
    force: Force = False,
    ascii_only: Ascii = False,
    debug: Debug = False,
) -> None:
    """Print the JSON Schema of a kind of file, for editors that check YAML while it is written.

    Example: stackmill schema stack -o stack.schema.json
    """
    import json

    from stackmill.cli.output import paper, write
    from stackmill.documents.schema import json_schema

    plain = paper(output, ascii_only).ascii
    write(json.dumps(json_schema(kind.value), indent=2, ensure_ascii=plain), output, force=force)
