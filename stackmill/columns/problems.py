"""What cannot be drawn: features that overlap, lie outside the cell, or are thinner than their films.

Only the facts: documents know the lines of the file and the words.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from stackmill.columns.carving import make_up
from stackmill.columns.outlines import Primitive, copies, overlap, primitive
from stackmill.columns.spreading import spread
from stackmill.documents.stack import Feature, Layer, Line, Stack, Via
from stackmill.frozen import frozen

_ROUNDING_NM = 1e-6


@frozen
class Overlapping:
    """Two features in one layer that share an area of the plan but not material and films.

    layer: where they meet; passing: whether one of them goes through several layers, and may be written in another.
    """

    layer: str
    feature: str
    other: str
    passing: bool = False


@frozen
class OutsideCell:
    """A feature whose centre is not in the cell."""

    layer: str
    feature: str


@frozen
class FilmsTooThick:
    """A feature that its films would fill.

    across: whether it is the liner's two sides across the feature's width, else cap, base and liner bottom
    in the thickness of its layers; films_nm: how thick they are together; room_nm: how much there is.
    """

    layer: str
    feature: str
    across: bool
    films_nm: float
    room_nm: float


def overlaps(stack: Stack) -> tuple[Overlapping, ...]:
    """Pairs of features that overlap and cannot merge, each pair in the uppermost layer where they meet."""
    if stack.cell is None:
        return ()
    cell, found = (stack.cell.x, stack.cell.y), spread(stack)
    met: dict[frozenset[tuple[int, int]], Overlapping] = {}
    for index, layer in enumerate(found.layers):
        for one, other in _overlaps(layer, cell):
            homes = frozenset((found.homes[index][one], found.homes[index][other]))
            pair = layer.features[one], layer.features[other]
            passing = any(len(feature.through) > 1 for feature in pair)
            met.setdefault(homes, Overlapping(layer.name, pair[0].name, pair[1].name, passing))
    return tuple(met.values())


def _overlaps(layer: Layer, cell: tuple[float, float]) -> Iterator[tuple[int, int]]:
    """The numbers of features that overlap, in their order."""
    numbers = [k for k, feature in enumerate(layer.features) if feature.is_drawn]
    features = [layer.features[k] for k in numbers]
    made = [make_up(feature) for feature in features]
    if len(set(made)) < 2:
        return
    figures = [primitive(feature.shape, cell) for feature in features]
    near: dict[int, list[Primitive]] = {}
    for k, j in _boxes_meet(figures, cell):
        if made[j] == made[k]:
            continue
        if j not in near:
            near[j] = copies(figures[j], cell, max(cell))
        if any(overlap(figures[k], copy) for copy in near[j]):
            yield numbers[j], numbers[k]


def _boxes_meet(figures: Sequence[Primitive], cell: tuple[float, float]) -> Iterator[tuple[int, int]]:
    """Pairs (k, j), j < k, of figures whose boxes meet, across the cell's edges too."""
    box = np.array([figure.box() for figure in figures]).reshape(-1, 2, 2)
    with np.errstate(invalid="ignore"):
        middle, half = np.nan_to_num(box.mean(axis=2)), (box[..., 1] - box[..., 0]) / 2
    for k in range(1, len(figures)):
        away = middle[:k] - middle[k]
        away -= np.array(cell) * np.round(away / np.array(cell))
        for j in np.flatnonzero((np.abs(away) <= half[:k] + half[k]).all(axis=1)):
            yield k, int(j)


def outside(stack: Stack) -> tuple[OutsideCell, ...]:
    """Features whose centre is outside the cell; across its edge is fine."""
    if stack.cell is None:
        return ()
    cell = (stack.cell.x, stack.cell.y)
    return tuple(
        OutsideCell(layer.name, feature.name)
        for layer in stack.layers
        for feature in layer.features
        if feature.is_drawn
        and not all(0.0 <= at <= size for at, size in zip(_centre(feature, cell), cell, strict=True))
    )


def _centre(feature: Feature, cell: tuple[float, float]) -> tuple[float, float]:
    shape = feature.shape
    if isinstance(shape, Via):
        return shape.x, shape.y
    if isinstance(shape, Line):
        return (shape.centre, cell[1] / 2) if shape.along == "y" else (cell[0] / 2, shape.centre)
    return sum(shape.x) / 2, sum(shape.y) / 2


def liner_too_thick(stack: Stack) -> tuple[FilmsTooThick, ...]:
    """Features whose films leave no core: in height, in the region where they have the least, or across."""
    found = []
    for index, layer in enumerate(stack.layers):
        for feature in layer.features:
            liner = sum(film.thickness.value for film in feature.liner)
            ends = sum(film.thickness.value for film in (feature.cap, feature.base) if film)
            tests = [(False, liner + ends, _height(stack, index, feature))]
            if feature.is_drawn:
                tests.append((True, 2.0 * liner, _width(feature)))
            for across, films, room in tests:
                if films > 0.0 and films >= room - _ROUNDING_NM:
                    found.append(FilmsTooThick(layer.name, feature.name, across, films, room))
    return tuple(found)


def _height(stack: Stack, index: int, feature: Feature) -> float:
    """The least height a feature has in any region that has it."""
    if not feature.through:
        return stack.layers[index].thickness.value
    layers = [layer for layer in stack.layers if layer.name in feature.through]
    heights = [
        sum(layer.thickness.value for layer in layers if layer.name not in region.absent.layers)
        for region in stack.regions
        if stack.layers[index].name not in region.absent.features_of
    ]
    return min((height for height in heights if height > 0.0), default=np.inf)


def _width(feature: Feature) -> float:
    shape = feature.shape
    if isinstance(shape, Via):
        return shape.diameter
    if isinstance(shape, Line):
        return shape.width
    return min(shape.x[1] - shape.x[0], shape.y[1] - shape.y[0])
