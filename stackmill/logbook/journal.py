"""The logbook: an append-only record of one run, a JSON object a line. Nothing that was written is ever changed.

Every append takes the lock, writes one line in one call and syncs it to the disk. A last line that was torn by a
crash is left where it is and closed by the next append; it is told, and skipped.
"""

from __future__ import annotations

import errno
import fcntl
import json
import os
import stat
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from stackmill.errors import FileAccessError, InputError, InputErrors, Place
from stackmill.frozen import frozen

KINDS = ("start", "milled", "look", "note", "void")
_LONGEST = 1_000_000


@frozen
class Entry:
    """One line: its number (from 1), its kind, when it was written (UTC), and what it says."""

    number: int
    kind: str
    written: str
    says: Mapping[str, Any]


@frozen
class Journal:
    """A logbook as read. entries: every sound line, voided ones too; voided: their numbers; torn: lines skipped."""

    path: Path
    entries: tuple[Entry, ...]
    voided: frozenset[int]
    torn: tuple[int, ...]

    @property
    def valid(self) -> tuple[Entry, ...]:
        """The entries that count."""
        return tuple(e for e in self.entries if e.number not in self.voided and e.kind != "void")

    @property
    def start(self) -> Entry:
        """The first line: what run this is."""
        return self.entries[0]


def append(path: Path, kind: str, says: Mapping[str, Any], *, create: bool = False) -> Entry:
    """Append one entry and sync it. create: the file must not be there yet, otherwise it must.

    Raises FileAccessError where the file cannot be written; then nothing that was in it is lost.
    """
    assert kind in KINDS
    try:
        with _locked(path, create=create) as file:
            number, torn = _count(file)
            entry = Entry(number + 1, kind, datetime.now(UTC).isoformat(timespec="seconds"), says)
            line = json.dumps({"n": entry.number, "kind": kind, "written": entry.written, **says}, ensure_ascii=False)
            # One write for the whole line: a crash leaves it torn at worst, and a torn line ends where this begins.
            _write_all(file, ("\n" if torn else "") + line + "\n")
            os.fsync(file)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        cure = "name a new file" if isinstance(error, FileExistsError) else ""
        raise FileAccessError(f"the logbook cannot be written: {reason}", cure=cure, place=Place(str(path))) from error
    return entry


def _write_all(file: int, text: str) -> None:
    content = text.encode()
    written = os.write(file, content)
    if written < len(content):
        os.ftruncate(file, os.fstat(file).st_size - written)
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))


@contextmanager
def _locked(path: Path, *, create: bool) -> Iterator[int]:
    """The file, open for reading and appending, locked against every other writer."""
    flags = os.O_RDWR | os.O_APPEND | (os.O_CREAT | os.O_EXCL if create else 0)
    file = os.open(path, flags, 0o666)
    try:
        if not stat.S_ISREG(os.fstat(file).st_mode):
            raise OSError(errno.EINVAL, "this is not a plain file")
        fcntl.flock(file, fcntl.LOCK_EX)
        yield file
    finally:
        os.close(file)


def _count(file: int) -> tuple[int, bool]:
    """How many whole lines there are, and whether a torn one follows."""
    count, last, offset = 0, b"\n", 0
    while True:
        block = os.pread(file, 1 << 20, offset)
        if not block:
            return count + (last != b"\n"), last != b"\n"
        count, last, offset = count + block.count(b"\n"), block[-1:], offset + len(block)


def read_journal(path: Path) -> Journal:
    """Read a logbook. Raises FileAccessError, and InputErrors for lines that were never written by a logbook.

    Only a last line, or one that a later append closed, may be torn: it is skipped.
    """
    if path.exists() and not path.is_file():
        raise FileAccessError("the logbook cannot be read: this is not a plain file", place=Place(str(path)))
    try:
        content = path.read_bytes()
    except FileNotFoundError as error:
        cure = "begin one with stackmill start JOB --logbook FILE"
        raise FileAccessError("there is no such logbook", cure=cure, place=Place(str(path))) from error
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FileAccessError(f"the logbook cannot be read: {reason}", place=Place(str(path))) from error
    entries: list[Entry] = []
    torn: list[int] = []
    errors: list[InputError] = []
    lines = content.split(b"\n")
    for number, line in enumerate(lines if lines[-1] else lines[:-1], 1):
        found = _entry(line, number)
        if isinstance(found, Entry):
            entries.append(found)
        elif found is None:
            torn.append(number)
        else:
            place = Place(str(path), number, 1, line[:120].decode("utf-8", "replace"))
            errors.append(
                InputError(found, cure="put the line back as it was; a correction is a new line", place=place)
            )
    if not errors and (not entries or entries[0].kind != "start"):
        errors.append(
            InputError("this is no logbook: it does not begin with a start", cure="begin one with stackmill start",
                       place=Place(str(path), 1, 1))
        )  # fmt: skip
    if errors:
        raise InputErrors(errors)
    voided = frozenset(int(e.says["entry"]) for e in entries if e.kind == "void")
    return Journal(path, tuple(entries), voided, tuple(torn))


def _entry(line: bytes, number: int) -> Entry | str | None:
    """An entry; None for a torn line; or what is wrong with one that somebody changed."""
    try:
        found = json.loads(line)
    except (ValueError, RecursionError):
        return None if not line.rstrip().endswith(b"}") else "this line is no JSON"
    if not isinstance(found, dict) or found.get("kind") not in KINDS:
        return "this line is no entry of a logbook"
    if found.pop("n", None) != number:
        return f"this line does not say that it is entry {number}"
    kind, written = found.pop("kind"), found.pop("written", None)
    if not isinstance(written, str):
        return "this line does not say when it was written"
    return Entry(number, kind, written, found)
