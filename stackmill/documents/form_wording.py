"""Every sentence an error about the form of a file can say: its encoding, its YAML, its size."""

from __future__ import annotations

import unicodedata

from stackmill.documents.wording import Sentence
from stackmill.units import quoted

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
    return Sentence(f"the key {quoted(key)} stands here for the second time", f"it is already in line {line}; keep one")


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
        Sentence("this line is not part of the list above it", "begin every item with a - in the same column"),
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
