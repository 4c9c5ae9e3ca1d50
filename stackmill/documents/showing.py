"""How errors are laid out: in the order of the files, each with its line and a caret."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable

from stackmill.errors import InputError, InputErrors

MOST_PRINTED = 20
_WIDEST_EXCERPT = 100


def in_order(errors: Iterable[InputError], files: Iterable[str] = ()) -> list[InputError]:
    """Errors by file (in the order given, else as they come), line and column, without repeats."""
    flat = [e for error in errors for e in (error.errors if isinstance(error, InputErrors) else (error,))]
    rank = {file: k for k, file in enumerate(dict.fromkeys([*files, *(e.file or "" for e in flat)]))}
    unique = list({e.headline(): e for e in flat}.values())
    return sorted(unique, key=lambda e: (rank[e.file or ""], e.line or 0, e.column or 0))


def report(error: InputError | Iterable[InputError], most: int = MOST_PRINTED) -> str:
    """Errors as the command line prints them: headline, the line at fault, a caret; then how many more."""
    errors = in_order([error] if isinstance(error, InputError) else error)
    blocks = [_block(e) for e in errors[:most]]
    if len(errors) > most:
        blocks.append(f"and {len(errors) - most} more")
    return "\n".join(blocks)


def _block(error: InputError) -> str:
    place = error.place
    if place is None or not place.line or not place.excerpt.strip():
        return error.headline()
    line = "".join(c if c.isprintable() else " " for c in place.excerpt)
    column = max(place.column - 1, 0)
    start = max(0, column - _WIDEST_EXCERPT * 2 // 3) if len(line) > _WIDEST_EXCERPT else 0
    shown = line[start : start + _WIDEST_EXCERPT]
    # A wide character takes two cells of a terminal, a combining one none.
    before = "".join(" " * _cells(c) for c in line[start:column])
    return f"{error.headline()}\n    {shown}\n    {before}^"


def _cells(character: str) -> int:
    if unicodedata.combining(character):
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1
