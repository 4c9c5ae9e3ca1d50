"""Which layers and which of their features a region of the die has."""

from __future__ import annotations

from stackmill.columns.spreading import Spread
from stackmill.documents.stack import NO_FILL, Layer, Region
from stackmill.frozen import frozen


@frozen
class PresentLayer:
    """One layer as it is in a region.

    index: its place in the stack, from the top; features: the numbers, within the layer, of the drawn features
    that are there; solid: whether the one feature left covers the whole cell; density: the number of the feature
    that is there by its pattern density.
    """

    index: int
    layer: Layer
    features: tuple[int, ...]
    solid: bool
    density: int | None = None

    @property
    def has_fill(self) -> bool:
        """Whether there is anything between the features."""
        return self.layer.material != NO_FILL


def present_layers(spread: Spread, region: Region) -> tuple[PresentLayer, ...]:
    """The layers of a region, from the substrate up; layers of nothing but missing features are left out."""
    found = []
    for index in reversed(range(len(spread.layers))):
        layer = spread.layers[index]
        if layer.name in region.absent.layers:
            continue
        here = _present(index, spread, region)
        if here.has_fill or here.features:
            found.append(here)
    return tuple(found)


def _present(index: int, spread: Spread, region: Region) -> PresentLayer:
    layer = spread.layers[index]
    homes = [spread.layers[home].name for home, _ in spread.homes[index]]
    for k, (feature, home) in enumerate(zip(layer.features, homes, strict=True)):
        if region.solid.get(home) == feature.name:
            return PresentLayer(index, layer, (k,), True)
    here = [k for k, home in enumerate(homes) if home not in region.absent.features_of]
    drawn = tuple(k for k in here if layer.features[k].is_drawn)
    density = next((k for k in here if not layer.features[k].is_drawn), None)
    return PresentLayer(index, layer, drawn, False, density)
