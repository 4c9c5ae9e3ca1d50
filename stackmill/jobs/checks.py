"""Checks of a job's files against each other, each complaint with its line."""

from __future__ import annotations

import warnings
from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING, Any

from stackmill.documents import wording
from stackmill.documents.job import Goal, Keep
from stackmill.documents.marks import KeyPath
from stackmill.documents.reading import Document
from stackmill.documents.recipe import OTHER, Beam, Cover, Process, Recipe, Seen, Strip, Target, Uncover
from stackmill.documents.stack import NO_FILL, Feature, Layer, Line, Region, Stack, Via
from stackmill.documents.wording import Sentence
from stackmill.errors import InputError, StackmillWarning
from stackmill.frozen import frozen
from stackmill.jobs.beam import beam_over
from stackmill.jobs.files import JobDocuments
from stackmill.jobs.materials import Found, in_stack
from stackmill.units import plain, quoted

if TYPE_CHECKING:
    from stackmill.columns.columns import ColumnMap

Complaint = tuple[Sentence, KeyPath]

_NEAR_ENERGY, _NEAR_DEG = 1.5, 15.0  # a step this near to a coupon, in energy (times) and angle, is covered by it


@frozen
class Fit:
    """How the files of a job fit together.

    column_map: None where the stack has errors; beam_share: the beam's current density in each region, as a
    share of the mill's.
    """

    column_map: ColumnMap | None
    notes: tuple[str, ...]
    errors: tuple[InputError, ...]
    beam_share: tuple[float, ...] = ()


def check_fit(documents: JobDocuments, stack: Stack, recipe: Recipe, found: Found) -> Fit:
    """Check goal, keeps and steps against the stack, and the stack's features against each other."""
    steps = [*_covers(stack, recipe), *_ends(stack, recipe), *_process_materials(stack, recipe)]
    if not found.errors:
        steps += _energies(documents, stack, recipe, found)
    errors = _placed(documents.job, _wants(documents, stack)) + _placed(documents.recipe, steps)
    if not documents.stack.healed:
        errors += _placed(documents.stack, _geometry(stack))
    errors += _calibrated(documents)
    beam = beam_over(stack, documents.mill.model)
    errors += _placed(documents.stack, beam.complaints)
    column_map = None
    if not errors and not found.errors and not documents.errors:
        column_map = _build(documents, stack, errors)
    return Fit(column_map, (*_notes(stack, recipe), *beam.notes), tuple(errors), beam.share)


def _calibrated(documents: JobDocuments) -> list[InputError]:
    """A calibration must belong to the mill's gas, and a current from coupons needs one."""
    mill, calibration = documents.mill, documents.calibration
    if calibration is None:
        return [mill.error(wording.NEEDS_COUPONS, "current_density")] if mill.model.from_coupon else []
    if calibration.model.gas != mill.model.gas:
        return [calibration.error(wording.other_gas(calibration.model.gas, mill.model.gas), "gas")]
    return []


def warn_outside_coupons(documents: JobDocuments) -> None:
    """Warn of steps that mill where no coupon was milled, and of a calibration that is doubtful itself."""
    if documents.calibration is None:
        return
    told = documents.calibration.model
    if told.verdict == "doubtful":
        _warn(f"the calibration {quoted(told.title or told.data)} is doubtful: see what stackmill calibrate says of it")
    for step in documents.recipe.model.steps:
        if isinstance(step, Beam) and not any(
            max(step.energy, one.energy) <= _NEAR_ENERGY * min(step.energy, one.energy)
            and abs(step.incidence - one.incidence) <= _NEAR_DEG
            for one in told.coupons
        ):
            _warn(
                f"step {quoted(step.name)} mills at {plain(step.energy)} eV and {plain(step.incidence)} deg, far from"
                " every coupon: what the energy and the angle do is not known from them, and its sd is wider"
            )


def _warn(text: str) -> None:
    warnings.warn(text, StackmillWarning, stacklevel=3)


def _placed(document: Document[Any], complaints: Iterable[Complaint]) -> list[InputError]:
    """Complaints with their places, without those about values that stand in for unreadable ones."""
    return [
        document.error(says, *path)
        for says, path in complaints
        if not any(path[: len(healed)] == healed for healed in document.healed)
    ]


# --- what a region has --------------------------------------------------------------------------------------


def has_layer(region: Region, layer: Layer) -> bool:
    """Whether a region has anything of a layer."""
    if layer.name in region.absent.layers:
        return False
    return layer.material != NO_FILL or layer.name not in region.absent.features_of


def features_in(stack: Stack, layer: Layer) -> Iterator[tuple[Layer, Feature]]:
    """Every feature that is in a layer, with the layer it is written in: its own, then those that go through it."""
    yield from ((layer, feature) for feature in layer.features)
    for home in stack.layers:
        if home is not layer:
            yield from ((home, feature) for feature in home.features if layer.name in feature.through)


def has_feature(stack: Stack, region: Region, layer: Layer, feature: str) -> bool:
    """Whether a region has a feature in a layer."""
    homes = {one.name: home for home, one in features_in(stack, layer)}
    if layer.name in region.absent.layers or homes[feature].name in region.absent.features_of:
        return False
    solid = [one for one, home in homes.items() if region.solid.get(home.name) == one]
    return not solid or feature in solid


def _reference(stack: Stack, wanted: Goal | Keep | Target | Seen, at: KeyPath) -> Iterator[Complaint]:
    """Complaints about a layer or feature that is named with the regions where it counts."""
    layer = stack.layer(wanted.layer)
    if layer is None:
        yield wording.no_such("layer", wanted.layer, [one.name for one in stack.layers]), (*at, "layer")
        return
    what, name = f"layer {quoted(layer.name)}", wanted.feature
    if name is not None:
        features = [feature.name for _, feature in features_in(stack, layer)]
        if name not in features:
            yield wording.no_such_feature(layer.name, name, features), (*at, "feature")
            return
        what = quoted(f"{layer.name} / {name}")
    regions = {region.name: region for region in stack.regions}
    having = [
        region.name
        for region in stack.regions
        if (has_layer(region, layer) if name is None else has_feature(stack, region, layer, name))
    ]
    # A bare layer is still reached where it is absent: reaching it is reaching the next one below.
    must_be_there = name is not None or isinstance(wanted, Goal | Keep)
    for k, region_name in enumerate(wanted.in_):
        if region_name not in regions:
            yield wording.no_such("region", region_name, list(regions)), (*at, "in", k)
        elif must_be_there and region_name not in having:
            yield wording.absent_from(what, region_name, having), (*at, "in", k)
    if must_be_there and not wanted.in_ and not having:
        yield wording.nowhere(what), (*at, "layer" if name is None else "feature")


# --- goal and keeps -----------------------------------------------------------------------------------------


def _wants(documents: JobDocuments, stack: Stack) -> Iterator[Complaint]:
    job = documents.job.model
    if job.goal is not None:
        yield from _reference(stack, job.goal, ("goal",))
        yield from _band(stack, job.goal)
    for k, keep in enumerate(job.keep):
        yield from _reference(stack, keep, ("keep", k))
        layer = stack.layer(keep.layer)
        if layer is not None and keep.at_least >= layer.thickness.value:
            what = quoted(layer.name if keep.feature is None else f"{layer.name} / {keep.feature}")
            thickness = f"{plain(layer.thickness.value)} nm"
            yield wording.keeps_more_than_there_is(what, thickness), ("keep", k, "at_least")


def _band(stack: Stack, goal: Goal) -> Iterator[Complaint]:
    """A goal's band must lie inside its layer."""
    layer = stack.layer(goal.layer)
    if layer is None or goal.at.top:
        return
    middle, thickness = goal.at.fraction * layer.thickness.value, layer.thickness.value
    if middle - goal.at.half_width < 0.0 or middle + goal.at.half_width > thickness:
        yield wording.band_leaves_its_layer(str(goal.at), quoted(layer.name), f"{plain(thickness)} nm"), ("goal", "at")


# --- steps --------------------------------------------------------------------------------------------------


def _covers(stack: Stack, recipe: Recipe) -> Iterator[Complaint]:
    regions = [region.name for region in stack.regions]
    covered: dict[str, str] = {}
    for k, step in enumerate(recipe.steps):
        if not isinstance(step, Cover | Uncover):
            continue
        key, names = ("cover", step.cover) if isinstance(step, Cover) else ("uncover", step.uncover)
        for n, name in enumerate(names):
            path: KeyPath = ("steps", k, key, n)
            if name not in regions:
                yield wording.no_such("region", name, regions), path
            elif isinstance(step, Cover):
                if name in covered:
                    yield wording.covered_already(name, covered[name]), path
                covered[name] = step.name
            elif covered.pop(name, None) is None:
                yield wording.not_covered(name), path


def _ends(stack: Stack, recipe: Recipe) -> Iterator[Complaint]:
    for k, step in enumerate(recipe.steps):
        if isinstance(step, Beam | Process):
            if step.to is not None:
                yield from _reference(stack, step.to, ("steps", k, "to"))
            if step.seen is not None:
                yield from _reference(stack, step.seen, ("steps", k, "seen"))


def _process_materials(stack: Stack, recipe: Recipe) -> Iterator[Complaint]:
    present = list(dict.fromkeys(name for name, _ in in_stack(stack)))
    for k, step in enumerate(recipe.steps):
        if isinstance(step, Strip) and not set(step.strips) & set(present):
            yield wording.touches_nothing(step.name), ("steps", k, "strips")
        if isinstance(step, Process):
            missing = [name for name in present if step.rate(name) is None]
            if set(step.rates) - {OTHER} and not set(step.rates) & set(present):
                yield wording.touches_nothing(step.name), ("steps", k, "rates")
            elif missing:
                yield wording.no_rate(step.name, missing), ("steps", k, "rates")


def _energies(documents: JobDocuments, stack: Stack, recipe: Recipe, found: Found) -> Iterator[Complaint]:
    """Energies at which some material of the stack would not be sputtered at all."""
    from stackmill.rates.yields import threshold_ev

    gas = documents.mill.model.gas
    names = dict.fromkeys(name for name, _ in in_stack(stack))
    thresholds = {name: threshold_ev(found.materials[name], gas) for name in names}
    hardest = max(thresholds, key=lambda name: thresholds[name])
    for k, step in enumerate(recipe.steps):
        if isinstance(step, Beam) and step.energy <= thresholds[hardest]:
            needed = f"{thresholds[hardest]:.0f} eV"
            yield wording.too_slow(f"{plain(step.energy)} eV", gas, hardest, needed), ("steps", k, "energy")


def _notes(stack: Stack, recipe: Recipe) -> Iterator[str]:
    present = {name for name, _ in in_stack(stack)}
    for step in recipe.steps:
        named: Sequence[str] = ()
        if isinstance(step, Strip):
            named = step.strips
        elif isinstance(step, Process):
            named = [name for name in step.rates if name != OTHER]
        unused = [name for name in named if name not in present]
        if unused:
            names = wording.listed(unused, last="and")
            yield f"step {quoted(step.name)} also names {names}, which this stack does not have"


# --- features against each other ----------------------------------------------------------------------------


def _geometry(stack: Stack) -> Iterator[Complaint]:
    from stackmill.columns import liner_too_thick, outside, overlaps

    for lost in outside(stack):
        yield wording.outside_cell(lost.feature), _feature_path(stack, lost.layer, lost.feature)
    for pair in overlaps(stack):
        says_so = wording.overlapping(pair.feature, pair.other, pair.layer, passing=pair.passing)
        yield says_so, _feature_path(stack, pair.layer, pair.other)
    for full in liner_too_thick(stack):
        films, room = f"{plain(full.films_nm)} nm", f"{plain(full.room_nm)} nm"
        says = wording.films_across if full.across else wording.films_in_height
        yield says(full.feature, films, room), _feature_path(stack, full.layer, full.feature)
    yield from _too_wide(stack)


def _too_wide(stack: Stack) -> Iterator[Complaint]:
    """Features that would lie on themselves in the next cell."""
    cell = stack.cell
    for layer in stack.layers if cell is not None else ():
        for feature in filter(lambda one: one.is_drawn, layer.features):
            for axis, size in _sizes(feature).items():
                if size > getattr(cell, axis):
                    path = _feature_path(stack, layer.name, feature.name)
                    yield wording.wider_than_cell(feature.name, axis), path


def _sizes(feature: Feature) -> dict[str, float]:
    """How far a feature reaches along x and y, in nm, where it has edges."""
    shape = feature.shape
    if isinstance(shape, Line):
        return {"x" if shape.along == "y" else "y": shape.width}
    if isinstance(shape, Via):
        return {"x": shape.diameter, "y": shape.diameter}
    return {"x": shape.x[1] - shape.x[0], "y": shape.y[1] - shape.y[0]}


def _feature_path(stack: Stack, layer: str, feature: str) -> KeyPath:
    """Where a feature is written that is in a layer."""
    for k, one in enumerate(stack.layers):
        for n, other in enumerate(one.features):
            if other.name == feature and layer in (one.name, *other.through):
                return "layers", k, "features", n, "name"
    raise KeyError(layer, feature)


def _build(documents: JobDocuments, stack: Stack, errors: list[InputError]) -> ColumnMap | None:
    """The column map; None, and an error with a place, where the stack cannot be built."""
    from stackmill.columns import build

    try:
        return build(stack)
    except InputError as error:
        place = error.place or documents.stack.place("layers")
        errors.append(InputError(error.what, cure=error.cure, place=place))
        return None
