"""Moments and section lines as options give them."""

from __future__ import annotations

import re
from collections.abc import Sequence

from stackmill.errors import UsageError
from stackmill.planning.relief import When
from stackmill.relief.gridding import Cut
from stackmill.units import UnitsError, quoted, read_number

_LINE = re.compile(r"\s*(?P<axis>[A-Za-z]+)\s*=\s*(?P<at>.+?)\s*")


def asked_for(at: Sequence[str], reach: str | None, *, at_stop: bool) -> When | None:
    """The moments asked for; None for none. Raises UsageError."""
    times = [part for text in at for part in text.split(",") if part.strip()]
    if at and not times:
        raise UsageError("--at names no time", cure="write --at 10min,20min")
    if not times and reach is None and not at_stop:
        return None
    found = []
    for text in times:
        try:
            found.append(read_number(text, "time"))
        except UnitsError as error:
            raise UsageError(f"--at: {error.what}", cure=error.cure) from error
        if found[-1] < 0.0:
            raise UsageError(f"--at: {quoted(text)} lies before the start", cure="give a time from 0 s on")
    return When(tuple(found), reach, at_stop)


def section_line(text: str | None) -> Cut | None:
    """A line across the cell, as x=2.4um; None for none. Raises UsageError."""
    if text is None:
        return None
    found = _LINE.fullmatch(text)
    if found is None or found["axis"].lower() not in ("x", "y"):
        raise UsageError(f"--section: {quoted(text)} is no line across the cell", cure="write x=2.4um or y=0.6um")
    try:
        at = read_number(found["at"], "length")
    except UnitsError as error:
        raise UsageError(f"--section: {error.what}", cure=error.cure) from error
    return Cut("x" if found["axis"].lower() == "x" else "y", at)
