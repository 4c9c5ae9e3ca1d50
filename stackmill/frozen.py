"""Frozen dataclasses that cost next to nothing to define.

`dataclasses.dataclass` writes and compiles source text for each class, about 0.4 ms of a cold start a class; with
a hundred of them that is a tenth of a forecast. `frozen` gives the same thing (fields, defaults, repr, equality,
hash, no assignment) from methods written once, which are slower to call: classes made by the thousand keep to
`dataclass(frozen=True, slots=True)`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import MISSING, Field, FrozenInstanceError, dataclass, field, fields
from typing import Any, TypeVar, dataclass_transform

_Class = TypeVar("_Class", bound=type)


@dataclass_transform(frozen_default=True, field_specifiers=(field,))
def frozen(cls: _Class) -> _Class:
    """Make a class of annotated fields a frozen dataclass."""
    dataclass(init=False, repr=False, eq=False)(cls)
    every = fields(cls)
    compared = tuple(f.name for f in every if f.compare)

    def key(self: Any) -> tuple[Any, ...]:
        return tuple(getattr(self, name) for name in compared)

    def equal(self: Any, other: object) -> bool:
        return key(self) == key(other) if other.__class__ is self.__class__ else NotImplemented

    methods: dict[str, Callable[..., Any]] = {
        "__init__": _init(cls.__qualname__, every),
        "__repr__": lambda self: f"{cls.__qualname__}({', '.join(_shown(self, every))})",
        "__eq__": equal,
        "__hash__": lambda self: hash(key(self)),
        "__setattr__": _refuse,
        "__delattr__": _refuse,
    }
    for name, method in methods.items():
        setattr(cls, name, method)
    return cls


def _init(owner: str, every: tuple[Field[Any], ...]) -> Callable[..., None]:
    names = tuple(f.name for f in every)
    known = frozenset(names)
    makers = {f.name: f.default_factory for f in every if f.default_factory is not MISSING}
    optional = frozenset(makers) | {f.name for f in every if f.default is not MISSING}

    def set_fields(self: Any, *args: Any, **given: Any) -> None:
        if len(args) > len(names):
            raise TypeError(f"{owner} takes {len(names)} values, not {len(args)}")
        twice = given.keys() & set(names[: len(args)])
        unknown = given.keys() - known
        given.update(zip(names, args, strict=False))
        missing = known - given.keys() - optional
        if twice or unknown or missing:
            wrong = ("twice: ", twice) if twice else ("unknown: ", unknown) if unknown else ("missing: ", missing)
            raise TypeError(f"{owner}: {wrong[0]}{', '.join(sorted(wrong[1]))}")
        for name, make in makers.items():
            if name not in given:
                given[name] = make()
        # A default lives on the class; setting only what was given keeps instances small.
        self.__dict__.update(given)

    return set_fields


def _shown(instance: Any, every: tuple[Field[Any], ...]) -> list[str]:
    return [f"{f.name}={getattr(instance, f.name)!r}" for f in every if f.repr]


def _refuse(_instance: Any, name: str, _value: Any = None) -> None:
    raise FrozenInstanceError(f"cannot assign to field {name!r}")
