"""Features through several layers, put into each layer they go through."""

from __future__ import annotations

from stackmill.documents.stack import Feature, Layer, Stack
from stackmill.frozen import frozen


@frozen
class Spread:
    """The layers of a stack with every feature that is in them, wherever it is written.

    layers: own features first, then those that come through; homes[layer][k]: the layer in which feature k is
    written, and its number there.
    """

    layers: tuple[Layer, ...]
    homes: tuple[tuple[tuple[int, int], ...], ...]


def spread(stack: Stack) -> Spread:
    """Put every feature into each layer that it goes through."""
    features = [list(layer.features) for layer in stack.layers]
    homes = [[(index, k) for k in range(len(layer.features))] for index, layer in enumerate(stack.layers)]
    for index, layer in enumerate(stack.layers):
        for k, feature in enumerate(layer.features):
            for other in _elsewhere(stack, index, feature):
                features[other].append(feature)
                homes[other].append((index, k))
    layers = tuple(
        layer if len(own) == len(layer.features) else layer.model_copy(update={"features": tuple(own)})
        for layer, own in zip(stack.layers, features, strict=True)
    )
    return Spread(layers, tuple(map(tuple, homes)))


def _elsewhere(stack: Stack, home: int, feature: Feature) -> list[int]:
    """The other layers a feature goes through."""
    if not feature.through:
        return []
    return [k for k, layer in enumerate(stack.layers) if k != home and layer.name in feature.through]
