"""The files of a job, found and read: every path it binds, every block written in place, every override."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel

from stackmill.documents import wording
from stackmill.documents.calibration import CalibrationFile
from stackmill.documents.job import JobFile
from stackmill.documents.marks import Block, Items, Node, Scalar, Tree, read_tree
from stackmill.documents.material import MaterialsFile
from stackmill.documents.mill import DEFAULT_MILL, Mill
from stackmill.documents.overriding import Override
from stackmill.documents.profile import with_map
from stackmill.documents.reading import Document, checked_further, read_bytes
from stackmill.documents.recipe import Recipe
from stackmill.documents.stack import Stack
from stackmill.errors import FileAccessError, InputError, InputErrors, Place
from stackmill.frozen import frozen

_KINDS = {
    "layers": "stack",
    "steps": "recipe",
    "coupons": "calibration",
    "gas": "mill",
    "materials": "materials",
    "stack": "job",
}
_TELLING = {kind: key for key, kind in _KINDS.items()}
_BOUND = ("stack", "mill", "recipe", "calibration")
M = TypeVar("M", bound=BaseModel)


@frozen
class JobDocuments:
    """The documents of a job. `job` is the job file, or what stands in for it where FILE is a lone stack.

    errors: what is wrong in them so far; such documents are only good for finding more.
    """

    job: Document[JobFile]
    stack: Document[Stack]
    mill: Document[Mill]
    recipe: Document[Recipe]
    materials: tuple[Document[MaterialsFile], ...] = ()
    calibration: Document[CalibrationFile] | None = None
    is_default_mill: bool = False
    errors: tuple[InputError, ...] = ()

    def contents(self) -> dict[str, object]:
        """All that the files say, as plain texts, without comments, paths and layout."""
        job = {k: v for k, v in self.job.tree.plain().items() if k not in (*_BOUND, "materials")}
        grid = self.mill.model.profile and self.mill.model.profile.grid
        beam_map: dict[str, object] = {"beam map": [grid.x_nm, grid.y_nm, grid.relative]} if grid else {}
        calibration: dict[str, object] = {"calibration": self.calibration.tree.plain()} if self.calibration else {}
        return (
            beam_map
            | calibration
            | {
                "job": job,
                "stack": self.stack.tree.plain(),
                "mill": self.mill.tree.plain(),
                "recipe": self.recipe.tree.plain(),
                "materials": [document.tree.plain() for document in self.materials],
            }
        )


def read_source(source: str | Path) -> tuple[Tree, Path]:
    """The tree of FILE, and the folder that its paths count from.

    `-` is standard input, and what has several lines is the text itself. Raises FileAccessError, InputErrors.
    """
    if isinstance(source, str) and "\n" in source:
        return read_tree(source, "<text>"), Path()
    if str(source) == "-":
        return read_tree(sys.stdin.buffer.read(), "<stdin>"), Path()
    path = Path(source)
    return read_tree(read_bytes(path), str(path)), path.parent


def kind_of(tree: Tree) -> str | None:
    """Which kind of file a tree is, by the key that only that kind has, or one like it; else None."""
    keys = tree.root.values if isinstance(tree.root, Block) else {}
    order = ("stack", "layers", "steps", "coupons", "gas", "materials")
    near = [wording.nearest(key, order) for key in keys]
    return next((_KINDS[key] for known in (keys, near) for key in order if key in known), None)


@dataclass
class FileReader:
    """Reads the files of a job, collecting every error of every one of them."""

    tree: Tree
    folder: Path
    overrides: Sequence[Override] = ()
    errors: list[InputError] = field(default_factory=list)
    used: set[Override] = field(default_factory=set)
    trees: list[Tree] = field(default_factory=list)

    def read(self) -> JobDocuments | None:
        """All documents, with what is wrong in them; None where one is too broken to go on."""
        self._override(self.tree, "")
        job = self._checked(JobFile, self.tree)
        stack = self._bound(Stack, "stack")
        is_default_mill = not self.tree.has(("mill",))
        mill = self._with_map(self._mill_or_default() if is_default_mill else self._bound(Mill, "mill"))
        recipe = self._bound(Recipe, "recipe")
        materials = [self._one(MaterialsFile, "materials", node) for node in self._material_nodes()]
        calibration = self._bound(CalibrationFile, "calibration")
        self._refuse_unused()
        if job is None or stack is None or mill is None or recipe is None or None in materials:
            return None
        if calibration is None and self.tree.has(("calibration",)):
            return None
        found = tuple(document for document in materials if document is not None)
        return JobDocuments(job, stack, mill, recipe, found, calibration, is_default_mill, tuple(self.errors))

    def _mill_or_default(self) -> Document[Mill] | None:
        tree = read_tree(DEFAULT_MILL, "default mill")
        self._override(tree, "mill")
        return self._checked(Mill, tree)

    def _with_map(self, mill: Document[Mill] | None) -> Document[Mill] | None:
        if mill is None or mill.model.profile is None:
            return mill
        node = self.tree.node(("mill",))
        # Paths count from the folder of the file they stand in.
        own = self.folder / Path(node.text).expanduser().parent if isinstance(node, Scalar) else self.folder
        mill, errors = with_map(mill, own)
        self.errors += errors
        return mill

    def _material_nodes(self) -> list[Node]:
        if not self.tree.has(("materials",)):
            return []
        node = self.tree.node(("materials",))
        return node.values if isinstance(node, Items) else [node]

    def _bound(self, model: type[M], key: str) -> Document[M] | None:
        if not self.tree.has((key,)):
            return None  # the job file's own complaint
        return self._one(model, key, self.tree.node((key,)))

    def _one(self, model: type[M], kind: str, node: Node) -> Document[M] | None:
        place = (node.source or self.tree).place_of(node)
        if isinstance(node, Block):
            home = node.source or self.tree
            return self._checked(model, Tree(node, home.file, home.lines))
        if not isinstance(node, Scalar) or not node.text.strip():
            return None  # likewise
        try:
            tree = self._file(node.text, kind, place)
        except InputErrors as error:
            self.errors.append(error)
            return None
        if tree is None:
            return None
        self._override(tree, kind)
        return self._checked(model, tree)

    def _file(self, name: str, kind: str, place: Place) -> Tree | None:
        path = self.folder / Path(name).expanduser()
        try:
            own = Path(self.tree.file)
            if own.is_file() and path.is_file() and path.samefile(own):
                self._complain(wording.binds_back(name), place)
                return None
            tree = read_tree(read_bytes(path), str(path))
        except FileAccessError as error:
            self._complain(wording.cannot_bind(name, error.what, error.cure), place)
            return None
        except (OSError, ValueError, RuntimeError):
            self._complain(wording.cannot_bind(name, wording.NO_SUCH_FILE, ""), place)
            return None
        found = kind_of(tree)
        if found not in (None, kind) and not tree.has((_TELLING[kind],)):
            self._complain(wording.wrong_kind(name, str(found), kind), place)
            return None
        return tree

    def _checked(self, model: type[M], tree: Tree) -> Document[M] | None:
        self.trees.append(tree)
        document, errors = checked_further(model, tree)
        self.errors += errors
        return document

    def _override(self, tree: Tree, kind: str) -> None:
        """Apply the overrides that belong to this tree: below `kind`, or the job's own."""
        for override in self.overrides:
            keys = override.keys
            mine = keys[1:] if kind and keys[0] == kind else keys
            if kind and keys[0] != kind:
                continue
            bound = self.tree.root.values.get(keys[0]) if isinstance(self.tree.root, Block) else None
            elsewhere = keys[0] in _BOUND and len(keys) > 1 and not isinstance(bound, Block)
            if not kind and elsewhere:
                continue
            self.used.add(override)
            try:
                override.apply(tree, mine)
            except InputError as error:
                self.errors.append(error)

    def _refuse_unused(self) -> None:
        for override in self.overrides:
            if override not in self.used and not self.errors:
                *before, last = override.keys
                self._complain(wording.leads_nowhere(".".join(before), last), Place(override.label))

    def _complain(self, says: wording.Sentence, place: Place) -> None:
        self.errors.append(InputError(says.what, cure=says.cure, place=place))
