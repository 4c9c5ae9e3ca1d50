"""From what pydantic found wrong to what we say about it: our own sentences, with the place in the file."""

from __future__ import annotations

import re
import typing
from collections.abc import Iterable, Iterator
from typing import Any

from pydantic import BaseModel, ValidationError

from stackmill.documents import wording
from stackmill.documents.marks import Block, KeyPath, Scalar, Tree
from stackmill.documents.wording import Refusal, Refusals, Sentence
from stackmill.errors import InputError
from stackmill.units import UnitsError, quoted

_SHAPES = {
    "string_type": "a text",
    "tuple_type": "a list",
    "list_type": "a list",
    "dict_type": "a group of keys",
    "model_type": "a group of keys",
    "model_attributes_type": "a group of keys",
}


def complaints(error: ValidationError, model: type[BaseModel], tree: Tree) -> list[InputError]:
    """Every error of a model, as input errors with their places in the tree."""
    found = error.errors(include_url=False)
    meant = {(*path[:-1], near) for path, near in _misspelled(found, model)}
    errors = []
    for item in found:
        path = in_file(item["loc"])
        if item["type"] == "missing" and path in meant:
            continue  # the unknown key beside it says what was meant
        errors += [_input_error(tree, says, at, item["type"]) for says, at in _sentences(item, model, tree)]
    return errors


def _input_error(tree: Tree, says: Sentence, path: KeyPath, kind: str) -> InputError:
    place = tree.key_place(path) if kind == "extra_forbidden" else tree.place(path)
    return InputError(says.what, cure=says.cure, place=place, key=".".join(map(str, path)))


def in_file(loc: Iterable[str | int]) -> KeyPath:
    """A pydantic location without the names of union members, which stand in <>."""
    return tuple(step for step in loc if not str(step).startswith("<"))


def _misspelled(found: Iterable[Any], model: type[BaseModel]) -> Iterator[tuple[KeyPath, str]]:
    for item in found:
        if item["type"] == "extra_forbidden":
            near = wording.nearest(str(item["loc"][-1]), keys_of(model_at(model, item["loc"][:-1])))
            if near:
                yield in_file(item["loc"]), near


def _sentences(item: Any, model: type[BaseModel], tree: Tree) -> Iterator[tuple[Sentence, KeyPath]]:
    path, kind = in_file(item["loc"]), item["type"]
    key = next((str(step) for step in reversed(path) if isinstance(step, str)), "this")
    cause = item.get("ctx", {}).get("error")
    if isinstance(cause, Refusal | Refusals):
        refusals = cause.refusals if isinstance(cause, Refusals) else (cause,)
        yield from ((refusal.says, path + refusal.path) for refusal in refusals)
    elif kind == "missing":
        owner = model_at(model, item["loc"][:-1])
        example = example_of(owner, key)
        yield wording.missing_key(key, _owner(owner, tree, path[:-1]), example), path[:-1]
    elif kind == "extra_forbidden":
        owner = model_at(model, item["loc"][:-1])
        yield wording.unknown_key(key, _owner(owner, tree, path[:-1]), keys_of(owner)), path
    elif item["input"] is None:
        yield wording.empty(key), path
    elif isinstance(cause, UnitsError):
        yield Sentence(cause.what, cause.cure), path
    elif kind == "literal_error":
        choices = choices_of(_annotation(model_at(model, item["loc"][:-1]), key))
        yield wording.not_a_choice(key.replace("_", " "), str(item["input"]), choices), path
    elif kind == "no_kind":
        yield Sentence(item["msg"], item["ctx"]["cure"]), path
    elif kind == "too_short":
        yield wording.nothing_in(key), path
    elif kind in _SHAPES:
        example = example_of(model_at(model, item["loc"][:-1]), key)
        yield wording.wrong_shape(key, _SHAPES[kind], shape_of(item["input"]), example), path
    else:
        yield Sentence(f"{key} cannot be {shape_of(item['input'])} like this", item["msg"].lower()), path


def shape_of(value: Any) -> str:
    """What kind of thing a value from a file is, in words."""
    if isinstance(value, dict):
        return "a group of keys"
    if isinstance(value, list | tuple):
        return "a list"
    return "a text" if value else "nothing"


def _owner(model: type[BaseModel], tree: Tree, path: KeyPath) -> str:
    """`layer 'metal 2'`, or `this layer` where it has no name."""
    what = title_of(model)
    node = tree.node(path)
    name = node.values.get("name") if isinstance(node, Block) and tree.has(path) else None
    return f"{what} {quoted(name.text)}" if isinstance(name, Scalar) and name.text else f"this {what}"


def title_of(model: type[BaseModel]) -> str:
    """What a model's block is called: `layer`, `stack file`; by its class's name where it does not say."""
    words = re.sub(r"(?<=[a-z])(?=[A-Z])", " ", model.__name__).lower()
    return str(getattr(model, "what", words))


def keys_of(model: type[BaseModel]) -> list[str]:
    """The keys a model's block can have in a file, in their order."""
    return [field.alias or name for name, field in model.model_fields.items()]


def example_of(model: type[BaseModel], key: str) -> str:
    """A line that gives this key a value, or nothing."""
    for name, field in model.model_fields.items():
        if key in (name, field.alias) and field.examples:
            return f"{key}: {field.examples[0]}"
    return ""


def choices_of(annotation: Any) -> list[str]:
    """The words that a Literal allows, wherever it stands in an annotation."""
    if typing.get_origin(annotation) is typing.Literal:
        return [str(choice) for choice in typing.get_args(annotation)]
    return [choice for inner in typing.get_args(annotation) for choice in choices_of(inner)]


def _annotation(model: type[BaseModel], key: str) -> Any:
    for name, field in model.model_fields.items():
        if key in (name, field.alias):
            return field.annotation
    return None


def model_at(model: type[BaseModel], loc: Iterable[str | int]) -> type[BaseModel]:
    """The model of the block at a pydantic location."""
    candidates: list[type[BaseModel]] = [model]
    for step in loc:
        if isinstance(step, int):
            continue
        if step.startswith("<"):
            candidates = [m for m in candidates if f"<{getattr(m, 'kind', '')}>" == step] or candidates
            continue
        inner = [m for c in candidates for m in _models_in(_annotation(c, step))]
        candidates = inner or candidates
    return candidates[0]


def _models_in(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for inner in typing.get_args(annotation):
        yield from _models_in(inner)
