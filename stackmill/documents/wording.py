"""Every sentence an error about a file can say, and how a list of errors is laid out.

A complaint is one sentence as a colleague would say it, and a cure: what to write instead.
"""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from stackmill.errors import InputError, InputErrors
from stackmill.units import quoted

MOST_PRINTED = 20
_WIDEST_EXCERPT = 100


@dataclass(frozen=True, slots=True)
class Sentence:
    """What is wrong and what to do. opened: the place to show is where the thing at fault was begun."""

    what: str
    cure: str = ""
    opened: bool = False


class Refusal(ValueError):  # noqa: N818 - never seen outside documents, where it is what a check says
    """Raised by a model's checks: the sentence, and the key path inside the model at fault."""

    def __init__(self, says: Sentence, *path: str | int) -> None:
        super().__init__(says.what)
        self.says = says
        self.path = path


class Refusals(ValueError):  # noqa: N818 - as above
    """Several refusals of one model at once."""

    def __init__(self, refusals: Iterable[Refusal]) -> None:
        self.refusals = tuple(refusals)
        super().__init__("; ".join(refusal.says.what for refusal in self.refusals))


def refuse(what: str, cure: str = "", *path: str | int) -> Refusal:
    """A refusal from its words, ready to raise."""
    return Refusal(Sentence(what, cure), *path)


# --- the form of a file -------------------------------------------------------------------------------------

UTF16 = Sentence("this file is saved as UTF-16", "save it as UTF-8")
UNREADABLE = Sentence("this file cannot be read as YAML", "check that it is a plain text file")
SECOND_DOCUMENT = Sentence("a second document begins here", "keep one document in a file and remove the ---")
TAG = Sentence("tags such as !!int are not used here", "remove everything that begins with a !")
KEY_IS_NO_TEXT = Sentence("a key has to be a plain text", "write 'key: value'")
EMPTY_KEY = Sentence("there is no key before this colon", "write 'key: value'")
SEVERAL_LINES = Sentence(
    "this text runs on into the next line", "check the indentation below it, or put the text in quotes"
)


def too_large(most: int) -> Sentence:
    """A file over the size limit, in bytes."""
    return Sentence(f"this file has more than {most:,} bytes", "is this the file you meant?")


def not_utf8(byte: int) -> Sentence:
    """A byte that no UTF-8 text has."""
    return Sentence(
        f"this file is not UTF-8 text: byte 0x{byte:02X} here belongs to another encoding", "save it as UTF-8"
    )


def odd_character(character: str) -> Sentence:
    """A tab, a NUL or another control character."""
    if character == "\t":
        return Sentence("there is a tab here", "use spaces")
    if character == "\0":
        return Sentence("there is a NUL byte here", "is this a text file?")
    name = unicodedata.name(character, "a control character").lower()
    return Sentence(f"there is an invisible character here, U+{ord(character):04X} ({name})", "remove it")


def twice(key: str, line: int) -> Sentence:
    """A key that stands twice in one block."""
    return Sentence(
        f"the key {quoted(key)} stands here for the second time", f"it is already in line {line}; keep one"
    )


def too_deep(deepest: int) -> Sentence:
    """Lists and blocks nested too deep."""
    return Sentence(f"this is nested more than {deepest} levels deep", "check the brackets")


def too_many(most: int) -> Sentence:
    """More values than any real file has."""
    return Sentence(f"this file has more than {most:,} values", "is this the file you meant?")


def anchor(name: str) -> Sentence:
    """A YAML anchor."""
    return Sentence(f"the anchor &{name} is not allowed", "write the values out where they are needed")


def alias(name: str) -> Sentence:
    """A YAML alias."""
    return Sentence(f"the alias *{name} is not allowed", "write the values out here")


def yaml_problem(problem: str, line: str, opened: int) -> Sentence:
    """A syntax error, from the parser's own words (both of PyYAML's parsers), the line and where it began."""
    for words, says in _YAML_PROBLEMS:
        if any(word in problem for word in words):
            since = f" in line {opened}" if opened else ""
            return Sentence(says.what.replace("{since}", since), says.cure, says.opened)
    if "token" in problem or "directive" in problem:
        mark = next((c for c in line if c in "@`%"), "")
        begins = f"begin with {mark}" if mark else "begin like this"
        return Sentence(f"a text cannot {begins}", "put it in quotes")
    return Sentence("this line cannot be read as YAML", "check its colons, brackets, quotes and indentation")


_YAML_PROBLEMS = (
    (
        ("mapping values are not allowed",),
        Sentence(
            "there is a colon here where no key can stand",
            "check the indentation of this line and the one above, or put the text in quotes",
        ),
    ),
    (
        ("did not find expected key", "expected <block end>"),
        Sentence(
            "this line is not indented like the ones it belongs to",
            "begin keys of one group in the same column",
        ),
    ),
    (
        ("expected ',' or ']'",),
        Sentence("the list opened here with [ is not closed", "add the missing ] or comma", opened=True),
    ),
    (
        ("expected ',' or '}'",),
        Sentence("the group opened here with { is not closed", "add the missing } or comma", opened=True),
    ),
    (
        ("expected '-' indicator",),
        Sentence(
            "this line is not part of the list above it", "begin every item with a - in the same column"
        ),
    ),
    (
        ("unexpected end of stream", "document separator"),
        Sentence("the quote opened here is not closed", "add the missing quote", opened=True),
    ),
    (
        ("unknown escape", "escape sequence"),
        Sentence("the \\ in this quoted text means nothing", "use single quotes"),
    ),
    (
        ("sequence entries are not allowed",),
        Sentence("a list cannot begin on the line of its key", "put the - on a line of its own, or use [ ]"),
    ),
    (
        ("could not find expected ':'",),
        Sentence("this line has no colon after its key", "write 'key: value'"),
    ),
    (
        ("expected node content",),
        Sentence("there is a bracket or comma here where a value belongs", "remove it"),
    ),
)


# --- files themselves ---------------------------------------------------------------------------------------

IS_A_FOLDER = Sentence("this is a folder, not a file", "name a file in it")


def no_such_file(name: str, neighbours: Sequence[str]) -> Sentence:
    """A file that is not there."""
    near = nearest(name, neighbours)
    return Sentence("there is no such file", f"did you mean {near}?" if near else "check its name and folder")


def cannot_open(reason: str) -> Sentence:
    """A file that is there but cannot be opened."""
    return Sentence(f"this file cannot be opened: {reason.lower()}", "check who may read it")


def no_block(what: str, keys: Sequence[str], shape: str) -> Sentence:
    """A file that is not a group of keys at all."""
    if shape == "nothing":
        return Sentence(f"this {what} is empty", f"begin with '{keys[0]}:'")
    return Sentence(
        f"a {what} is a group of keys, and this is {shape}", f"write its keys: {listed(keys, last='and')}"
    )


# --- the keys and values of a file --------------------------------------------------------------------------


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word most like this one, or None where nothing is like it."""
    by_folded = {_folded(k): k for k in known}
    found = difflib.get_close_matches(_folded(word), by_folded, n=1, cutoff=0.6)
    return by_folded[found[0]] if found else None


def _folded(word: str) -> str:
    return " ".join(word.casefold().replace("_", " ").replace("-", " ").split())


def listed(words: Sequence[str], last: str = "or", most: int = 12) -> str:
    """`a, b or c`, cut where the list is long."""
    shown = [*words[:most], f"{len(words) - most} more"] if len(words) > most else list(words)
    return f"{', '.join(shown[:-1])} {last} {shown[-1]}" if len(shown) > 1 else "".join(shown)


def choose(word: str, known: Sequence[str], *, nothing: str = "") -> str:
    """A cure for a name that is not known: the nearest one, or the list."""
    near = nearest(word, known)
    if near:
        return f"did you mean {near}?"
    return f"use {listed(known)}" if known else nothing


def unknown_key(key: str, owner: str, known: Sequence[str]) -> Sentence:
    """A key that its block does not have."""
    if key.startswith("across die"):
        return Sentence(
            "the comma before 'across die' ends the value here",
            'put the value in quotes: "600 nm ± 8 %, across die ± 3 %"',
        )
    near = nearest(key, known)
    cure = f"did you mean '{near}'?" if near else f"known here: {listed(known, last='and', most=20)}"
    return Sentence(f"{owner} has no key {quoted(key)}", cure)


def missing_key(key: str, owner: str, example: str = "") -> Sentence:
    """A key that has to be there."""
    return Sentence(f"{owner} has no {key}", f"add {example or key + ': ...'}")


def empty(key: str) -> Sentence:
    """A key with nothing after it."""
    return Sentence(f"nothing stands after '{key}:'", "write its value, or leave the key out")


def wrong_shape(key: str, wanted: str, found: str) -> Sentence:
    """A list where a text belongs, and the like."""
    return Sentence(f"{key} has to be {wanted}, and this is {found}", f"write {wanted}")


def not_a_choice(key: str, text: str, choices: Sequence[str]) -> Sentence:
    """A word outside a short list."""
    near = nearest(text, choices)
    cure = f"did you mean {near}?" if near else f"write {listed(choices)}"
    return Sentence(f"{quoted(text)} is no {key}", cure)


# --- laying errors out --------------------------------------------------------------------------------------


def in_order(errors: Iterable[InputError]) -> list[InputError]:
    """Errors by file (in the order the files were first met), line and column, without repeats."""
    flat = [e for error in errors for e in (error.errors if isinstance(error, InputErrors) else (error,))]
    files = {e.file or "": 0 for e in flat}
    rank = {file: k for k, file in enumerate(files)}
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
