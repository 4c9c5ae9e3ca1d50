"""A document with mistakes made whole enough to be checked further, so that all complaints come at once.

A value that cannot be read is replaced by its key's example, an unknown key is left out. What is said later
about a replaced value is not the engineer's fault and is dropped; the document itself is never used.
"""

from __future__ import annotations

import copy
from typing import Any

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from stackmill.documents.complaints import choices_of, in_file, model_at
from stackmill.documents.marks import KeyPath
from stackmill.units import UnitsError

# Names are not invented: what points to them could not be told right from wrong.
_NAMES = (
    "name",
    "material",
    "layer",
    "layers",
    "steps",
    "stack",
    "recipe",
    "cover",
    "uncover",
    "with",
    "strips",
)


def healed(error: ValidationError, model: type[BaseModel], content: Any) -> tuple[Any, tuple[KeyPath, ...]] | None:
    """The content with every mistake replaced, and where; None where one cannot be."""
    whole = copy.deepcopy(content)
    paths = []
    for item in error.errors(include_url=False):
        path = in_file(item["loc"])
        if not path:
            return None
        value = _replacement(item, model_at(model, item["loc"][:-1]))
        holder = _holder(whole, path)
        if holder is None or value is None:
            return None
        if item["type"] == "extra_forbidden":
            del holder[path[-1]]
        else:
            holder[path[-1]] = value
        paths.append(path)
    return whole, tuple(paths)


def _replacement(item: ErrorDetails, owner: type[BaseModel]) -> Any:
    """A value that can be read, for one that cannot; None where there is none."""
    if item["type"] == "extra_forbidden":
        return ""
    key = str(item["loc"][-1])
    found = next((f for name, f in owner.model_fields.items() if key in (name, f.alias)), None)
    if found is None or key in _NAMES:
        return None
    if item["type"] == "literal_error":
        return next(iter(choices_of(found.annotation)), None)
    unreadable = isinstance(item.get("ctx", {}).get("error"), UnitsError)
    return found.examples[0] if found.examples and (unreadable or item["type"] == "missing") else None


def _holder(content: Any, path: KeyPath) -> Any:
    """The group of keys that holds the last key of a path; None where it holds no key."""
    for step in path[:-1]:
        if isinstance(content, list) and isinstance(step, int) and step < len(content):
            content = content[step]
        elif isinstance(content, dict) and isinstance(step, str):
            content = content.get(step)
    return content if isinstance(content, dict) and path and isinstance(path[-1], str) else None
