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
    encoding = (getattr(sys.stdout, "encoding", None) or "ascii").lower().replace("-", "")
    return Paper(max(60, min(shutil.get_terminal_size((80, 24)).columns, 200)), ascii_only or encoding != "utf8")


def write(text: str, output: str, *, force: bool) -> None:
    """Write an answer: nothing is lost if it fails half-way. Raises FileAccessError."""
    if output == "-":
        _print(text)
        return
    write_bytes((text + "\n").encode(), output, force=force)


def picture_suffix(plot: str) -> str:
    """The suffix of a picture's file, before the work that would fill it. Raises UsageError."""
    suffix = Path(plot).suffix.lower()
    if suffix not in (".png", ".svg"):
        raise UsageError(f"no picture is made as {Path(plot).name!r}", cure="end it in .png or .svg")
    return suffix


def archive_suffix(save: str) -> None:
    """Refuse an archive's file that is not named as one. Raises UsageError."""
    if Path(save).suffix.lower() != ".npz":
        raise UsageError(f"surfaces are not kept as {Path(save).name!r}", cure="end it in .npz")


def refuse_taken(output: str, *, force: bool) -> None:
    """Refuse a file that is there already, before the work that would fill it. Raises FileAccessError."""
    if not force and Path(output).exists():
        raise FileAccessError("the file is there already", cure="give --force to overwrite it", place=Place(output))


def write_bytes(content: bytes, output: str, *, force: bool) -> None:
    """Write a file: beside, synced, renamed. Raises FileAccessError."""
    target = Path(output)
    try:
        target = target.resolve()  # a link stays a link
        if target.exists() and not target.is_file():
            raise FileAccessError("this is not a plain file", cure="name a file", place=Place(output))
        refuse_taken(output, force=force)
        _replace(target, content)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FileAccessError(f"cannot be written: {reason}", place=Place(output)) from error


def _print(text: str) -> None:
    if sys.stdout is None:
        raise FileAccessError("there is no standard output", cure="give -o FILE")
    try:
        sys.stdout.write(text + "\n")
        sys.stdout.flush()
    except BrokenPipeError:
        raise  # the reader has had enough: no error
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FileAccessError(f"standard output cannot be written: {reason}") from error


def _replace(target: Path, content: bytes) -> None:
    """Write beside the target, sync, and rename over it."""
    import tempfile

    mode = target.stat().st_mode & 0o777 if target.exists() else 0o666 & ~_umask()
    descriptor, beside = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.")
    try:
        with os.fdopen(descriptor, "wb") as out:
            out.write(content)
            out.flush()
            os.fsync(out.fileno())
        Path(beside).chmod(mode)
        Path(beside).replace(target)
    except BaseException:
        Path(beside).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def refuse_unused(form: Format, **given: bool) -> None:
    """Refuse options that only people's formats know, where a machine's is asked for. Raises UsageError."""
    for name, value in given.items():
        if value and form in (Format.json, Format.csv):
            raise UsageError(f"--{name} does nothing for {form.value}", cure=f"leave --{name} out, or -f table")


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
