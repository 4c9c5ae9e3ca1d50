"""A job: its files bound, its materials found, everything checked against everything else."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping, Sequence
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING

from stackmill.documents import wording
from stackmill.documents.calibration import CalibrationFile, CouponRate
from stackmill.documents.job import Goal, Keep
from stackmill.documents.marks import Block, Items, Scalar, Tree, read_tree
from stackmill.documents.mill import Mill
from stackmill.documents.overriding import Override, assembled, overrides
from stackmill.documents.recipe import DEFAULT_RECIPE, Beam, Cover, Process, Recipe, Strip
from stackmill.documents.stack import NO_FILL, Stack
from stackmill.errors import InputError, InputErrors, UsageError
from stackmill.frozen import frozen
from stackmill.jobs.files import FileReader, JobDocuments, kind_of, read_source
from stackmill.jobs.materials import Found, find_materials, unknown_materials, with_told
from stackmill.units import quoted

if TYPE_CHECKING:
    from stackmill.columns.columns import ColumnMap
    from stackmill.materials.library import Library
    from stackmill.materials.material import Material

__all__ = ["Job", "bare_job", "load_job", "overrides"]

_LONE_STACK_KEYS = ("layers", "cell", "regions")
_RECIPE_STEP = ("recipe", "steps", "1")
# The options that say how a lone stack is milled: what each sets, and what to use for a job instead.
_OPTIONS: Mapping[str, tuple[str, ...]] = {
    "goal": ("goal",),
    "energy": (*_RECIPE_STEP, "energy"),
    "incidence": (*_RECIPE_STEP, "incidence"),
    "motion": (*_RECIPE_STEP, "motion"),
    "current_density": ("mill", "current_density"),
}


@frozen
class Job:
    """Everything a forecast needs, checked.

    stack, mill, recipe: with the materials' own names where the files use aliases; materials: every material
    that stack and recipe name; column_map: what lies under each point; documents: the files, for places in
    messages; inputs_sha256: of all they say; is_default_mill: no mill was given; notes: for the reader;
    beam_share (regions,): the beam's current density in each region, as a share of the mill's; calibration: what
    coupons said of this mill on this day.
    """

    title: str
    stack: Stack
    mill: Mill
    recipe: Recipe
    goal: Goal | None
    keeps: tuple[Keep, ...]
    confidence: float
    materials: Mapping[str, Material]
    library: Library
    column_map: ColumnMap
    documents: JobDocuments
    inputs_sha256: str
    is_default_mill: bool = False
    notes: tuple[str, ...] = ()
    beam_share: tuple[float, ...] = ()
    calibration: CalibrationFile | None = None

    @cached_property
    def milled_materials(self) -> Mapping[str, Material]:
        """The materials of the columns, in the column map's order."""
        return {name: self.materials[name] for name in self.column_map.materials}

    @cached_property
    def rated_materials(self) -> Mapping[str, Material]:
        """The milled materials and those of coupons, then those that one is a multiple or a mixture of, and so on."""
        rated = dict(self.milled_materials)
        for coupon in self.coupons:
            rated.setdefault(coupon.material, self.materials[coupon.material])
        return with_told(rated, self.library)

    @property
    def coupons(self) -> tuple[CouponRate, ...]:
        """The coupons of the calibration, if there is one."""
        return self.calibration.coupons if self.calibration else ()

    def feature_index(self, layer: str, feature: str) -> int:
        """The number in the column map's table of a feature that is in a layer. Raises KeyError without one."""
        return self._feature_numbers[layer, feature]

    @cached_property
    def _feature_numbers(self) -> Mapping[tuple[str, str], int]:
        numbers: dict[tuple[str, str], int] = {}
        for n, (k, name) in enumerate(self.column_map.features):
            layer = self.stack.layers[k]
            feature = next(one for one in layer.features if one.name == name)
            numbers |= dict.fromkeys(((passed, name) for passed in (layer.name, *feature.through)), n)
        return numbers

    def step_error(self, step: int, *, passed: bool) -> InputError:
        """The error of a `to` or `seen` step whose level lies behind it (passed) or is never reached."""
        what = self.recipe.steps[step]
        assert isinstance(what, Beam | Process)
        key, target = ("to", what.to) if what.to is not None else ("seen", what.seen)
        assert target is not None
        name = target.layer if target.feature is None else f"{target.layer} / {target.feature}"
        says = wording.already_passed if passed else wording.never_reached
        return self.documents.recipe.error(says(what.name, quoted(name)), "steps", step, key)


def load_job(
    source: str | Path,
    *,
    overrides: Mapping[str, str] | None = None,
    goal: str | None = None,
    energy: str | None = None,
    incidence: str | None = None,
    current_density: str | None = None,
    motion: str | None = None,
    confidence: str | None = None,
    calibration: str | Path | None = None,
) -> Job:
    """Read a job, or a lone stack with the default mill and a one-step recipe.

    source: a path, `-` for standard input, or the text itself. overrides: as of `--set`. goal to motion: for
    a lone stack only; calibration: a file that stands in for the job's. Raises InputErrors with every complaint
    about every file, FileAccessError, UsageError.
    """
    options = {
        "goal": goal,
        "energy": energy,
        "incidence": incidence,
        "current_density": current_density,
        "motion": motion,
    }
    tree, folder = read_source(source)
    changes = [
        Override(tuple(k.strip() for k in key.split(".")), text, f"--set {key}")
        for key, text in (overrides or {}).items()
    ]
    if confidence is not None:
        changes.append(Override(("confidence",), confidence, "--confidence"))
    if calibration is not None:
        changes.append(Override(("calibration",), str(Path(calibration).absolute()), "--calibration"))
    if kind_of(tree) == "stack":
        tree, changes = _around_stack(tree, changes, options)
    else:
        _refuse_options(options)
        _refuse_other_kind(tree)
    return _job(FileReader(tree, folder, changes))


def bare_job(
    materials: Sequence[str],
    *,
    gas: str | None = None,
    energy: str | None = None,
    incidence: str | None = None,
    current_density: str | None = None,
    motion: str | None = None,
) -> Job:
    """A job without a die, for the milling rates of some materials: one layer of 100 nm each.

    Raises InputErrors.
    """
    layers = [{"name": f"layer {k + 1}", "material": name, "thickness": "100 nm"} for k, name in enumerate(materials)]
    made = read_tree(json.dumps({"title": "named materials", "layers": layers}, ensure_ascii=False), "--material")
    stack = Tree(made.root, made.file, ())  # nobody wrote these lines: none to show
    options = {
        "energy": energy,
        "incidence": incidence,
        "current_density": current_density,
        "motion": motion,
    }
    changes = [Override(("mill", "gas"), gas, "--gas")] if gas is not None else []
    tree, changes = _around_stack(stack, changes, options)
    return _job(FileReader(tree, Path(), changes))


def _around_stack(
    stack: Tree, changes: Iterable[Override], options: Mapping[str, str | None]
) -> tuple[Tree, list[Override]]:
    """A job tree around a lone stack, and the overrides that the options amount to."""
    tree = assembled({"stack": stack, "recipe": read_tree(DEFAULT_RECIPE, "default recipe")}, stack.file)
    found = [
        Override(_OPTIONS[name], text, f"--{name.replace('_', '-')}")
        for name, text in options.items()
        if text is not None
    ]
    goal = options.get("goal")
    end = Override((*_RECIPE_STEP, "to"), goal or _last_layer(stack), "--goal" if goal else "default recipe")
    moved = [
        Override(("stack", *change.keys), change.text, change.label) if change.keys[0] in _LONE_STACK_KEYS else change
        for change in changes
    ]
    return tree, [end, *found, *moved]


def _last_layer(stack: Tree) -> str:
    layers = stack.node(("layers",))
    last = layers.values[-1] if isinstance(layers, Items) and layers.values else None
    name = last.values.get("name") if isinstance(last, Block) else None
    return name.text if isinstance(name, Scalar) and name.text else "substrate"


def _refuse_options(options: Mapping[str, str | None]) -> None:
    for name, text in options.items():
        if text is not None:
            key = ".".join(_OPTIONS[name])
            raise UsageError(
                f"--{name.replace('_', '-')} is for a lone stack, and this is a job",
                cure=f"write --set '{key}={text}'",
            )


def _refuse_other_kind(tree: Tree) -> None:
    kind = kind_of(tree)
    if kind is None and not isinstance(tree.root, Block) and not tree.plain():
        says = wording.EMPTY_FILE
        raise InputErrors([InputError(says.what, cure=says.cure, place=tree.place(()))])
    if kind in ("recipe", "mill", "materials"):
        says = wording.needs_a_job(kind)
        raise InputErrors([InputError(says.what, cure=says.cure, place=tree.place(()))])


def _job(reader: FileReader) -> Job:
    """The job of some files. Raises InputErrors with whatever is wrong in them or does not fit together."""
    from stackmill.jobs.checks import check_fit, warn_outside_coupons

    documents = reader.read()
    if documents is None:
        raise _all([*reader.errors, *unknown_materials(reader.trees)], reader)
    found = find_materials(documents)
    stack, recipe = (
        _renamed_stack(documents.stack.model, found),
        _renamed_recipe(documents.recipe.model, found),
    )
    fit = check_fit(documents, stack, recipe, found)
    errors = [*documents.errors, *found.errors, *fit.errors]
    if errors:
        raise _all(errors, reader)
    assert fit.column_map is not None
    assert found.library is not None
    warn_outside_coupons(documents)
    job = documents.job.model
    contents = json.dumps(documents.contents(), sort_keys=True, ensure_ascii=False)
    return Job(
        title=job.title or stack.title or Path(documents.stack.file).stem,
        stack=stack,
        mill=documents.mill.model,
        recipe=recipe,
        goal=job.goal,
        keeps=job.keep,
        confidence=job.confidence,
        materials=found.materials,
        library=found.library,
        column_map=fit.column_map,
        documents=documents,
        inputs_sha256=hashlib.sha256(contents.encode()).hexdigest(),
        is_default_mill=documents.is_default_mill,
        notes=fit.notes,
        beam_share=fit.beam_share,
        calibration=_renamed_calibration(documents, found),
    )


def _all(errors: Sequence[InputError], reader: FileReader) -> InputErrors:
    return InputErrors(wording.in_order(errors, [tree.file for tree in reader.trees]))


def _renamed_calibration(documents: JobDocuments, found: Found) -> CalibrationFile | None:
    """The calibration with each material under its own name."""
    if documents.calibration is None:
        return None
    told = documents.calibration.model
    coupons = (one.model_copy(update={"material": found.own(one.material)}) for one in told.coupons)
    return told.model_copy(update={"coupons": tuple(coupons)})


def _renamed_stack(stack: Stack, found: Found) -> Stack:
    """The stack with each material under its own name."""
    if not found.aliases:
        return stack
    layers = []
    for layer in stack.layers:
        features = []
        for feature in layer.features:
            films = {
                "liner": tuple(found.own_film(film) for film in feature.liner),
                "cap": feature.cap and found.own_film(feature.cap),
                "base": feature.base and found.own_film(feature.base),
            }
            features.append(feature.model_copy(update={"material": found.own(feature.material), **films}))
        material = layer.material if layer.material == NO_FILL else found.own(layer.material)
        layers.append(layer.model_copy(update={"material": material, "features": tuple(features)}))
    return stack.model_copy(update={"layers": tuple(layers)})


def _renamed_recipe(recipe: Recipe, found: Found) -> Recipe:
    """The recipe with each material under its own name."""
    if not found.aliases:
        return recipe
    steps = []
    for step in recipe.steps:
        changes: dict[str, object] = {}
        if isinstance(step, Cover):
            changes = {"with_": found.own(step.with_)}
        elif isinstance(step, Strip):
            changes = {"strips": tuple(map(found.own, step.strips))}
        elif isinstance(step, Process):
            changes = {"rates": {found.own(name): rate for name, rate in step.rates.items()}}
        steps.append(step.model_copy(update=changes) if changes else step)
    return recipe.model_copy(update={"steps": tuple(steps)})
