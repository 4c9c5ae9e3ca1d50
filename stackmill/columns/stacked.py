"""One distinct column: its segments from the top down, layer after layer, with each height as shares of inputs."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import FILL_ZONE, LayerPlan, Section, Zone, feature_section, fill_section
from stackmill.columns.cover import Slopes
from stackmill.columns.inputs import StackInputs
from stackmill.columns.labels import Slope
from stackmill.columns.rise import Level, Rising
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Key = NDArray[np.int64]

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


def stacked_columns(rising: Rising, combinations: Key) -> list[Stacked]:
    """The column under each combination of states (K, axes)."""
    tops = rising.tops(combinations)
    floors = [_floor_below(rising), *tops[:-1]]
    high = [t - f for t, f in zip(tops, floors, strict=True)]
    thick = [rising.inputs.nm(h) for h in high]
    sections = [_sections(level, rising) for level in rising.levels]
    found = []
    for row, states in enumerate(combinations.tolist()):
        segments: list[Segment] = []
        n = len(rising.levels) - 1
        while n >= 0:
            lowest, section = n, _section(n, rising, sections, states)
            if section is not None and section.passes:
                lowest = _lowest(n, section, rising, sections, states)
            if lowest < n:
                whole = [(rising.levels[k].present.index, high[k][row]) for k in range(n, lowest - 1, -1)]
                segments += _passing(section, whole, rising.inputs)
            elif thick[n][row] > _THIN_NM:
                segments += placed(section, rising.levels[n].present.index, high[n][row], rising.inputs)
            n = lowest - 1
        found.append(Stacked(tuple(segments), tops[-1][row], _classes(rising, states)))
    return found


def _floor_below(rising: Rising) -> Array:
    """Where the lowest layer begins (1, L): under the substrate's top by its thickness."""
    lowest = rising.levels[0]
    below = np.zeros((1, len(rising.inputs.inputs)))
    if lowest.top is not None and not lowest.top.any():
        below -= rising.inputs.share_of(rising.inputs.layer[lowest.present.index])
    return below


Sections = Sequence[Sequence[Section | None]]


def _section(n: int, rising: Rising, sections: Sections, states: Sequence[int]) -> Section | None:
    plan = rising.levels[n].plan
    return sections[n][states[plan] if plan is not None else 0]


def _lowest(n: int, section: Section, rising: Rising, sections: Sections, states: Sequence[int]) -> int:
    """The lowest level down to which the feature of a section goes on."""
    while n > 0:
        below = _section(n - 1, rising, sections, states)
        if below is None or below.feature != section.feature:
            return n
        n -= 1
    return n


def _sections(level: Level, rising: Rising) -> list[Section | None]:
    """What a layer has in each of its zones."""
    present, inputs = level.present, rising.inputs
    if level.plan is None:
        if not present.features:
            return [fill_section(present, inputs)]
        feature = present.features[0]
        return [feature_section(present, inside(level, feature), inputs)]
    axis = rising.axes[level.plan]
    assert isinstance(axis, LayerPlan)
    fill = fill_section(present, inputs) if present.has_fill else None
    return [fill, *(feature_section(present, zone, inputs) for zone in axis.zones if zone != FILL_ZONE)]


def inside(level: Level, feature: int) -> Zone:
    """Within all liners of a layer's feature."""
    return Zone(feature, len(level.present.layer.features[feature].liner))


def placed(section: Section | None, layer: int, high: Array, inputs: StackInputs) -> list[Segment]:
    """A section in a layer of some height (L,)."""
    assert section is not None
    segments = []
    for k, cut in enumerate(section.cuts):
        shares = cut.shares + high if k == section.stretch else cut.shares
        thick = float(inputs.nm(shares))
        if thick < -_FREE_STANDING_NM:
            name = inputs.features[cut.feature]
            raise ValueError(f"the films of {name[1]!r} are thicker than the layer it is in")
        if thick > _THIN_NM:
            segments.append(Segment(cut.material, layer, cut.feature, cut.part, shares))
    return segments


def _passing(section: Section | None, layers: Sequence[tuple[int, Array]], inputs: StackInputs) -> list[Segment]:
    """A section carved once over several layers (number and height (L,), from the top), parted where they meet."""
    whole = placed(section, layers[0][0], np.sum([high for _, high in layers], axis=0), inputs)
    pieces, ends = [], np.cumsum([high for _, high in layers], axis=0)
    done, k = np.zeros(len(inputs.inputs)), 0
    for segment in whole:
        floor = done + segment.shares
        while k < len(layers) - 1 and float(inputs.nm(floor - ends[k])) > _THIN_NM:
            if float(inputs.nm(ends[k] - done)) > _THIN_NM:
                pieces.append(Segment(segment.material, layers[k][0], segment.feature, segment.part, ends[k] - done))
                done = ends[k]
            k += 1
        if float(inputs.nm(floor - done)) > _THIN_NM:
            pieces.append(Segment(segment.material, layers[k][0], segment.feature, segment.part, floor - done))
            done = floor
    return pieces


def _classes(rising: Rising, states: Sequence[int]) -> tuple[Slope, ...]:
    """The classes of slope in a combination of states, from the top down."""
    found = []
    for axis, state in zip(rising.axes, states, strict=True):
        if isinstance(axis, Slopes):
            number, source = axis.slope_of(state)
            if number:
                found.append(Slope(axis.layers[-1], number, axis.sources[source].name))
    return tuple(reversed(found))
