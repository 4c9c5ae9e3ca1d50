"""The uncertain thicknesses of a stack, and heights as sums of them.

Every height is a sum of thicknesses with fixed shares, so a height is held as its shares (L,): its derivative at
the same time. Where the stack gives the tops of layers, the inputs are those heights, each measured by itself:
shares of thicknesses are turned into shares of heights when a region is done.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import ThicknessInput
from stackmill.columns.spreading import Spread
from stackmill.documents.stack import NO_FILL, Feature, Film, Layer
from stackmill.frozen import frozen

Array = NDArray[np.float64]


@frozen
class FeatureFilms:
    """Numbers of a feature's inputs: cap and base (None without), liner films from the outermost in."""

    cap: int | None
    base: int | None
    liner: tuple[int, ...]


@frozen
class StackInputs:
    """All L inputs of a stack and where they belong.

    thickness_nm (L,): best values of the thicknesses; layer: the number of each layer's; feature[layer][k]: the
    number in the map's table of each feature in a layer; films: of each feature of the table; features,
    materials: the map's tables; of_heights (L, L): thicknesses as shares of the inputs, where they are not the same.
    """

    inputs: tuple[ThicknessInput, ...]
    thickness_nm: Array
    layer: tuple[int, ...]
    feature: tuple[tuple[int, ...], ...]
    films: tuple[FeatureFilms, ...]
    features: tuple[tuple[int, str], ...]
    materials: tuple[str, ...]
    of_heights: Array | None = None

    def of_inputs(self, shares: Array) -> Array:
        """Shares (..., L) of thicknesses as shares of the inputs."""
        return shares if self.of_heights is None else np.asarray(shares @ self.of_heights)

    def share_of(self, index: int) -> Array:
        """The height (L,) that is just one input."""
        share = np.zeros(len(self.inputs))
        share[index] = 1.0
        return share

    def nm(self, shares: Array) -> Array:
        """Heights in nm at best values, from shares (..., L)."""
        return np.asarray(shares @ self.thickness_nm)


def stack_inputs(found: Spread) -> StackInputs:
    """Number the thicknesses, features and materials of a stack, from the top down."""
    inputs: list[ThicknessInput] = []
    features: list[tuple[int, str]] = []
    films: list[FeatureFilms] = []
    layers: list[int] = []
    table: dict[tuple[int, int], int] = {}
    for index, layer in enumerate(found.layers):
        layers.append(len(inputs))
        inputs.append(_input(index, layer))
        for k, feature in enumerate(layer.features):
            if found.homes[index][k] == (index, k):
                table[index, k] = len(features)
                features.append((index, feature.name))
                films.append(_films(f"{layer.name} / {feature.name}", index, feature, inputs))
    values = [i.thickness.value for i in inputs]
    for number, layer in zip(layers, found.layers, strict=True):
        values[number] = layer.thickness.value
    return StackInputs(
        tuple(inputs),
        np.array(values),
        tuple(layers),
        tuple(tuple(table[home] for home in homes) for homes in found.homes),
        tuple(films),
        tuple(features),
        tuple(dict.fromkeys(_materials(found.layers))),
        _of_heights(inputs, layers),
    )


def _input(index: int, layer: Layer) -> ThicknessInput:
    if layer.top is None:
        return ThicknessInput(layer.name, index, layer.thickness)
    return ThicknessInput(f"{layer.name} top", index, layer.top, is_height=True)


def _of_heights(inputs: Sequence[ThicknessInput], layers: Sequence[int]) -> Array | None:
    """Each layer's thickness as its top less the top of the layer below; the substrate's top is 0."""
    if not any(i.is_height for i in inputs):
        return None
    shares = np.eye(len(inputs))
    for number, below in pairwise(layers[:-1]):
        shares[number, below] = -1.0
    return shares


def _films(name: str, layer: int, feature: Feature, inputs: list[ThicknessInput]) -> FeatureFilms:
    def add(part: str, film: Film) -> int:
        inputs.append(ThicknessInput(f"{name} / {part}", layer, film.thickness))
        return len(inputs) - 1

    numbered = len(feature.liner) > 1
    cap = add("cap", feature.cap) if feature.cap else None
    liner = tuple(add(f"liner {n}" if numbered else "liner", film) for n, film in enumerate(feature.liner, 1))
    base = add("base", feature.base) if feature.base else None
    return FeatureFilms(cap, base, liner)


def _materials(layers: Sequence[Layer]) -> Iterator[str]:
    for layer in layers:
        for feature in layer.features:
            yield from (film.material for film in (feature.cap, *feature.liner, feature.base) if film)
            yield feature.material
        if layer.material != NO_FILL:
            yield layer.material
