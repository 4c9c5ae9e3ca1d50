"""What the parts of a stack file must agree on, each complaint with its place in the file."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from typing import TYPE_CHECKING

from stackmill.documents import wording
from stackmill.documents.wording import Refusal, Sentence
from stackmill.units import plain, quoted

if TYPE_CHECKING:
    from stackmill.documents.stack import Feature, Region, Stack

MOST_DENSITIES = 6
"""Layers with a pattern density in one stack: each doubles the columns."""


def same_names(what: str, names: Iterable[str], path: Callable[[int], tuple[str | int, ...]]) -> Iterator[Refusal]:
    """A refusal for every name that has been given before."""
    seen: set[str] = set()
    for k, name in enumerate(names):
        if name in seen:
            says = Sentence(f"a second {what} is called {quoted(name)}", "give each a name of its own")
            yield Refusal(says, *path(k))
        seen.add(name)


def stack_refusals(stack: Stack) -> Iterator[Refusal]:
    """Everything in a stack that does not go together."""
    if not stack.layers:
        yield Refusal(Sentence("this stack has no layers", "list them from the top down"), "layers")
        return
    if not stack.regions:
        yield Refusal(Sentence("this stack has no regions", "leave the key out, or name one"), "regions")
    yield from same_names("layer", [layer.name for layer in stack.layers], lambda k: ("layers", k, "name"))
    yield from same_names("region", [r.name for r in stack.regions], lambda k: ("regions", k, "name"))
    drawn = (k for k, layer in enumerate(stack.layers) if any(f.is_drawn for f in layer.features))
    patterned = next(drawn, None)
    if stack.cell is None and patterned is not None:
        says = Sentence("features need a cell to lie in", "add cell: {x: 4.8 um, y: 4.8 um}")
        yield Refusal(says, "layers", patterned, "features")
    yield from _substrate_refusals(stack)
    yield from _top_refusals(stack)
    yield from _density_refusals(stack)
    yield from _through_refusals(stack)
    for k, region in enumerate(stack.regions):
        for refusal in _region_refusals(stack, region):
            yield Refusal(refusal.says, "regions", k, *refusal.path)


def _substrate_refusals(stack: Stack) -> Iterator[Refusal]:
    last = len(stack.layers) - 1
    substrate = stack.layers[last]
    for wrong, key, what in (
        (bool(substrate.features), "features", "cannot have features"),
        (substrate.coverage == "conformal", "coverage", "cannot be conformal"),
        (substrate.material == "none", "material", "needs a material"),
    ):
        if wrong:
            says = Sentence(f"the last layer is the substrate and {what}", "add the substrate below it")
            yield Refusal(says, "layers", last, key)
    if substrate.top is not None:
        says = Sentence("the last layer is the substrate, whose top is height 0", "give its thickness instead")
        yield Refusal(says, "layers", last, "top")
    if "level" in substrate.model_fields_set:
        says = Sentence("the last layer is the substrate, which is level anyway", "leave level out")
        yield Refusal(says, "layers", last, "level")


def _top_refusals(stack: Stack) -> Iterator[Refusal]:
    """Heights are given for every layer over the substrate or for none, and rise from layer to layer."""
    layers = stack.layers[:-1]
    if not any(layer.top is not None for layer in layers):
        return
    for k, layer in enumerate(layers):
        if layer.top is None:
            what = f"layer {quoted(layer.name)} has a thickness where others have a top"
            yield Refusal(
                Sentence(what, "give every layer over the substrate a top, or none"), "layers", k, "thickness"
            )
    below, name = 0.0, "the substrate"
    for k in reversed(range(len(layers))):
        top = layers[k].top
        if top is None:
            return
        if top.value < below + 0.1:
            what = f"the top of layer {quoted(layers[k].name)} is not above the {plain(below)} nm of {name}"
            yield Refusal(
                Sentence(what, "list layers from the top down, with heights over the substrate"), "layers", k, "top"
            )
        below, name = top.value, quoted(layers[k].name)


def _density_refusals(stack: Stack) -> Iterator[Refusal]:
    dense = [(k, n) for k, one in enumerate(stack.layers) for n, f in enumerate(one.features) if not f.is_drawn]
    if len(dense) > MOST_DENSITIES:
        k, n = dense[MOST_DENSITIES]
        what = f"this stack has {len(dense)} layers with pattern densities, and each doubles its columns"
        cure = f"keep them in at most {MOST_DENSITIES} layers, those nearest the goal"
        yield Refusal(Sentence(what, cure), "layers", k, "features", n, "pattern_density")


# --- features through several layers --------------------------------------------------------------------------


def _through_refusals(stack: Stack) -> Iterator[Refusal]:
    for k, layer in enumerate(stack.layers):
        for n, feature in enumerate(layer.features):
            if feature.through:
                for refusal in _one_through(stack, k, feature):
                    yield Refusal(refusal.says, "layers", k, "features", n, *refusal.path)


def _one_through(stack: Stack, home: int, feature: Feature) -> Iterator[Refusal]:
    names = [layer.name for layer in stack.layers]
    unknown = [k for k, name in enumerate(feature.through) if name not in names]
    for k in unknown:
        yield Refusal(wording.no_such("layer", feature.through[k], names), "through", k)
    if unknown:
        return
    numbers = sorted({names.index(name) for name in feature.through})
    if home not in numbers:
        what = f"feature {quoted(feature.name)} does not go through {quoted(names[home])}, where it is written"
        yield Refusal(Sentence(what, "name that layer too, or write the feature in another"), "through")
    elif numbers[-1] - numbers[0] >= len(numbers):
        between = quoted(next(names[k] for k in range(numbers[0], numbers[-1]) if k not in numbers))
        what = f"feature {quoted(feature.name)} leaves out {between} on its way"
        yield Refusal(Sentence(what, "name every layer it goes through"), "through")
    for k, name in enumerate(feature.through):
        layer = stack.layers[names.index(name)]
        if layer.coverage == "conformal" or names.index(name) == len(names) - 1:
            kind = "conformal" if layer.coverage == "conformal" else "the substrate"
            cure = "end the feature above it" if kind == "the substrate" else "make that layer planarised"
            says = Sentence(f"feature {quoted(feature.name)} cannot go through {quoted(name)}, which is {kind}", cure)
            yield Refusal(says, "through", k)
        elif layer is not stack.layers[home] and any(f.name == feature.name for f in layer.features):
            says = Sentence(
                f"layer {quoted(name)} has a {quoted(feature.name)} of its own", "give each a name of its own"
            )
            yield Refusal(says, "through", k)


# --- regions --------------------------------------------------------------------------------------------------


def _region_refusals(stack: Stack, region: Region) -> Iterator[Refusal]:
    names = [layer.name for layer in stack.layers]
    patterned = {layer.name: [f.name for f in layer.features] for layer in stack.layers if layer.features}
    for k, name in enumerate(region.absent.layers):
        if name not in names:
            yield Refusal(wording.no_such("layer", name, names), "absent", "layers", k)
        elif name == names[-1]:
            cure = "keep at least the substrate"
            yield Refusal(Sentence(f"region {quoted(region.name)} removes everything", cure), "absent", "layers", k)
    for k, name in enumerate(region.absent.features_of):
        if name not in patterned:
            yield Refusal(_no_features(name, patterned, names), "absent", "features_of", k)
    for name, feature in region.solid.items():
        if name not in patterned:
            yield Refusal(_no_features(name, patterned, names), "solid", name)
        elif feature not in patterned[name]:
            yield Refusal(wording.no_such_feature(name, feature, patterned[name]), "solid", name)
        elif name in region.absent.layers or name in region.absent.features_of:
            says = Sentence(f"layer {quoted(name)} is both absent and solid here", "keep one of them")
            yield Refusal(says, "solid", name)
    yield from _solid_twice(stack, region)


def _solid_twice(stack: Stack, region: Region) -> Iterator[Refusal]:
    """Layers that two solid features would both fill."""
    filled: dict[str, str] = {}
    for name, feature_name in region.solid.items():
        layer = stack.layer(name)
        feature = next((f for f in layer.features if f.name == feature_name), None) if layer else None
        for passed in (feature.through or (name,)) if feature else ():
            if passed in filled:
                what = (
                    f"layer {quoted(passed)} would be solid {quoted(filled[passed])} and solid {quoted(feature_name)}"
                )
                yield Refusal(Sentence(what, "keep one of them"), "solid", name)
                break
            filled[passed] = feature_name


def _no_features(name: str, patterned: Iterable[str], names: Iterable[str]) -> Sentence:
    if name in names:
        cure = f"layers with features: {wording.listed(list(patterned), last='and')}" if patterned else ""
        return Sentence(f"layer {quoted(name)} has no features", cure or "leave this out")
    return wording.no_such("layer", name, list(patterned))
