"""A region built up from the substrate, layer by layer: what decides where each layer's top lies."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import LayerPlan
from stackmill.columns.cover import Slopes, Source, slopes
from stackmill.columns.curves import joined
from stackmill.columns.inputs import StackInputs
from stackmill.columns.outlines import Outline, Overlap, outline
from stackmill.columns.plan import Axis
from stackmill.columns.regions import PresentLayer
from stackmill.columns.scan import survey
from stackmill.errors import InputError

Array = NDArray[np.float64]
Key = NDArray[np.int64]
Draw = Callable[[PresentLayer], LayerPlan]


class OnSlopeError(InputError):
    """A feature of a layer without fill lies on the slope of a conformal layer: layer, feature."""

    def __init__(self, layer: str, feature: str) -> None:
        super().__init__(
            f"{feature!r} in {layer!r}, which has no fill, lies on the slope of a conformal layer",
            cure="give that layer a fill, or make the layer below it planarised",
        )
        self.layer = layer
        self.feature = feature


@dataclass
class Level:
    """One layer and how its top lies.

    plan: the number of the axis that tells its zones (None: the same everywhere). Its top is either level, at
    `top` (L,); or that of the slopes on axis `slopes`, as their `film`-th layer; or else its own thickness
    above what is below, in features only if `only_features`.
    """

    present: PresentLayer
    plan: int | None = None
    top: Array | None = None
    slopes: int | None = None
    film: int = 0
    only_features: bool = False


@dataclass
class Rising:
    """A region while it is built up. axes: what tells combinations apart; levels: from the substrate up."""

    inputs: StackInputs
    cell: tuple[float, float]
    draw: Draw
    axes: list[Axis] = field(default_factory=list)
    levels: list[Level] = field(default_factory=list)
    sources: list[Source] = field(default_factory=list)
    films: list[Level] = field(default_factory=list)

    def begin(self, substrate: PresentLayer) -> None:
        """Lay down the substrate."""
        self.sources = [Source("ground", None, np.zeros(len(self.inputs.inputs)))]
        self.levels.append(Level(substrate, top=self.sources[0].height))

    def lay(self, present: PresentLayer, highest: Array) -> None:
        """Lay down one more layer; a planarised one ends its thickness above `highest` (L,)."""
        if present.layer.coverage == "conformal":
            self._conformal(present)
        elif present.has_fill:
            self._planarised(present, highest)
        else:
            self._unfilled(present)

    def finish(self) -> None:
        """Say that no layer follows."""
        self._finish_films()

    def highest(self) -> Array:
        """The highest point there is so far (L,)."""
        return higher(self.inputs, [source.flat() for source in self.sources])

    def _conformal(self, present: PresentLayer) -> None:
        number = self.inputs.layer[present.index]
        thickness, sidewall = present.layer.thickness.value, present.layer.sidewall
        self.sources = [source.covered(number, thickness, sidewall) for source in self.sources]
        self.films.append(Level(present))
        self.levels.append(self.films[-1])

    def _planarised(self, present: PresentLayer, highest: Array) -> None:
        self._finish_films()
        top = highest + self._thickness(present)
        self.levels.append(Level(present, plan=self._zones(present), top=top))
        self.sources = [Source("ground", None, top)]

    def _unfilled(self, present: PresentLayer) -> None:
        self._finish_films()
        thickness = self._thickness(present)
        if present.solid:
            self.levels.append(Level(present))
            self.sources = [source.raised(thickness) for source in self.sources]
            return
        plan = self.draw(present)
        self._refuse_on_slopes(present, plan)
        self.axes.append(plan)
        self.levels.append(Level(present, plan=len(self.axes) - 1, only_features=True))
        self.sources += [
            Source(_name(present, source), area, source.flat() + thickness)
            for source in self.sources
            for area in self._on_top(plan, source)
        ]

    def _refuse_on_slopes(self, present: PresentLayer, plan: LayerPlan) -> None:
        """Features are held to have flat tops; where they climb a slope they would not."""
        below = self.axes[-1] if self.axes else None
        if len(self.sources) == 1 or not isinstance(below, Slopes):
            return
        spans = survey(joined([below.curves(), plan.curves()]), self.cell, [below, plan]).spans
        sloped = np.array([below.slope_of(state)[0] > 0 for state in range(below.states)])
        climbs = sloped[below.state(spans.middle, spans.y)] & (plan.state(spans.middle, spans.y) > 0)
        if climbs.any():
            zone = plan.zones[int(plan.state(spans.middle, spans.y)[np.argmax(climbs)])]
            assert zone.feature is not None
            raise OnSlopeError(present.layer.name, present.layer.features[zone.feature].name)

    def _on_top(self, plan: LayerPlan, source: Source) -> list[Outline]:
        """The parts of a source's area that features lie on."""
        features = plan.outline
        if source.outline is None:
            return [features]
        inside = Overlap((features.inside, source.outline.inside))
        reach = -features.window[0]
        both = outline([features.walls, source.outline.walls], inside, self.cell, reach)
        return [both] if len(both.walls) or bool(inside(np.zeros(1), np.zeros(1))[0]) else []

    def _zones(self, present: PresentLayer) -> int | None:
        if not present.features or present.solid:
            return None
        self.axes.append(self.draw(present))
        return len(self.axes) - 1

    def _finish_films(self) -> None:
        """Cut the slopes of the conformal layers laid down since the last other layer."""
        if self.films and len(self.sources) > 1:
            layers = [level.present.index for level in self.films]
            self.axes.append(slopes(self.sources, layers, self.inputs, self.cell))
            for k, level in enumerate(self.films):
                level.slopes, level.film = len(self.axes) - 1, k
        self.films = []

    def _thickness(self, present: PresentLayer) -> Array:
        return self.inputs.share_of(self.inputs.layer[present.index])

    def tops(self, combinations: Key) -> list[Array]:
        """The top (K, L) of every level in combinations (K, axes) of states, as shares of the inputs."""
        tops: list[Array] = []
        below = np.zeros((len(combinations), len(self.inputs.inputs)))
        for level in self.levels:
            below = self._top(level, combinations, below)
            tops.append(below)
        return tops

    def _top(self, level: Level, combinations: Key, below: Array) -> Array:
        if level.top is not None:
            return np.broadcast_to(level.top, below.shape)
        if level.slopes is not None:
            axis = self.axes[level.slopes]
            assert isinstance(axis, Slopes)
            tops: Array = axis.heights[combinations[:, level.slopes], level.film]
            return tops
        raised = below + self._thickness(level.present)
        if level.only_features:
            assert level.plan is not None
            return np.where(combinations[:, level.plan, None] > 0, raised, below)
        return raised


def raised(
    regions: Sequence[Sequence[PresentLayer]], inputs: StackInputs, cell: tuple[float, float], draw: Draw
) -> list[Rising]:
    """All regions (layers from the substrate up) built up side by side: some layers are level over the whole die."""
    risings = [Rising(inputs, cell, draw) for _ in regions]
    for rising, layers in zip(risings, regions, strict=True):
        rising.begin(layers[0])
    stacks = [{present.index: present for present in layers} for layers in regions]
    for index in reversed(range(regions[0][0].index)):
        peaks = [rising.highest() for rising in risings]
        for rising, peak, present in zip(risings, peaks, stacks, strict=True):
            if index in present:
                die = present[index].layer.level == "die"
                rising.lay(present[index], higher(inputs, peaks) if die else peak)
    for rising in risings:
        rising.finish()
    return risings


def higher(inputs: StackInputs, heights: Sequence[Array]) -> Array:
    """The highest at best values of some heights (L,)."""
    return max(heights, key=lambda height: float(inputs.nm(height)))


def _name(present: PresentLayer, below: Source) -> str:
    """What slopes from these features are called."""
    names = [present.layer.features[k].name for k in present.features]
    own = names[0] if len(names) == 1 else present.layer.name
    return own if below.outline is None else f"{own} on {below.name}"
