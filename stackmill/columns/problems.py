"""What cannot be drawn: features that overlap, lie outside the cell, or are thinner than their films.

Only the facts: documents know the lines of the file and the words.
"""

from __future__ import annotations

from collections.abc import Iterator

from stackmill.columns.carving import make_up
from stackmill.columns.outlines import copies, overlap, primitive
from stackmill.documents.stack import Feature, Layer, Line, Stack, Via
from stackmill.frozen import frozen

_ROUNDING_NM = 1e-6


@frozen
class Overlapping:
    """Two features of one layer that share an area of the plan but not material and films."""

    layer: str
    feature: str
    other: str


@frozen
class OutsideCell:
    """A feature whose centre is not in the cell."""

    layer: str
    feature: str


@frozen
class FilmsTooThick:
    """A feature that its films would fill.

    across: whether it is the liner's two sides across the feature's width, else cap, base and liner bottom
    in the layer's thickness; films_nm: how thick they are together; room_nm: how much there is.
    """

    layer: str
    feature: str
    across: bool
    films_nm: float
    room_nm: float


def overlaps(stack: Stack) -> tuple[Overlapping, ...]:
    """Pairs of features that overlap and cannot merge."""
    return tuple(found for layer in stack.layers for found in _overlaps(stack, layer))


def _overlaps(stack: Stack, layer: Layer) -> Iterator[Overlapping]:
    if stack.cell is None:
        return
    cell = (stack.cell.x, stack.cell.y)
    figures = [primitive(feature.shape, cell) for feature in layer.features]
    for k, one in enumerate(layer.features):
        for j, other in enumerate(layer.features[:k]):
            if make_up(one) == make_up(other):
                continue
            if any(overlap(figures[k], copy) for copy in copies(figures[j], cell, max(cell))):
                yield Overlapping(layer.name, other.name, one.name)


def outside(stack: Stack) -> tuple[OutsideCell, ...]:
    """Features whose centre is outside the cell; across its edge is fine."""
    if stack.cell is None:
        return ()
    cell = (stack.cell.x, stack.cell.y)
    return tuple(
        OutsideCell(layer.name, feature.name)
        for layer in stack.layers
        for feature in layer.features
        if not all(0.0 <= at <= size for at, size in zip(_centre(feature, cell), cell, strict=True))
    )


def _centre(feature: Feature, cell: tuple[float, float]) -> tuple[float, float]:
    shape = feature.shape
    if isinstance(shape, Via):
        return shape.x, shape.y
    if isinstance(shape, Line):
        return (shape.centre, cell[1] / 2) if shape.along == "y" else (cell[0] / 2, shape.centre)
    return sum(shape.x) / 2, sum(shape.y) / 2


def liner_too_thick(stack: Stack) -> tuple[FilmsTooThick, ...]:
    """Features whose films leave no core: in height, or across."""
    found = []
    for layer in stack.layers:
        for feature in layer.features:
            liner = sum(film.thickness.value for film in feature.liner)
            ends = sum(film.thickness.value for film in (feature.cap, feature.base) if film)
            for across, films, room in (
                (False, liner + ends, layer.thickness.value),
                (True, 2.0 * liner, _width(feature)),
            ):
                if films > 0.0 and films >= room - _ROUNDING_NM:
                    found.append(FilmsTooThick(layer.name, feature.name, across, films, room))
    return tuple(found)


def _width(feature: Feature) -> float:
    shape = feature.shape
    if isinstance(shape, Via):
        return shape.diameter
    if isinstance(shape, Line):
        return shape.width
    return min(shape.x[1] - shape.x[0], shape.y[1] - shape.y[0])
