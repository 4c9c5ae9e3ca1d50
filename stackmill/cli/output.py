"""Where an answer goes: standard output, or a file that is written beside and renamed."""

from __future__ import annotations

import os
import shutil
import sys
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

from stackmill.cli.options import Format
from stackmill.errors import FileAccessError, InputError, Place, StackmillWarning, UsageError
from stackmill.report.render import Paper

_SUFFIXES = {".csv": Format.csv, ".json": Format.json, ".md": Format.markdown, ".txt": Format.table}


def chosen_format(given: Format | None, output: str) -> Format:
    """The format asked for, or the one the output file's suffix means."""
    if given is not None:
        return given
    if output == "-":
        return Format.table
    suffix = Path(output).suffix.lower()
    if suffix not in _SUFFIXES:
        raise UsageError(f"no format is known for {output!r}", cure="end it in .txt, .csv, .json or .md, or give -f")
    return _SUFFIXES[suffix]


def paper(output: str, ascii_only: bool) -> Paper:
    """The paper an answer is written on: the terminal's width, or 100 characters for a file."""
    if output != "-":
        return Paper(100, ascii_only)
    encoding = (sys.stdout.encoding or "ascii").lower().replace("-", "")
    return Paper(max(60, min(shutil.get_terminal_size((80, 24)).columns, 200)), ascii_only or encoding != "utf8")


def write(text: str, output: str, *, force: bool) -> None:
    """Write an answer: nothing is lost if it fails half-way."""
    if output == "-":
        sys.stdout.write(text + "\n")
        return
    target = Path(output)
    if target.exists() and not force:
        raise FileAccessError("the file is there already", cure="give --force to overwrite it", place=Place(output))
    import tempfile

    try:
        descriptor, beside = tempfile.mkstemp(dir=target.parent or Path(), prefix=f".{target.name}.")
        try:
            with os.fdopen(descriptor, "w", encoding="utf-8") as out:
                out.write(text + "\n")
                out.flush()
                os.fsync(out.fileno())
            Path(beside).replace(target)
        except BaseException:
            Path(beside).unlink(missing_ok=True)
            raise
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FileAccessError(f"cannot be written: {reason}", place=Place(output)) from error


def say_notes(notes: Sequence[str], *, quiet: bool) -> None:
    """What a job has to say besides its answer, on standard error."""
    for note in () if quiet else notes:
        sys.stderr.write(f"note: {note}\n")


@contextmanager
def gathered_warnings(*, quiet: bool, strict: bool) -> Iterator[list[str]]:
    """Collect stackmill's own warnings; print them on leaving, or refuse where they are not wanted."""
    texts: list[str] = []
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", StackmillWarning)
        yield texts
    for warning in caught:
        if not issubclass(warning.category, StackmillWarning):
            warnings.warn_explicit(warning.message, warning.category, warning.filename, warning.lineno)
        elif str(warning.message) not in texts:
            texts.append(str(warning.message))
    if strict and texts:
        raise InputError(f"--strict: {texts[0]}", cure="leave --strict out to see the answer all the same")
    if not quiet:
        for text in texts:
            sys.stderr.write(f"warning: {text}\n")
