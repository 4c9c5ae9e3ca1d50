"""The uncertain thicknesses of a stack, and heights as sums of them.

Every height is a sum of thickness inputs with fixed shares, so a height is held as its shares (L,): its
derivative at the same time.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import ThicknessInput
from stackmill.documents.stack import NO_FILL, Feature, Film, Stack
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

    thickness_nm (L,): best values; layer: the input of each layer; films[layer][feature]; first_feature: the
    number in the map's table of each layer's first feature; features, materials: the map's tables.
    """

    inputs: tuple[ThicknessInput, ...]
    thickness_nm: Array
    layer: tuple[int, ...]
    films: tuple[tuple[FeatureFilms, ...], ...]
    first_feature: tuple[int, ...]
    features: tuple[tuple[int, str], ...]
    materials: tuple[str, ...]

    def share_of(self, index: int) -> Array:
        """The height (L,) that is just one input."""
        share = np.zeros(len(self.inputs))
        share[index] = 1.0
        return share

    def nm(self, shares: Array) -> Array:
        """Heights in nm at best values, from shares (..., L)."""
        return np.asarray(shares @ self.thickness_nm)


def stack_inputs(stack: Stack) -> StackInputs:
    """Number the thicknesses, features and materials of a stack, from the top down."""
    inputs: list[ThicknessInput] = []
    features: list[tuple[int, str]] = []
    layers, films, first = [], [], []
    for index, layer in enumerate(stack.layers):
        layers.append(len(inputs))
        inputs.append(ThicknessInput(layer.name, index, layer.thickness))
        first.append(len(features))
        of_layer = []
        for feature in layer.features:
            features.append((index, feature.name))
            of_layer.append(_films(f"{layer.name} / {feature.name}", index, feature, inputs))
        films.append(tuple(of_layer))
    values = np.array([i.thickness.value for i in inputs])
    materials = tuple(dict.fromkeys(_materials(stack)))
    return StackInputs(tuple(inputs), values, tuple(layers), tuple(films), tuple(first), tuple(features), materials)


def _films(name: str, layer: int, feature: Feature, inputs: list[ThicknessInput]) -> FeatureFilms:
    def add(part: str, film: Film) -> int:
        inputs.append(ThicknessInput(f"{name} / {part}", layer, film.thickness))
        return len(inputs) - 1

    numbered = len(feature.liner) > 1
    cap = add("cap", feature.cap) if feature.cap else None
    liner = tuple(add(f"liner {n}" if numbered else "liner", film) for n, film in enumerate(feature.liner, 1))
    base = add("base", feature.base) if feature.base else None
    return FeatureFilms(cap, base, liner)


def _materials(stack: Stack) -> Iterator[str]:
    for layer in stack.layers:
        for feature in layer.features:
            yield from (film.material for film in (feature.cap, *feature.liner, feature.base) if film)
            yield feature.material
        if layer.material != NO_FILL:
            yield layer.material
