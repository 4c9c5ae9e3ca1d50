"""From a stack to its column map: every region's distinct columns, with areas, heights and derivatives."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import LayerPlan, layer_plan
from stackmill.columns.columns import ColumnMap, RegionColumns
from stackmill.columns.curves import joined
from stackmill.columns.inputs import StackInputs, stack_inputs
from stackmill.columns.labels import Labelled, labels
from stackmill.columns.neighbours import Neighbourhood, neighbourhood
from stackmill.columns.plan import RegionPlan, keys_of
from stackmill.columns.regions import PresentLayer, present_layers
from stackmill.columns.rise import Rising, raised
from stackmill.columns.scan import survey
from stackmill.columns.seams import seams
from stackmill.columns.spreading import spread
from stackmill.columns.stacked import Stacked, stacked_columns
from stackmill.documents.stack import Layer, Stack
from stackmill.frozen import frozen

Array = NDArray[np.float64]

_NO_CELL = (1000.0, 1000.0)  # a stack without features looks the same everywhere, whatever the cell


def build(stack: Stack) -> ColumnMap:
    """Work out what lies under every point of a die.

    The stack must be sound: features inside the cell, no overlaps of different make-up, films thinner than
    their features (see problems.py). Lengths in nm.
    """
    found = spread(stack)
    inputs = stack_inputs(found)
    cell = (stack.cell.x, stack.cell.y) if stack.cell else _NO_CELL
    draw = _Drawing(found.layers, cell)
    present = [present_layers(found, region) for region in stack.regions]
    risings = raised(present, inputs, cell, draw)
    names = [region.name for region in stack.regions]
    return ColumnMap(
        layers=draw.layers,
        features=inputs.features,
        materials=inputs.materials,
        inputs=inputs.inputs,
        cell=cell,
        regions=tuple(_region(name, rising, draw.layers) for name, rising in zip(names, risings, strict=True)),
        seams=tuple(seam for name, layers in zip(names, present, strict=True) for seam in seams(name, layers, cell)),
        scale_sd=stack.measured.scale.sd if stack.measured else 0.0,
    )


class _Drawing:
    """Draws each layer's features once for all regions."""

    def __init__(self, layers: Sequence[Layer], cell: tuple[float, float]) -> None:
        self.cell = cell
        self.layers = tuple(layer.name for layer in layers)
        self._reach = [
            sum(f.thickness.value * f.sidewall for f in layers[:k] if f.coverage == "conformal")
            for k in range(len(layers))
        ]
        self._drawn: dict[tuple[int, tuple[int, ...]], LayerPlan] = {}

    def __call__(self, present: PresentLayer) -> LayerPlan:
        """The layer in plan; where nothing fills it, its walls are right as far as films above can reach."""
        key = (present.index, present.features)
        if key not in self._drawn:
            reach = 0.0 if present.has_fill else self._reach[present.index]
            self._drawn[key] = layer_plan(present, self.cell, reach)
        return self._drawn[key]


@frozen
class _Found:
    """The columns of a region, largest first, with all that is known of their place."""

    columns: Sequence[Stacked]
    area: Array
    near: Neighbourhood
    plan: RegionPlan
    placeless: NDArray[np.bool_]


def _region(name: str, rising: Rising, layers: tuple[str, ...]) -> RegionColumns:
    survey_ = survey(joined([axis.curves() for axis in rising.axes]), rising.cell, rising.axes)
    spans = survey_.spans
    keys, combinations, which = keys_of(rising.axes, spans.middle, spans.y)
    area = np.bincount(which, spans.share, minlength=len(combinations))
    stacked = stacked_columns(rising, combinations)
    distinct: dict[object, int] = {}
    column = np.array([distinct.setdefault(s.signature, len(distinct)) for s in stacked])
    first = [int(np.argmax(column == c)) for c in range(len(distinct))]
    share = np.bincount(column, area)
    order = np.argsort(-share, kind="stable")
    rank = np.empty_like(order)
    rank[order] = np.arange(len(order))
    kept = [stacked[first[c]] for c in order]
    plan = RegionPlan(rising.cell, keys, rank[column])
    near = neighbourhood(plan, survey_.borders, spans, rank[column][which], len(kept))
    found = _Found(kept, share[order] / share.sum(), near, plan, np.zeros(len(kept), dtype=bool))
    if any(level.present.density is not None for level in rising.levels):
        found = _with_densities(found, rising)
    return _arrays(name, found, rising.inputs, layers)


def _with_densities(found: _Found, rising: Rising) -> _Found:
    from stackmill.columns.densities import split

    halves = split(found.columns, found.area, rising)
    without = np.zeros(len(found.columns), dtype=np.intp)
    without[halves.origin[~halves.placeless]] = np.flatnonzero(~halves.placeless)
    plan = RegionPlan(found.plan.cell, found.plan.keys, without[found.plan.column_of])
    return _Found(halves.columns, halves.area, halves.neighbourhood(found.near), plan, halves.placeless)


def _arrays(name: str, found: _Found, inputs: StackInputs, layers: tuple[str, ...]) -> RegionColumns:
    columns = found.columns
    counts = np.array([len(f.segments) for f in columns], dtype=np.intp)
    kinds = np.full((len(columns), counts.max(), 4), -1, dtype=np.intp)
    thick = np.zeros((len(columns), counts.max(), len(inputs.inputs)))
    for c, stacked in enumerate(columns):
        kinds[c, : counts[c]] = [segment.kind for segment in stacked.segments]
        thick[c, : counts[c]] = [segment.shares for segment in stacked.segments]
    top = np.stack([stacked.top for stacked in columns])
    floor = top[:, None] - np.cumsum(thick, axis=1)
    material, layer, feature, part = np.moveaxis(kinds, 2, 0)
    return RegionColumns(
        name=name,
        material=material,
        layer=layer,
        feature=feature,
        part=part,
        segments=counts,
        floor_nm=inputs.nm(floor),
        thickness_nm=inputs.nm(thick),
        top_nm=inputs.nm(top),
        area=found.area,
        dfloor_dthickness=inputs.of_inputs(floor),
        dthickness=inputs.of_inputs(thick),
        dtop_dthickness=inputs.of_inputs(top),
        slope=np.array([stacked.slopes[0].number if stacked.slopes else 0 for stacked in columns]),
        centre_nm=found.near.centre_nm,
        edge_distance_nm=found.near.edge_distance_nm,
        labels=labels([Labelled(tuple(s.kind for s in f.segments), f.slopes) for f in columns], inputs, layers),
        where=found.plan,
        placeless=found.placeless,
    )
