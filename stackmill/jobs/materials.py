"""The materials a job names, found in the library and in the lab's own files."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from stackmill.documents import wording
from stackmill.documents.marks import Block, Items, KeyPath, Node, Scalar, Tree
from stackmill.documents.reading import Document
from stackmill.documents.recipe import OTHER, Cover, Process, Recipe, Strip
from stackmill.documents.stack import NO_FILL, Film, Stack
from stackmill.errors import InputError
from stackmill.jobs.files import JobDocuments

if TYPE_CHECKING:
    from stackmill.documents.material import LabMaterial
    from stackmill.materials.library import Library
    from stackmill.materials.material import Material


@dataclass
class Found:
    """The materials of a job by their own names. aliases: other names used, and whose they are."""

    library: Library | None = None
    materials: dict[str, Material] = field(default_factory=dict)
    aliases: dict[str, str] = field(default_factory=dict)
    errors: list[InputError] = field(default_factory=list)

    def own(self, name: str) -> str:
        """The material's own name for a name that may be an alias."""
        return self.aliases.get(name, name)

    def own_film(self, film: Film) -> Film:
        """A film with its material under its own name."""
        return film.model_copy(update={"material": self.own(film.material)})


def find_materials(documents: JobDocuments) -> Found:
    """Look up every material that stack and recipe name."""
    found = Found()
    found.library = _library(documents, found.errors)
    if found.library is None:
        return found
    unknown: set[tuple[str, str]] = set()
    for document, name, path in _named(documents):
        if name in found.materials or name in found.aliases or (document.file, name) in unknown:
            continue
        if name not in found.library:
            unknown.add((document.file, name))
            says = wording.unknown_material(name, found.library.near(name))
            found.errors.append(document.error(says, *path))
            continue
        material = found.library.get(name)
        found.materials[material.name] = material
        if material.name != name:
            found.aliases[name] = material.name
    return found


def with_told(known: Mapping[str, Material], library: Library) -> dict[str, Material]:
    """Some materials by name, then those that one of them is a multiple or a mixture of, and so on."""
    every = dict(known)
    ask = list(every.values())
    while ask:
        material = ask.pop()
        told = [material.follows] if material.follows else [part.material.name for part in material.mixture]
        for name in told:
            if name not in every:
                every[name] = library.get(name)
                ask.append(every[name])
    return every


def unknown_materials(trees: Iterable[Tree]) -> list[InputError]:
    """Complaints about unknown materials in files that are too broken to be read as a whole."""
    from stackmill.materials.library import Library

    library, errors = Library.load(), []
    for tree in trees:
        if tree.has(("materials",)):
            return []  # a lab's own materials may be among them
        seen = {OTHER, NO_FILL}
        for scalar in _scalars(tree.root, ""):
            if scalar.text and scalar.text not in seen and scalar.text not in library:
                says = wording.unknown_material(scalar.text, library.near(scalar.text))
                errors.append(InputError(says.what, cure=says.cure, place=tree.place_of(scalar), key=scalar.text))
            seen.add(scalar.text)
    return errors


def _scalars(node: Node, key: str) -> Iterator[Scalar]:
    """The texts under the keys that name materials."""
    if isinstance(node, Scalar) and key in ("material", "with", "strips"):
        yield node
    elif isinstance(node, Block):
        if key == "rates":
            yield from node.keys.values()
        for inner, value in node.values.items():
            if value.source is None:  # what comes from another tree has its own turn
                yield from _scalars(value, inner)
    elif isinstance(node, Items):
        for value in node.values:
            yield from _scalars(value, key)


def _library(documents: JobDocuments, errors: list[InputError]) -> Library | None:
    """The library with the lab's own materials over it; None, and an error, where they do not fit."""
    from stackmill.materials.library import Library

    labs = [(document, k) for document in documents.materials for k in range(len(document.model.materials))]
    entries = [document.model.materials[k] for document, k in labs]
    try:
        return Library.load(entries)
    except InputError as error:
        misfit = _first_misfit(entries)
        document, k = labs[misfit]
        key = "like" if entries[misfit].like is not None else "name"
        place = document.place("materials", k, key)
        errors.append(InputError(error.what, cure=error.cure, place=place, key=error.key))
        return None


def _first_misfit(entries: Sequence[LabMaterial]) -> int:
    """Which of a lab's materials the library refuses."""
    from stackmill.materials.library import Library

    for last in range(len(entries)):
        try:
            Library.load(entries[: last + 1])
        except InputError:
            return last
    return len(entries) - 1


def _named(documents: JobDocuments) -> Iterator[tuple[Document[Any], str, KeyPath]]:
    """Every place that names a material: the document, the name, the key path."""
    for name, path in in_stack(documents.stack.model):
        yield documents.stack, name, path
    for name, path in _in_recipe(documents.recipe.model):
        yield documents.recipe, name, path
    if documents.calibration is not None:
        for k, coupon in enumerate(documents.calibration.model.coupons):
            yield documents.calibration, coupon.material, ("coupons", k, "material")


def in_stack(stack: Stack) -> Iterator[tuple[str, KeyPath]]:
    """Every material of a stack and where it is named."""
    for k, layer in enumerate(stack.layers):
        if layer.material != NO_FILL:
            yield layer.material, ("layers", k, "material")
        for n, feature in enumerate(layer.features):
            at: KeyPath = ("layers", k, "features", n)
            yield feature.material, (*at, "material")
            for m, film in enumerate(feature.liner):
                yield film.material, (*at, "liner", m, "material")
            for key, film_or_none in (("cap", feature.cap), ("base", feature.base)):
                if film_or_none is not None:
                    yield film_or_none.material, (*at, key, "material")


def _in_recipe(recipe: Recipe) -> Iterator[tuple[str, KeyPath]]:
    for k, step in enumerate(recipe.steps):
        if isinstance(step, Cover):
            yield step.with_, ("steps", k, "with")
        elif isinstance(step, Strip):
            yield from ((name, ("steps", k, "strips", n)) for n, name in enumerate(step.strips))
        elif isinstance(step, Process):
            yield from ((name, ("steps", k, "rates", name)) for name in step.rates if name != OTHER)
