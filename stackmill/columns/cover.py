"""Where the surface lies while a die is built up: plateaus, conformal films over them, and their slopes.

The surface is the highest of a few sources: a source is an area of the plan with a flat top at some height,
and the conformal films laid over it since, which lean out from its walls. The ground is a source too.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import Curves, joined
from stackmill.columns.films import Films
from stackmill.columns.inputs import StackInputs
from stackmill.columns.outlines import Outline
from stackmill.columns.scan import Spans, survey

Array = NDArray[np.float64]
Key = NDArray[np.int64]

CLASSES = 8
STATES = CLASSES + 1  # of each source: its flat top, and the classes of the slope from it
_SHELLS = 16
_SHELL_NODES = 4
_HIGHER_NM = 1e-9


@dataclass(frozen=True)
class Source:
    """A flat top: name; outline (None: all of the plan); height (L,) as shares of the inputs; films."""

    name: str
    outline: Outline | None
    height: Array
    films: Films = field(default_factory=Films)

    def flat(self, films: int | None = None) -> Array:
        """Height (L,) of the top over the first `films` films, or all."""
        top = self.height.copy()
        top[list(self.films.inputs[:films])] += 1.0
        return top

    def first_films(self, count: int) -> Films:
        """The first few of its films."""
        films = self.films
        return Films(films.inputs[:count], films.thickness_nm[:count], films.sidewall[:count])

    def distance(self, x: Array, y: Array) -> Array:
        """From points to the area (same shape)."""
        return np.zeros(x.shape) if self.outline is None else self.outline.distance(x, y)

    def raised(self, shares: Array) -> Source:
        """The same, higher."""
        return replace(self, height=self.height + shares)

    def covered(self, number: int, thickness_nm: float, sidewall: float) -> Source:
        """The same under one more conformal film."""
        return replace(self, films=self.films.then(number, thickness_nm, sidewall))


@dataclass(frozen=True)
class Slopes:
    """The surface over its sources after some conformal layers, cut into flat tops and classes of slope.

    A state is 9 times the number of the source that makes the surface there, plus 0 on its flat top or 1..8
    for the class, from the wall down. layers: the conformal layers since the last flat ground or feature;
    bounds[source] (9,): distances that part its classes; heights (states, layers, L): mean height of each
    layer's top in each state.
    """

    sources: tuple[Source, ...]
    layers: tuple[int, ...]
    bounds: tuple[Array, ...]
    edges: tuple[tuple[float, ...], ...]
    heights: Array
    inputs: StackInputs = field(repr=False)

    def state(self, x: Array, y: Array) -> Key:
        """The state at points of the cell (same shape)."""
        owner, distance = highest(self.sources, self.inputs, x, y)
        state = owner * STATES
        for number, bounds in enumerate(self.bounds):
            here = (owner == number) & (distance > 0.0)
            state[here] += np.clip(np.searchsorted(bounds, distance[here]), 1, CLASSES)
        return state

    @property
    def states(self) -> int:
        """How many states there can be."""
        return len(self.sources) * STATES

    @property
    def competing(self) -> bool:
        """Whether slopes of two sources meet on curves that are neither straight nor round."""
        return len(self.sources) > 2

    def curves(self) -> Curves:
        """Where the state changes, but for where two sources' slopes meet."""
        return _curves(self.sources, self.edges)


def highest(sources: Sequence[Source], inputs: StackInputs, x: Array, y: Array) -> tuple[Key, Array]:
    """Which source makes the surface at points, and how far it is: both as the points are shaped."""
    owner = np.zeros(x.shape, dtype=np.int64)
    distance = np.zeros(x.shape)
    top = np.full(x.shape, float(inputs.nm(sources[0].flat())))
    for number, source in enumerate(sources[1:], 1):
        away = source.distance(x, y)
        height = float(inputs.nm(source.height)) + _over(source, away)
        wins = height > top + _HIGHER_NM
        owner[wins], distance[wins], top[wins] = number, away[wins], height[wins]
    return owner, distance


def _over(source: Source, away: Array) -> Array:
    if source.films.inputs:
        return source.films.height(away)
    return np.where(away > 0.0, -np.inf, 0.0)


def slopes(
    sources: Sequence[Source], layers: Sequence[int], inputs: StackInputs, cell: tuple[float, float]
) -> Slopes:
    """Cut a surface into flat tops and 8 classes of equal area on every source's slope."""
    found = tuple(sources)
    bounds = _class_bounds(found, inputs, cell)
    edges = tuple(
        tuple(sorted({*b[1:].tolist(), *_feet(found, k, len(layers), inputs)})) for k, b in enumerate(bounds)
    )
    flat = np.stack(
        [[s.flat(len(s.films.inputs) - len(layers) + 1 + k) for k in range(len(layers))] for s in found]
    )
    heights = np.repeat(flat, STATES, axis=0)
    made = Slopes(found, tuple(layers), bounds, edges, heights, inputs)
    found = survey(made.curves(), cell, [made])
    return replace(made, heights=_mean_heights(made, found.spans))


def _curves(sources: Sequence[Source], edges: Sequence[Sequence[float]]) -> Curves:
    parts = []
    for source, distances in zip(sources, edges, strict=True):
        if source.outline is not None:
            parts += [source.outline.walls, *(source.outline.offset(d) for d in distances if d > 0.0)]
    return joined(parts)


def _outermost(source: Source, ground: Source, inputs: StackInputs) -> float:
    """How far a slope can stretch before it meets the top of the films on the ground."""
    if source.outline is None or not source.films.inputs:
        return 0.0
    lowest = float(inputs.nm(ground.flat() - source.height))
    return source.films.reach_nm if lowest <= 0.0 else source.films.distance_at(lowest)


def _feet(sources: Sequence[Source], number: int, layers: int, inputs: StackInputs) -> list[float]:
    """Distances at which a source's slope meets the flat top over another, for each of the layers."""
    source, feet = sources[number], []
    if source.outline is None:
        return []
    for k in range(layers):
        films = source.first_films(len(source.films.inputs) - layers + 1 + k)
        for other in sources:
            flat = other.flat(len(other.films.inputs) - layers + 1 + k)
            over = float(inputs.nm(flat - source.height))
            feet.append(films.reach_nm if over <= 0.0 else films.distance_at(over))
    return feet


@dataclass(frozen=True)
class _Shells:
    """Which source makes the surface, and between which of its distances."""

    sources: Sequence[Source]
    inputs: StackInputs
    distances: tuple[Array, ...]
    competing: bool = False

    def state(self, x: Array, y: Array) -> Key:
        """The number of the source and of the distances passed, at points (any shape)."""
        owner, distance = highest(self.sources, self.inputs, x, y)
        state = owner * (_SHELLS + 2)
        for number, distances in enumerate(self.distances):
            here = owner == number
            state[here] += np.searchsorted(distances, distance[here])
        return state


def _class_bounds(
    sources: Sequence[Source], inputs: StackInputs, cell: tuple[float, float]
) -> tuple[Array, ...]:
    """Distances (9,) from each source between which its slope has equal areas."""
    shells = [np.linspace(0.0, _outermost(s, sources[0], inputs), _SHELLS + 1) for s in sources]
    curves = _curves(sources, [shell[1:].tolist() for shell in shells])
    spans = survey(curves, cell, [_Shells(sources, inputs, tuple(shells))], _SHELL_NODES).spans
    owner, distance = highest(sources, inputs, spans.middle, spans.y)
    bounds = []
    for number, shell in enumerate(shells):
        here = (owner == number) & (distance > 0.0)
        area = (
            np.histogram(distance[here], bins=shell, weights=spans.share[here])[0]
            if shell[-1]
            else np.zeros(1)
        )
        grown = np.concatenate([[0.0], np.cumsum(area)])
        even = np.linspace(0.0, grown[-1], CLASSES + 1)
        bounds.append(np.interp(even, grown, shell) if grown[-1] > 0.0 else np.zeros(CLASSES + 1))
    return tuple(bounds)


def _mean_heights(made: Slopes, spans: Spans) -> Array:
    """Mean heights (states, layers, L) over each class of slope, film by film; flat tops as they are."""
    heights = made.heights.copy()
    state = made.state(spans.middle, spans.y)
    sloped = state % STATES > 0
    if not sloped.any():
        return heights
    x, y, share = spans.of(sloped).points()
    codes, which = np.unique(np.repeat(state[sloped], x.shape[1]), return_inverse=True)
    area = np.bincount(which, share.ravel())
    for k in range(len(made.layers)):
        shares = _surface_shares(made, k, x.ravel(), y.ravel())
        for column in np.flatnonzero(shares.any(axis=0)):
            heights[codes, k, column] = np.bincount(which, share.ravel() * shares[:, column]) / area
        unused = np.flatnonzero(~shares.any(axis=0))
        heights[codes[:, None], k, unused] = 0.0
    return heights


def _surface_shares(made: Slopes, k: int, x: Array, y: Array) -> Array:
    """The top (N, L) of the made slopes' k-th layer at points (N,), as shares of the inputs."""
    under = [
        replace(s, films=s.first_films(len(s.films.inputs) - len(made.layers) + 1 + k)) for s in made.sources
    ]
    owner, distance = highest(under, made.inputs, x, y)
    shares = np.zeros((len(x), len(made.inputs.inputs)))
    for number, source in enumerate(under):
        here = np.flatnonzero(owner == number)
        if here.size:
            shares[here] = source.height
            of_films = source.films.shares(distance[here])
            for column, film in enumerate(source.films.inputs):
                shares[here, film] += of_films[:, column]
    return shares
