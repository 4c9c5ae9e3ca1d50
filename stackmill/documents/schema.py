"""JSON Schemas (2020-12) of the files as people write them: texts with units, short forms, one item or a list.

A schema helps an editor to complete keys and mark slips while typing. It says less than `stackmill check`, which
knows limits, names and what belongs together.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from typing import Any, Literal

from pydantic import BaseModel
from pydantic.json_schema import GenerateJsonSchema, JsonSchemaMode, JsonSchemaValue
from pydantic_core import core_schema

from stackmill.documents import recipe
from stackmill.documents.calibration import CalibrationFile
from stackmill.documents.fields import one_or_more
from stackmill.documents.job import JobFile
from stackmill.documents.material import MaterialsFile
from stackmill.documents.mill import Mill
from stackmill.documents.recipe import Recipe
from stackmill.documents.stack import Stack

Schema = dict[str, Any]
FileKind = Literal["stack", "mill", "recipe", "job", "materials", "calibration"]

DIALECT = "https://json-schema.org/draft/2020-12/schema"
_MODELS: Mapping[str, type[BaseModel]] = {
    "stack": Stack,
    "mill": Mill,
    "recipe": Recipe,
    "job": JobFile,
    "materials": MaterialsFile,
    "calibration": CalibrationFile,
}

_NUMBER = r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?"
_UNIT = r"[A-Za-zµμÅ\u212b°%][^\s,±]*"
_PLUS_MINUS = r"(±|\+/-|\+-)"
_SD = rf"{_PLUS_MINUS}\s*{_NUMBER}\s*{_UNIT}\s*"
# Of the unit only that there is one: any unit of the right kind is taken, and their list has no end.
_PATTERNS = {
    "exact": rf"^\s*({_NUMBER}\s*{_UNIT}\s*)+$",
    "uncertain": rf"^\s*{_NUMBER}\s*{_UNIT}\s*({_SD})?(,\s*across (the )?die\s*{_SD})?$",
    "plus-minus": rf"^\s*{_SD}$",
}
_WRITTEN_AS = "written as "

_Wrap = Callable[[Schema], Schema]


def _list_or_one(inner: Schema) -> Schema:
    return {"anyOf": [inner["items"], inner]} if "items" in inner else inner


def _or_text(inner: Schema) -> Schema:
    return {"anyOf": [{"type": "string"}, inner]}


# What the checks that run before a model's own allow besides it.
_SHORT_FORMS: Mapping[Any, _Wrap] = {
    one_or_more: _list_or_one,
    recipe._reference: _or_text,
}
_EITHER = {
    "Feature": ("line", "via", "block", "pattern_density"),
    "Layer": ("thickness", "top"),
    "Process": ("for", "to", "seen"),
    "Beam": ("for", "to", "seen"),
    "Profile": ("falls", "gaussian", "map"),
}
_STEPS = ("Cover", "Uncover", "Strip", "Process", "Beam")


class _AsWritten(GenerateJsonSchema):
    """Knows the short forms."""

    def function_before_schema(self, schema: core_schema.BeforeValidatorFunctionSchema) -> JsonSchemaValue:
        inner = super().function_before_schema(schema)
        function = schema["function"]["function"]
        wrap = _SHORT_FORMS.get(getattr(function, "__func__", function))
        return wrap(inner) if wrap else inner

    def tagged_union_schema(self, schema: core_schema.TaggedUnionSchema) -> JsonSchemaValue:
        """Any of the kinds: which one is told by the keys, so there is no key to tell editors of."""
        return {"anyOf": [self.generate_inner(choice) for choice in schema["choices"].values()]}

    def str_schema(self, schema: core_schema.StringSchema) -> JsonSchemaValue:
        """A name may look like a number."""
        return {**super().str_schema(schema), "type": ["string", "number"]}


def json_schema(kind: FileKind) -> Schema:
    """The JSON Schema of one kind of file."""
    mode: JsonSchemaMode = "validation"
    made = _MODELS[kind].model_json_schema(by_alias=True, schema_generator=_AsWritten, mode=mode)
    definitions = made.pop("$defs", {})
    name = _MODELS[kind].__name__
    body = definitions.pop(name, made) if "$ref" in made else made
    if kind == "job":
        _bind_files(body, definitions)
    for title, block in {name: body, **definitions}.items():
        _tidy(title, block)
    if "Goal" in definitions:
        definitions["Goal"] = _or_text(definitions["Goal"])
    definitions |= {title: {"type": "string", "pattern": pattern} for title, pattern in _PATTERNS.items()}
    body, definitions = _lean(body), _lean(definitions)
    return {"$schema": DIALECT, "title": f"stackmill {kind} file", **body, "$defs": definitions}


def _bind_files(body: Schema, definitions: Schema) -> None:
    """A job's files are paths, or what the files would hold."""
    for kind in ("stack", "mill", "recipe", "materials", "calibration"):
        inner = json_schema(kind)
        definitions.update(inner.pop("$defs", {}))
        name = _MODELS[kind].__name__
        definitions[name] = {key: value for key, value in inner.items() if key not in ("$schema", "title")}
        path = {"type": "string", "description": f"path of a {kind} file"}
        either: list[Schema] = [path, {"$ref": f"#/$defs/{name}"}]
        if kind == "materials":
            either.append({"type": "array", "items": {"anyOf": list(either)}})
        body["properties"][kind] = {"anyOf": either}


def _tidy(title: str, block: Schema) -> None:
    """Say what a block's own rules say: keys that exclude each other, names that may be left out."""
    required = set(block.get("required", ()))
    if title in _EITHER and "oneOf" not in block:
        required -= set(_EITHER[title])
        block["oneOf"] = [{"required": [key]} for key in _EITHER[title]]
    if title in _STEPS:
        required -= {"name"}
    if title in ("Goal", "Keep"):
        required -= {"layer"}
        block["anyOf"] = [{"required": ["layer"]}, {"required": ["feature"]}]
    if "required" in block:
        block["required"] = [key for key in block["required"] if key in required]


def _lean(node: Any) -> Any:
    """A schema without titles that say nothing, without nulls, and with a pattern for texts that have a unit."""
    if isinstance(node, list):
        return [_lean(item) for item in node]
    if not isinstance(node, dict):
        return node
    choices = [choice for choice in node.get("anyOf", ()) if choice != {"type": "null"}]
    if len(choices) == 1:
        rest = {key: value for key, value in node.items() if key != "anyOf"}
        return _lean(choices[0] | rest)
    lean = {key: _lean(value) for key, value in node.items() if not _says_nothing(key, value)}
    if choices:
        lean["anyOf"] = _lean(choices)
    if "yes" in lean.get("enum", ()):
        # Editors that read YAML 1.1 take these words for truth values.
        lean["enum"] = [*dict.fromkeys(map(str, lean["enum"])), True, False]
    description = lean.get("description")
    if lean.get("type") == "string" and isinstance(description, str) and _WRITTEN_AS in description:
        example = description.split(_WRITTEN_AS, 1)[1]
        form = "plus-minus" if example.startswith("±") else "uncertain" if "±" in example else "exact"
        lean.setdefault("examples", [example])
        if re.fullmatch(_PATTERNS[form], example):
            lean["$ref"] = f"#/$defs/{form}"
    return lean


def _says_nothing(key: str, value: Any) -> bool:
    if key == "title":
        return isinstance(value, str)
    return key == "default" and not isinstance(value, str | bool)
