"""Which layers and which of their features a region of the die has."""

from __future__ import annotations

from stackmill.documents.stack import NO_FILL, Layer, Region, Stack
from stackmill.frozen import frozen


@frozen
class PresentLayer:
    """One layer as it is in a region.

    index: its place in the stack, from the top; features: the numbers, within the layer, of the features that
    are there; solid: whether the one feature left covers the whole cell.
    """

    index: int
    layer: Layer
    features: tuple[int, ...]
    solid: bool

    @property
    def has_fill(self) -> bool:
        """Whether there is anything between the features."""
        return self.layer.material != NO_FILL


def present_layers(stack: Stack, region: Region) -> tuple[PresentLayer, ...]:
    """The layers of a region, from the substrate up; layers of nothing but missing features are left out."""
    found = []
    for index in reversed(range(len(stack.layers))):
        layer = stack.layers[index]
        if layer.name in region.absent.layers:
            continue
        here = _present(index, layer, region)
        if here.has_fill or here.features:
            found.append(here)
    return tuple(found)


def _present(index: int, layer: Layer, region: Region) -> PresentLayer:
    if layer.name in region.solid:
        names = [feature.name for feature in layer.features]
        return PresentLayer(index, layer, (names.index(region.solid[layer.name]),), True)
    if layer.name in region.absent.features_of:
        return PresentLayer(index, layer, (), False)
    return PresentLayer(index, layer, tuple(range(len(layer.features))), False)
