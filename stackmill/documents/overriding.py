"""Single values of a file replaced from the command line, as if they stood in the file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from stackmill.documents import wording
from stackmill.documents.marks import Block, Items, Node, Scalar, Tree, read_tree
from stackmill.errors import InputError, Place, UsageError
from stackmill.frozen import frozen


@frozen
class Override:
    """A value for a key path of the job, from `--set` or another option. label: the option, for messages."""

    keys: tuple[str, ...]
    text: str
    label: str

    def apply(self, tree: Tree, keys: Sequence[str]) -> None:
        """Put the value into a tree at the part of the path that lies in it. Raises InputError."""
        replace_value(tree, keys, value_node(self.text, self.label), self.label)


def overrides(settings: Sequence[str]) -> dict[str, str]:
    """`KEY=VALUE` texts as a mapping. Raises UsageError."""
    values: dict[str, str] = {}
    for setting in settings:
        key, equals, value = setting.partition("=")
        if not equals or not key.strip() or not value.strip():
            raise UsageError(f"--set {setting} is not of the form KEY=VALUE", cure=wording.SET_EXAMPLE)
        if key.strip() in values:
            raise UsageError(f"--set {key.strip()} is given twice", cure="keep one of them")
        values[key.strip()] = value.strip()
    return values


def value_node(text: str, label: str) -> Node:
    """A value from the command line: plain text, or a list or group in brackets. Raises InputErrors."""
    if text[:1] not in "[{" or not text:
        return Scalar(1, 1, text, source=Tree(Scalar(1, 1, text), label, ()))
    tree = read_tree(text, label)
    tree.root.source = tree
    return tree.root


def replace_value(tree: Tree, keys: Sequence[str], value: Node, label: str) -> None:
    """Put a value at a key path of a tree. List items are named by their place, from 1, or their name.

    Raises InputError where the path leads nowhere.
    """
    node = tree.root
    for k, key in enumerate(keys):
        last = k == len(keys) - 1
        if isinstance(node, Block):
            if last:
                node.values[key] = value
                node.keys[key] = Scalar(1, 1, key, source=value.source)
                return
            inner = node.values.get(key)
            if inner is None:
                inner = node.values[key] = Block(1, 1, source=value.source)
                node.keys[key] = Scalar(1, 1, key, source=value.source)
            node = inner
        elif isinstance(node, Items):
            index = _index(node, key, label)
            if last:
                node.values[index] = value
                return
            node = node.values[index]
        else:
            says = wording.leads_nowhere(".".join(keys[:k]), key)
            raise InputError(says.what, cure=says.cure, place=Place(label))


def _index(items: Items, key: str, label: str) -> int:
    if key.isascii() and key.isdigit() and 1 <= int(key) <= len(items.values):
        return int(key) - 1
    names = [_name_of(item) for item in items.values]
    if key in names:
        return names.index(key)
    says = wording.no_such_item(key, len(names), [name for name in names if name])
    raise InputError(says.what, cure=says.cure, place=Place(label))


def _name_of(node: Node) -> str:
    name = node.values.get("name") if isinstance(node, Block) else None
    return name.text if isinstance(name, Scalar) else ""


def assembled(parts: Mapping[str, Tree], file: str) -> Tree:
    """A tree whose keys are the roots of other trees, each keeping its own places."""
    block = Block(1, 1)
    for key, tree in parts.items():
        tree.root.source = tree
        block.values[key], block.keys[key] = tree.root, Scalar(1, 1, key, source=tree)
    return Tree(block, file, ())
