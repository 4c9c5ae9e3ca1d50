"""The exception family. The command line catches the root and nothing else.

StackmillError                  anything stackmill can explain to its user
├── UsageError                  an option or an argument is off                        exit 2
├── InputError                  a file says something that cannot be                   exit 3
│   └── InputErrors             all the input errors of all files, at once             exit 3
├── FileAccessError             a file cannot be read or written                       exit 4
└── NoAnswerError               the question was answered, and the answer is no        exit 1
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Place:
    """Where in a file something stands.

    `line` and `column` count from 1; 0 means that no line is known (a whole file). `excerpt` is the text
    of that line, for the caret.
    """

    file: str
    line: int = 0
    column: int = 0
    excerpt: str = ""

    def __str__(self) -> str:
        file = "".join(letter if letter.isprintable() else "?" for letter in self.file)
        return f"{file}:{self.line}:{self.column}" if self.line else file


class StackmillError(Exception):
    """Root of the family: carries what is wrong, where, and what to do about it."""

    exit_code = 70

    def __init__(self, what: str, *, cure: str = "", place: Place | None = None, key: str = "") -> None:
        super().__init__(what)
        self.what = what
        self.cure = cure
        self.place = place
        self.key = key

    @property
    def file(self) -> str | None:
        """The file at fault, or None."""
        return self.place.file if self.place else None

    @property
    def line(self) -> int | None:
        """The line at fault, from 1, or None."""
        return self.place.line if self.place and self.place.line else None

    @property
    def column(self) -> int | None:
        """The column at fault, from 1, or None."""
        return self.place.column if self.place and self.place.column else None

    def headline(self) -> str:
        """One line: `file:line:column: error: what is wrong (what to write instead)`."""
        where = f"{self.place}: " if self.place else ""
        cure = f" ({self.cure})" if self.cure else ""
        return f"{where}error: {self.what}{cure}"

    def __str__(self) -> str:
        return self.headline()


class UsageError(StackmillError):
    """An option or an argument is off."""

    exit_code = 2


class InputError(StackmillError):
    """A file says something that cannot be."""

    exit_code = 3


class InputErrors(InputError):
    """Every input error found in every file bound by a job, sorted by place."""

    def __init__(self, errors: Sequence[InputError]) -> None:
        first = errors[0]
        super().__init__(first.what, cure=first.cure, place=first.place, key=first.key)
        self.errors: tuple[InputError, ...] = tuple(errors)

    def __str__(self) -> str:
        return "\n".join(error.headline() for error in self.errors)


class FileAccessError(StackmillError):
    """A file cannot be read or written."""

    exit_code = 4


class NoAnswerError(StackmillError):
    """The question was answered, and the answer is no."""

    exit_code = 1


class StackmillWarning(UserWarning):
    """A result is given, but something about it deserves a second thought."""
