"""Rows to text: for machines (JSON, CSV) and for people (plain and Markdown tables).

Machine output keeps full precision, null for none, and never NaN.
"""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Mapping, Sequence
from typing import Any

from tabulate import tabulate

from stackmill.frozen import frozen

SCHEMA_VERSION = 1

_ASCII = {
    "±": "+/-",
    "–": "-",
    "—": "-",
    "·": ".",
    "°": " deg",
    "²": "2",
    "µ": "u",
    "μ": "u",
    "×": "x",
    "≥": ">=",
    "│": "|",
    "─": "-",
    "…": "...",
}


@frozen
class Paper:
    """What is written on: its width in characters, and whether only ASCII may be used."""

    width: int = 80
    ascii: bool = False

    def plain(self, text: str) -> str:
        """The text as this paper can show it."""
        if not self.ascii:
            return text
        for fancy, simple in _ASCII.items():
            text = text.replace(fancy, simple)
        return text.encode("ascii", "replace").decode("ascii")


@frozen
class Grid:
    """A table for people: headers and cells, all text; numeric columns are aligned right."""

    headers: Sequence[str]
    rows: Sequence[Sequence[str]]
    right: frozenset[int] = frozenset()

    def text(self, style: str = "simple", width: int = 0) -> str:
        """The table in a style of tabulate's: `simple` with a rule under the headers, or `github`.

        width: fold the last column so that a simple table fits; 0: leave it as wide as it is.
        """
        align = ["right" if k in self.right else "left" for k in range(len(self.headers))]
        if style == "github":
            headers = [header.replace("\n", " ") for header in self.headers]
            cells = [[cell.replace("|", "\\|") for cell in row] for row in self.rows]
            return tabulate(cells, headers, tablefmt="github", disable_numparse=True, colalign=align)
        rows = self._folded(width) if width and self.rows else self.rows
        return tabulate(list(rows), list(self.headers), tablefmt="simple", disable_numparse=True, colalign=align)

    def _folded(self, width: int) -> list[list[str]]:
        import textwrap

        used = 0
        for column, header in zip(list(zip(*self.rows, strict=True))[:-1], self.headers, strict=False):
            cells = max(len(line) for cell in column for line in cell.split("\n"))
            used += 2 + max(cells, *(len(line) + 2 for line in header.split("\n")))  # tabulate pads headers by two
        room = max(width - used, len(self.headers[-1]), 16)
        return [[*row[:-1], "\n".join(textwrap.wrap(row[-1], room)) or ""] for row in self.rows]


def json_text(rows: Sequence[Mapping[str, Any]], envelope: Mapping[str, Any], paper: Paper) -> str:
    """Machine output: the envelope's fields, then `rows`."""
    from stackmill import __version__

    document = {
        "schema_version": SCHEMA_VERSION,
        "stackmill_version": __version__,
        **envelope,
        "rows": list(rows),
    }
    return json.dumps(_finite(document), indent=2, ensure_ascii=paper.ascii, allow_nan=False)


def csv_text(rows: Sequence[Mapping[str, Any]], names: Sequence[str], paper: Paper) -> str:
    """The rows as CSV with a header line; empty for none."""
    out = io.StringIO()
    writer = csv.DictWriter(out, fieldnames=list(names), lineterminator="\n", extrasaction="ignore")
    writer.writeheader()
    writer.writerows(_finite(list(rows)))
    return paper.plain(out.getvalue().rstrip("\n"))


def _finite(value: Any) -> Any:
    """The same value with None where a number is not finite."""
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_finite(item) for item in value]
    return value


def wrapped(text: str, width: int, indent: str = "") -> str:
    """A paragraph wrapped to a width, later lines indented."""
    import textwrap

    return textwrap.fill(text, width, subsequent_indent=indent, break_long_words=False, break_on_hyphens=False)
