"""From a stack to its column map: every region's distinct columns, with areas, heights and derivatives."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import (
    FILL_ZONE,
    LayerPlan,
    Section,
    Zone,
    feature_section,
    fill_section,
    layer_plan,
)
from stackmill.columns.columns import ColumnMap, RegionColumns
from stackmill.columns.cover import Slopes
from stackmill.columns.curves import joined
from stackmill.columns.inputs import StackInputs, stack_inputs
from stackmill.columns.labels import Labelled, Slope, labels
from stackmill.columns.neighbours import Neighbourhood, neighbourhood
from stackmill.columns.plan import RegionPlan, keys_of
from stackmill.columns.regions import PresentLayer, present_layers
from stackmill.columns.rise import Level, Rising
from stackmill.columns.scan import survey
from stackmill.columns.seams import seams
from stackmill.documents.stack import Region, Stack
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Key = NDArray[np.int64]

_NO_CELL = (1000.0, 1000.0)  # a stack without features looks the same everywhere, whatever the cell
_THIN_NM = 1e-9
_FREE_STANDING_NM = 1e-6


@frozen
class Segment:
    """A segment of one column: numbers in the map's tables and its thickness shares (L,)."""

    material: int
    layer: int
    feature: int
    part: int
    shares: Array

    @property
    def kind(self) -> tuple[int, int, int, int]:
        """What tells columns apart."""
        return self.material, self.layer, self.feature, self.part


@frozen
class Stacked:
    """One distinct column: segments and classes of slope from the top down, and its top (L,)."""

    segments: tuple[Segment, ...]
    top: Array
    slopes: tuple[Slope, ...]

    @property
    def signature(self) -> object:
        """Columns that agree in this are one."""
        return tuple(s.kind for s in self.segments), self.slopes


def build(stack: Stack) -> ColumnMap:
    """Work out what lies under every point of a die.

    The stack must be sound: features inside the cell, no overlaps of different make-up, films thinner than
    their features (see problems.py). Lengths in nm.
    """
    inputs = stack_inputs(stack)
    cell = (stack.cell.x, stack.cell.y) if stack.cell else _NO_CELL
    draw = _Drawing(stack, cell)
    regions, closed = [], []
    for region in stack.regions:
        layers = present_layers(stack, region)
        regions.append(_region(region, layers, inputs, draw, len(stack.layers) - 1))
        closed += seams(region.name, layers, cell)
    return ColumnMap(
        layers=draw.layers,
        features=inputs.features,
        materials=inputs.materials,
        inputs=inputs.inputs,
        cell=cell,
        regions=tuple(regions),
        seams=tuple(closed),
    )


class _Drawing:
    """Draws each layer's features once for all regions."""

    def __init__(self, stack: Stack, cell: tuple[float, float]) -> None:
        self.cell = cell
        self.layers = tuple(layer.name for layer in stack.layers)
        self._reach = [
            sum(f.thickness.value * f.sidewall for f in stack.layers[:k] if f.coverage == "conformal")
            for k in range(len(stack.layers))
        ]
        self._drawn: dict[tuple[int, tuple[int, ...]], LayerPlan] = {}

    def __call__(self, present: PresentLayer) -> LayerPlan:
        """The layer in plan; where nothing fills it, its walls are right as far as films above can reach."""
        key = (present.index, present.features)
        if key not in self._drawn:
            reach = 0.0 if present.has_fill else self._reach[present.index]
            self._drawn[key] = layer_plan(present, self.cell, reach)
        return self._drawn[key]


def _region(
    region: Region, layers: Sequence[PresentLayer], inputs: StackInputs, draw: _Drawing, substrate: int
) -> RegionColumns:
    rising = Rising(inputs, draw.cell, draw)
    rising.build(layers, substrate)
    found = survey(joined([axis.curves() for axis in rising.axes]), rising.cell, rising.axes)
    spans = found.spans
    keys, combinations, which = keys_of(rising.axes, spans.middle, spans.y)
    area = np.bincount(which, spans.share, minlength=len(combinations))
    stacked = _stacked(rising, combinations)
    distinct: dict[object, int] = {}
    column = np.array([distinct.setdefault(s.signature, len(distinct)) for s in stacked])
    first = [int(np.argmax(column == c)) for c in range(len(distinct))]
    share = np.bincount(column, area)
    order = np.argsort(-share, kind="stable")
    rank = np.empty_like(order)
    rank[order] = np.arange(len(order))
    kept = [stacked[first[c]] for c in order]
    plan = RegionPlan(draw.cell, keys, rank[column])
    near = neighbourhood(plan, found.borders, spans, rank[column][which], len(kept))
    names = labels([Labelled(tuple(s.kind for s in f.segments), f.slopes) for f in kept], inputs, draw.layers)
    return _arrays(region.name, kept, inputs, area=share[order] / share.sum(), near=near, names=names, plan=plan)


def _stacked(rising: Rising, combinations: Key) -> list[Stacked]:
    """The column under each combination of states."""
    tops = rising.tops(combinations)
    floors = [_floor_below(rising), *tops[:-1]]
    high = [t - f for t, f in zip(tops, floors, strict=True)]
    thick = [rising.inputs.nm(h) for h in high]
    sections = [_sections(level, rising) for level in rising.levels]
    found = []
    for row, states in enumerate(combinations.tolist()):
        segments: list[Segment] = []
        for n in reversed(range(len(rising.levels))):
            level = rising.levels[n]
            if thick[n][row] > _THIN_NM:
                section = sections[n][states[level.plan] if level.plan is not None else 0]
                segments += _placed(section, level.present.index, high[n][row], rising.inputs)
        found.append(Stacked(tuple(segments), tops[-1][row], _classes(rising, states)))
    return found


def _floor_below(rising: Rising) -> Array:
    """Where the lowest layer begins (1, L): under the substrate's top by its thickness."""
    lowest = rising.levels[0]
    below = np.zeros((1, len(rising.inputs.inputs)))
    if lowest.top is not None and not lowest.top.any():
        below -= rising.inputs.share_of(rising.inputs.layer[lowest.present.index])
    return below


def _sections(level: Level, rising: Rising) -> list[Section | None]:
    """What a layer has in each of its zones."""
    present, inputs = level.present, rising.inputs
    if level.plan is None:
        if not present.features:
            return [fill_section(present, inputs)]
        feature = present.features[0]
        inside = Zone(feature, len(present.layer.features[feature].liner))
        return [feature_section(present, inside, inputs)]
    axis = rising.axes[level.plan]
    assert isinstance(axis, LayerPlan)
    fill = fill_section(present, inputs) if present.has_fill else None
    return [fill, *(feature_section(present, zone, inputs) for zone in axis.zones if zone != FILL_ZONE)]


def _placed(section: Section | None, layer: int, high: Array, inputs: StackInputs) -> list[Segment]:
    assert section is not None
    segments = []
    for k, cut in enumerate(section.cuts):
        shares = cut.shares + high if k == section.stretch else cut.shares
        thick = float(shares @ inputs.thickness_nm)
        if thick < -_FREE_STANDING_NM:
            name = inputs.features[cut.feature]
            raise ValueError(f"the films of {name[1]!r} are thicker than the layer it is in")
        if thick > _THIN_NM:
            segments.append(Segment(cut.material, layer, cut.feature, cut.part, shares))
    return segments


def _classes(rising: Rising, states: Sequence[int]) -> tuple[Slope, ...]:
    """The classes of slope in a combination of states, from the top down."""
    found = []
    for axis, state in zip(rising.axes, states, strict=True):
        if isinstance(axis, Slopes):
            number, source = axis.slope_of(state)
            if number:
                found.append(Slope(axis.layers[-1], number, axis.sources[source].name))
    return tuple(reversed(found))


def _arrays(
    name: str,
    found: Sequence[Stacked],
    inputs: StackInputs,
    *,
    area: Array,
    near: Neighbourhood,
    names: tuple[str, ...],
    plan: RegionPlan,
) -> RegionColumns:
    counts = np.array([len(f.segments) for f in found], dtype=np.intp)
    kinds = np.full((len(found), counts.max(), 4), -1, dtype=np.intp)
    thick = np.zeros((len(found), counts.max(), len(inputs.inputs)))
    for c, stacked in enumerate(found):
        kinds[c, : counts[c]] = [segment.kind for segment in stacked.segments]
        thick[c, : counts[c]] = [segment.shares for segment in stacked.segments]
    top = np.stack([stacked.top for stacked in found])
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
        area=area,
        dfloor_dthickness=floor,
        dthickness=thick,
        dtop_dthickness=top,
        slope=np.array([stacked.slopes[0].number if stacked.slopes else 0 for stacked in found]),
        centre_nm=near.centre_nm,
        edge_distance_nm=near.edge_distance_nm,
        labels=names,
        where=plan,
    )
