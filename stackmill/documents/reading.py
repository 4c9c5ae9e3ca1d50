"""A file read into a checked record that still knows its lines."""

from __future__ import annotations

from pathlib import Path
from typing import Any, Generic, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError

from stackmill.documents import wording
from stackmill.documents.complaints import complaints, keys_of, shape_of, title_of
from stackmill.documents.healing import healed
from stackmill.documents.marks import MOST_BYTES, Block, KeyPath, Tree, read_tree
from stackmill.documents.wording import Sentence
from stackmill.errors import FileAccessError, InputError, InputErrors, Place
from stackmill.frozen import frozen

Source = Path | str | bytes | Tree
"""Where a document comes from: a file, its text, or part of a file that has been read."""


class Record(BaseModel):
    """The base of all records: frozen, no unknown keys; attributes are named like the keys in the file."""

    model_config = ConfigDict(frozen=True, extra="forbid", populate_by_name=True, defer_build=True)


M = TypeVar("M", bound=BaseModel)


@frozen
class Document(Generic[M]):
    """A record with the tree it was read from. Key paths are as in the file: ('layers', 2, 'thickness').

    healed: values that could not be read and were replaced, so that the rest could be checked; a document
    that has any is only good for finding further mistakes.
    """

    model: M
    tree: Tree
    healed: tuple[KeyPath, ...] = ()

    @property
    def file(self) -> str:
        """The name of the file, for messages."""
        return self.tree.file

    @property
    def text(self) -> str:
        """The whole text of the file it was read from."""
        return "\n".join(self.tree.lines)

    def place(self, *path: str | int) -> Place:
        """Where the value at a key path stands; its nearest parent where the file does not spell it out."""
        return self.tree.place(path)

    def error(self, says: Sentence, *path: str | int) -> InputError:
        """An input error about the value at a key path."""
        return InputError(says.what, cure=says.cure, place=self.place(*path), key=".".join(map(str, path)))


def read_document(model: type[M], source: Source, *, file: str = "", what: str = "") -> Document[M]:
    """Read a document of one kind. what: the kind in words, such as `stack file`.

    Raises InputErrors with everything that is wrong in it, FileAccessError where the file cannot be read.
    """
    tree = to_tree(source, file=file)
    return checked(model, tree, tree.plain(), what=what)


def checked(model: type[M], tree: Tree, content: Any, *, what: str = "") -> Document[M]:
    """A document from a tree and its (perhaps overridden) plain content. Raises InputErrors."""
    what = what or title_of(model)
    if not isinstance(tree.root, Block):
        says = wording.no_block(what, keys_of(model), shape_of(content))
        raise InputErrors([InputError(says.what, cure=says.cure, place=tree.place(()))])
    try:
        return Document(model.model_validate(content), tree)
    except ValidationError as error:
        raise InputErrors(wording.in_order(complaints(error, model, tree))) from None


def checked_further(model: type[M], tree: Tree) -> tuple[Document[M] | None, list[InputError]]:
    """A document, healed where it has mistakes, with those mistakes; None where it cannot be healed."""
    content = tree.plain()
    try:
        return checked(model, tree, content), []
    except InputErrors as error:
        errors = list(error.errors)
    try:
        model.model_validate(content)
    except ValidationError as invalid:
        found = healed(invalid, model, content) if isinstance(content, dict) else None
        if found is None:
            return None, errors
        whole, paths = found
        try:
            return Document(model.model_validate(whole), tree, paths), errors
        except ValidationError as still:
            return None, errors + [e for e in complaints(still, model, tree) if not _below(e, paths)]
    return None, errors


def _below(error: InputError, paths: tuple[KeyPath, ...]) -> bool:
    return any(f"{error.key}.".startswith(".".join(map(str, path)) + ".") for path in paths)


def to_tree(source: Source, *, file: str = "") -> Tree:
    """The tree of a source. Raises InputErrors, FileAccessError."""
    if isinstance(source, Tree):
        return source
    if isinstance(source, Path):
        return read_tree(read_bytes(source, file=file), file or str(source))
    return read_tree(source, file or "<text>")


def part(tree: Tree, path: KeyPath) -> Tree:
    """A block inside a file as a tree of its own, with the same places."""
    return Tree(tree.node(path), tree.file, tree.lines)


def read_bytes(path: Path, *, file: str = "") -> bytes:
    """The bytes of a file. Raises FileAccessError."""
    try:
        with path.open("rb") as stream:
            return stream.read(MOST_BYTES + 1)
    except FileNotFoundError:
        says = wording.no_such_file(path.name, _neighbours(path))
    except IsADirectoryError:
        says = wording.IS_A_FOLDER
    except (OSError, ValueError) as error:  # a ValueError is a NUL in the name
        says = wording.cannot_open(getattr(error, "strerror", None) or str(error))
    raise FileAccessError(says.what, cure=says.cure, place=Place(file or str(path)))


def _neighbours(path: Path) -> list[str]:
    try:
        return [entry.name for entry in path.parent.iterdir()]
    except OSError:
        return []
