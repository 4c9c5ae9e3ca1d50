"""YAML text to a tree in which every key and value remembers its line and column.

PyYAML's events are walked here instead of letting a loader build objects: so `no`, `1:30`, `012` and `1e3`
stay the text they are, a key that stands twice is noticed, and nothing a file says can make the program
allocate or run anything. Anchors, aliases, tags and several documents in a file are refused.
"""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import yaml

from stackmill.documents import form_wording as wording
from stackmill.documents.wording import Sentence
from stackmill.errors import InputError, InputErrors, Place

MOST_BYTES = 1_000_000
DEEPEST = 50
MOST_NODES = 50_000

KeyPath = tuple[str | int, ...]

_Loader: Any = getattr(yaml, "CLoader", yaml.Loader)
# Control characters, halves of characters, and the line breaks that only YAML would count as such.
_ODD_CHARACTER = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u2028\u2029\ud800-\udfff\ufeff\ufffe\uffff]")
# What a quoted text can hold by its escapes: all control characters, and those that turn the writing's direction.
_ODD_IN_VALUE = re.compile("[\x00-\x1f\x7f-\x9f\u2028-\u202e\u2066-\u2069\ufeff]")
_TAB_BEFORE_COMMENT = re.compile(r"^[^#\n]*?\t", re.MULTILINE)


@dataclass(slots=True)
class Node:
    """A value in the file: where it begins, line and column from 1.

    source: the tree it came from, where that is not the one it stands in (a value given on the command line).
    """

    line: int
    column: int
    source: Tree | None = field(default=None, kw_only=True)


@dataclass(slots=True)
class Scalar(Node):
    """A text as it stands; `quoted` tells `''` from nothing at all."""

    text: str
    quoted: bool = False


@dataclass(slots=True)
class Block(Node):
    """Keys and their values. keys: where each key stands."""

    values: dict[str, Node] = field(default_factory=dict)
    keys: dict[str, Scalar] = field(default_factory=dict)


@dataclass(slots=True)
class Items(Node):
    """A list of values."""

    values: list[Node] = field(default_factory=list)


@dataclass(frozen=True, slots=True)
class Tree:
    """A read file. root: its outermost value; lines: its text, line by line, for excerpts."""

    root: Node
    file: str
    lines: Sequence[str]

    def plain(self) -> Any:
        """Dicts, lists and texts (None where nothing stands), for the models to type."""
        return plain_node(self.root)

    def node(self, path: KeyPath) -> Node:
        """The value at a key path, or its nearest parent that is there."""
        return self._walk(path)[0]

    def place(self, path: KeyPath) -> Place:
        """Where the value at a key path stands; its nearest parent where it is missing."""
        node, _, home = self._walk(path)
        return home.place_of(node)

    def key_place(self, path: KeyPath) -> Place:
        """Where the last key of a path stands; as `place` where there is no such key."""
        node, key, home = self._walk(path)
        return home.place_of(key or node)

    def has(self, path: KeyPath) -> bool:
        """Whether the path leads all the way to a value."""
        node: Node = self.root
        for step in path:
            found = _child(node, step)
            if found is None:
                return False
            node = found
        return True

    def _walk(self, path: KeyPath) -> tuple[Node, Scalar | None, Tree]:
        node, key, home = self.root, None, self
        for step in path:
            found = _child(node, step)
            if found is None:
                continue  # a step of the model that the file does not spell out, such as a list of one
            key = node.keys[str(step)] if isinstance(node, Block) else None
            node = found
            home = found.source or home
        return node, key, home

    def place_of(self, node: Node) -> Place:
        """Where a value of this tree stands."""
        if not self.lines:
            return Place(self.file)
        return Place(self.file, node.line, node.column, self.lines[node.line - 1])


def _child(node: Node, step: str | int) -> Node | None:
    if isinstance(node, Block) and isinstance(step, str):
        return node.values.get(step)
    if isinstance(node, Items) and isinstance(step, int) and step < len(node.values):
        return node.values[step]
    return None


def plain_node(node: Node) -> Any:
    """One value of a tree as dicts, lists and texts; None where nothing stands."""
    if isinstance(node, Block):
        return {key: plain_node(value) for key, value in node.values.items()}
    if isinstance(node, Items):
        return [plain_node(value) for value in node.values]
    assert isinstance(node, Scalar)
    return node.text if node.text or node.quoted else None


def read_tree(source: str | bytes, file: str) -> Tree:
    """Read one YAML document. Raises InputErrors with every complaint about its form."""
    text = decode(source, file)
    lines = text.split("\n")
    odd = [*_odd_characters(text, file, lines)]
    if odd:
        raise InputErrors(odd)
    reader = _Reader(file, lines)
    root = reader.read(text)
    if reader.errors:
        raise InputErrors(reader.errors)
    return Tree(root, file, lines)


def decode(source: str | bytes, file: str) -> str:
    """The text of a file with one kind of line break, or InputErrors where it is no UTF-8 text."""
    size = len(source) if isinstance(source, bytes) else len(source.encode("utf-8", "surrogatepass"))
    if size > MOST_BYTES:
        raise _one_error(Place(file), wording.too_large(MOST_BYTES))
    if isinstance(source, str):
        text = source
    else:
        if source[:2] in (b"\xff\xfe", b"\xfe\xff"):
            raise _one_error(Place(file), wording.UTF16)
        try:
            text = source.decode("utf-8-sig")
        except UnicodeDecodeError as error:
            before = source[: error.start].decode("utf-8-sig", "replace")
            line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
            excerpt = source.decode("utf-8-sig", "replace").split("\n")[line - 1]
            place = Place(file, line, column, excerpt)
            raise _one_error(place, wording.not_utf8(source[error.start])) from None
    return text.removeprefix("\ufeff").replace("\r\n", "\n").replace("\r", "\n")


def _one_error(place: Place, says: Sentence) -> InputErrors:
    return InputErrors([InputError(says.what, cure=says.cure, place=place)])


def _odd_characters(text: str, file: str, lines: Sequence[str]) -> Iterator[InputError]:
    starts = [0]
    for line in lines:
        starts.append(starts[-1] + len(line) + 1)
    for pattern in (_ODD_CHARACTER, _TAB_BEFORE_COMMENT):
        for found in pattern.finditer(text):
            at = found.end() - 1
            number = bisect_right(starts, at)
            place = Place(file, number, at - starts[number - 1] + 1, lines[number - 1])
            says = wording.odd_character(text[at])
            yield InputError(says.what, cure=says.cure, place=place)
            if pattern is _ODD_CHARACTER:
                return  # one is enough: such a file is no text at all


class _Reader:
    """Walks the events of one file, building nodes and collecting complaints."""

    def __init__(self, file: str, lines: Sequence[str]) -> None:
        self.file = file
        self.lines = lines
        self.errors: list[InputError] = []
        self.nodes = 0

    def read(self, text: str) -> Node:
        self.events: Iterator[Any] = yaml.parse(text, Loader=_Loader)
        try:
            return self._document()
        except yaml.MarkedYAMLError as error:
            marks: tuple[Any, Any] = (error.problem_mark, error.context_mark)
            mark, start = marks
            opened = start.line + 1 if start is not None else 0
            line = mark.line if mark is not None else 0
            says = wording.yaml_problem(error.problem or "", self._line(line), opened)
            if "maximum nesting depth" in (error.problem or ""):  # the parser looks ahead, and has a limit too
                says = wording.too_deep(DEEPEST)
            if says.opened and opened:
                mark = start
            raise InputErrors([*self.errors, self._error(mark, says)]) from None
        except yaml.YAMLError:  # the byte-level reader; odd characters were caught before
            raise _one_error(Place(self.file), wording.UNREADABLE) from None

    def _document(self) -> Node:
        root: Node = Scalar(1, 1, "")
        documents = 0
        event: Any
        for event in self.events:
            if isinstance(event, yaml.DocumentStartEvent):
                documents += 1
                if documents > 1:
                    self._complain(event.start_mark, wording.SECOND_DOCUMENT)
                    return root
                if event.tags:
                    self._complain(event.start_mark, wording.TAG)
                root = self._node(next(self.events), 1)
        return root

    def _node(self, event: Any, depth: int) -> Node:
        mark: Any = event.start_mark
        end: Any = event.end_mark
        line, column = mark.line + 1, mark.column + 1
        self._check(event, depth)
        if isinstance(event, yaml.ScalarEvent):
            plain = not event.style  # None from one of PyYAML's parsers, empty from the other
            if plain and end.line > mark.line and event.value:
                self._complain(mark, wording.SEVERAL_LINES)
            odd = _ODD_IN_VALUE.search(event.value)
            if odd:
                self._complain(mark, wording.odd_character(odd[0]))
            return Scalar(line, column, event.value, not plain)
        if isinstance(event, yaml.SequenceStartEvent):
            items = Items(line, column)
            while not isinstance(inner := next(self.events), yaml.SequenceEndEvent):
                items.values.append(self._node(inner, depth + 1))
            return items
        if isinstance(event, yaml.MappingStartEvent):
            return self._block(Block(line, column), depth)
        return Scalar(line, column, "")  # an alias, complained about already

    def _block(self, block: Block, depth: int) -> Block:
        while not isinstance(event := next(self.events), yaml.MappingEndEvent):
            key, value = self._node(event, depth + 1), self._node(next(self.events), depth + 1)
            if not isinstance(key, Scalar):
                self._complain(event.start_mark, wording.KEY_IS_NO_TEXT)
            elif key.text in block.values:
                self._complain(event.start_mark, wording.twice(key.text, block.keys[key.text].line))
            elif not key.text:
                self._complain(event.start_mark, wording.EMPTY_KEY)
            else:
                block.keys[key.text], block.values[key.text] = key, value
        return block

    def _check(self, event: Any, depth: int) -> None:
        self.nodes += 1
        if depth > DEEPEST:
            raise InputErrors([*self.errors, self._error(event.start_mark, wording.too_deep(DEEPEST))])
        if self.nodes > MOST_NODES:
            raise InputErrors([*self.errors, self._error(event.start_mark, wording.too_many(MOST_NODES))])
        if isinstance(event, yaml.AliasEvent):
            self._complain(event.start_mark, wording.alias(str(event.anchor)))
        elif event.anchor is not None:
            self._complain(event.start_mark, wording.anchor(event.anchor))
        elif event.tag is not None:
            self._complain(event.start_mark, wording.TAG)

    def _complain(self, mark: Any, says: Sentence) -> None:
        self.errors.append(self._error(mark, says))

    def _error(self, mark: Any, says: Sentence) -> InputError:
        if mark is None:
            return InputError(says.what, cure=says.cure, place=Place(self.file))
        # The end of a file may lie past its last line.
        index = min(mark.line, len(self.lines) - 1)
        column = mark.column if index == mark.line else len(self.lines[index])
        place = Place(self.file, index + 1, column + 1, self._line(index))
        return InputError(says.what, cure=says.cure, place=place)

    def _line(self, index: int) -> str:
        return self.lines[min(index, len(self.lines) - 1)]
