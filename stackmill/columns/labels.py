"""What a column is called: the features met from the top down, and the slopes they lie under."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from stackmill.columns.columns import CORE, FILL, LINER
from stackmill.columns.cover import CLASSES
from stackmill.columns.inputs import StackInputs
from stackmill.frozen import frozen

FIELD = "field"


@frozen
class Slope:
    """A class of slope: the layer whose top it is, number from the wall down, what it slopes from."""

    layer: int
    number: int
    source: str


@frozen
class Labelled:
    """A column to be named: (material, layer, feature, part) of its segments, and its slopes, top down."""

    kinds: tuple[tuple[int, int, int, int], ...]
    slopes: tuple[Slope, ...]


def labels(columns: Sequence[Labelled], inputs: StackInputs, layers: Sequence[str]) -> tuple[str, ...]:
    """A name for each column, all different: as short as that allows."""
    short = [_sequence(c, layers, inputs, full=False) for c in columns]
    taken = Counter(short)
    if max(taken.values()) == 1:
        return tuple(short)
    full = [_sequence(c, layers, inputs, full=True) for c in columns]
    return _numbered([s if taken[s] == 1 else f for s, f in zip(short, full, strict=True)])


def _sequence(column: Labelled, layers: Sequence[str], inputs: StackInputs, *, full: bool) -> str:
    """The words of a column; `full` adds the layer of each feature and the feature under each slope."""
    words: dict[int, list[str]] = {}
    for slope in column.slopes:
        origin = f" from {slope.source}" if full else ""
        words[slope.layer] = [f"{layers[slope.layer]} slope {slope.number} of {CLASSES}{origin}"]
    met: dict[int, list[tuple[int, int]]] = {}
    first: dict[int, int] = {}
    for material, layer, feature, part in column.kinds:
        if part != FILL:
            first.setdefault(feature, layer)
            met.setdefault(feature, []).append((material, part))
    for feature, parts in met.items():
        layer = first[feature]
        origin = f"{layers[inputs.features[feature][0]]} " if full else ""
        several = len(inputs.films[feature].liner) > 1
        word = f"{origin}{inputs.features[feature][1]}{_ring(parts, several, inputs)}"
        words.setdefault(layer, []).append(word)
    return " / ".join(word for layer in sorted(words) for word in words[layer]) or FIELD


def _ring(parts: Sequence[tuple[int, int]], several: bool, inputs: StackInputs) -> str:
    """' liner' where a feature's core is missing, with the film's material where the liner is of several."""
    films = [material for material, part in parts if part == LINER]
    if not films or any(part == CORE for _, part in parts):
        return ""
    return f" {inputs.materials[films[0]]} liner" if several else " liner"


def _numbered(names: Sequence[str]) -> tuple[str, ...]:
    """Names with a number after those that still agree."""
    taken, seen = Counter(names), Counter[str]()
    unique = []
    for name in names:
        seen[name] += 1
        unique.append(name if taken[name] == 1 else f"{name} ({seen[name]})")
    return tuple(unique)
