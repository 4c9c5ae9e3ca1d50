"""Where the surface lies while a die is built up: plateaus, conformal films over them, and their slopes.

The surface is the highest of a few sources: a source is an area of the plan with a flat top at some height,
and the conformal films laid over it since, which lean out from its walls. The ground is a source too.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import field, replace

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.curves import Curves, joined
from stackmill.columns.films import Films
from stackmill.columns.inputs import StackInputs
from stackmill.columns.outlines import Outline
from stackmill.columns.scan import Spans, survey
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Key = NDArray[np.int64]

CLASSES = 8
STATES = CLASSES + 1  # of each source: its flat top, and the classes of the slope from it
_SHELLS = 16
_SHELL_NODES = 6
_HIGHER_NM = 1e-9


@frozen
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

    def distance(self, x: Array, y: Array) -> Array:
        """From points to the area (same shape)."""
        return np.zeros(x.shape) if self.outline is None else self.outline.distance(x, y)

    def raised(self, shares: Array) -> Source:
        """The same, higher."""
        return replace(self, height=self.height + shares)

    def covered(self, number: int, thickness_nm: float, sidewall: float) -> Source:
        """The same under one more conformal film."""
        return replace(self, films=self.films.then(number, thickness_nm, sidewall))


@frozen
class Highest:
    """What makes the surface at points: the number of the source, how far (nm) it is, and the one under foot.

    The last is the highest whose own area the point lies in: the surface is flat where it is the first too.
    """

    owner: Key
    distance: Array
    under: Key

    def pair(self, sources: int) -> Key:
        """One number for owner and under."""
        return self.owner * sources + self.under


@frozen
class Slopes:
    """The surface over its sources after some conformal layers, cut into flat tops and classes of slope.

    A slope leads from one source's top to another's. A state is 9 times the number of the pair (from times the
    number of sources, plus to), plus 0 on a flat top or 1..8 for the class, from the wall down. layers: the
    conformal layers since the last other layer; bounds[pair] (9,): distances from the wall that part its
    classes; feet[source]: where its slopes end; heights (states, layers, L): mean height of each layer's top.
    """

    sources: tuple[Source, ...]
    layers: tuple[int, ...]
    bounds: tuple[Array, ...]
    feet: tuple[tuple[float, ...], ...]
    heights: Array
    inputs: StackInputs = field(repr=False)

    def state(self, x: Array, y: Array) -> Key:
        """The state at points of the cell (any shape)."""
        return _states(self.sources, self.inputs, self.bounds, x, y)

    def above_mean_nm(self, x: Array, y: Array) -> Array:
        """How much higher (layers, N) each layer's top is at points (N,) than on average over its class, in nm.

        The classes stand for their slopes in all sums; a surface that moves needs the slopes themselves.
        """
        state = self.state(x, y)
        above = np.zeros((len(self.layers), len(x)))
        sloped = np.flatnonzero(state % STATES > 0)
        for k in range(len(self.layers) if sloped.size else 0):
            exact = _surface_shares(self, k, x[sloped], y[sloped])
            above[k, sloped] = self.inputs.nm(exact - self.heights[state[sloped], k])
        return above

    @property
    def states(self) -> int:
        """How many states there can be."""
        return len(self.bounds) * STATES

    @property
    def competing(self) -> bool:
        """Whether slopes of two sources meet on curves that are neither straight nor round."""
        return len(self.sources) > 2

    def curves(self) -> Curves:
        """Where the state changes, but for where two sources' slopes meet."""
        return _curves(self.sources, self.bounds, self.feet)

    def slope_of(self, state: int) -> tuple[int, int]:
        """The class (0 for flat) of a state, and the source that makes it."""
        return state % STATES, state // STATES // len(self.sources)


def highest(sources: Sequence[Source], inputs: StackInputs, x: Array, y: Array) -> Highest:
    """What makes the surface at points (any shape)."""
    flat = [float(inputs.nm(source.flat())) for source in sources]
    owner, under = np.zeros(x.shape, dtype=np.int64), np.zeros(x.shape, dtype=np.int64)
    distance, top, ground = np.zeros(x.shape), np.full(x.shape, flat[0]), np.full(x.shape, flat[0])
    for number, source in enumerate(sources[1:], 1):
        away = source.distance(x, y)
        height = float(inputs.nm(source.height)) + _over(source, away)
        wins = height > top + _HIGHER_NM
        owner[wins], distance[wins], top[wins] = number, away[wins], height[wins]
        here = (away <= 0.0) & (flat[number] > ground + _HIGHER_NM)
        under[here], ground[here] = number, flat[number]
    return Highest(owner, distance, under)


def _over(source: Source, away: Array) -> Array:
    if source.films.inputs:
        return source.films.height(away)
    return np.where(away > 0.0, -np.inf, 0.0)


def _states(sources: Sequence[Source], inputs: StackInputs, bounds: Sequence[Array], x: Array, y: Array) -> Key:
    """9 (or one less than there are bounds, plus 1) states for each pair of sources, at points (any shape)."""
    found = highest(sources, inputs, x, y)
    pair, classes = found.pair(len(sources)), len(bounds[0]) - 1
    state = pair * (classes + 1)
    sloped = found.distance > 0.0
    for number in np.unique(pair[sloped], return_index=True)[0]:
        here = sloped & (pair == number)
        state[here] += np.clip(np.searchsorted(bounds[number], found.distance[here]), 1, classes)
    return state


def slopes(sources: Sequence[Source], layers: Sequence[int], inputs: StackInputs, cell: tuple[float, float]) -> Slopes:
    """Cut a surface into flat tops and 8 classes of equal area on every slope."""
    found = tuple(sources)
    feet = tuple(_feet(source, found, inputs) for source in found)
    bounds = _class_bounds(found, feet, inputs, cell)
    before = [len(s.films.inputs) - len(layers) + 1 for s in found]
    flat = np.stack([[s.flat(n + k) for k in range(len(layers))] for s, n in zip(found, before, strict=True)])
    heights = np.repeat(flat, len(found) * STATES, axis=0)
    made = Slopes(found, tuple(layers), bounds, feet, heights, inputs)
    spans = survey(made.curves(), cell, [made]).spans
    return replace(made, heights=_mean_heights(made, spans))


def _curves(sources: Sequence[Source], bounds: Sequence[Array], feet: Sequence[tuple[float, ...]]) -> Curves:
    parts = []
    for number, source in enumerate(sources):
        if source.outline is not None:
            own = bounds[number * len(sources) : (number + 1) * len(sources)]
            distances = {round(d, 9) for d in (*np.concatenate(own).tolist(), *feet[number]) if d > 0.0}
            parts += [source.outline.walls, *(source.outline.offset(d) for d in sorted(distances))]
    return joined(parts)


def _feet(source: Source, sources: Sequence[Source], inputs: StackInputs) -> tuple[float, ...]:
    """Distances at which a source's slope ends on the flat tops over each other one."""
    if source.outline is None or not source.films.inputs:
        return tuple(0.0 for _ in sources)
    over = [float(inputs.nm(other.flat() - source.height)) for other in sources]
    return tuple(source.films.reach_nm if h <= 0.0 else source.films.distance_at(h) for h in over)


@frozen
class _Shells:
    """Slopes cut into many thin shells."""

    sources: Sequence[Source]
    inputs: StackInputs
    bounds: Sequence[Array]
    competing: bool = False

    def state(self, x: Array, y: Array) -> Key:
        """The pair of sources and the shell, at points (any shape)."""
        return _states(self.sources, self.inputs, self.bounds, x, y)


def _class_bounds(
    sources: Sequence[Source],
    feet: Sequence[tuple[float, ...]],
    inputs: StackInputs,
    cell: tuple[float, float],
) -> tuple[Array, ...]:
    """For each pair of sources the distances (9,) between which the slope has equal areas."""
    shells = [np.linspace(0.0, foot, _SHELLS + 1) for of_source in feet for foot in of_source]
    spans = survey(_curves(sources, shells, feet), cell, [_Shells(sources, inputs, shells)], _SHELL_NODES).spans
    state = _states(sources, inputs, shells, spans.middle, spans.y)
    area = np.bincount(state, spans.share, minlength=len(shells) * (_SHELLS + 1))
    bounds = []
    for shell, of_pair in zip(shells, area.reshape(len(shells), _SHELLS + 1)[:, 1:], strict=True):
        grown = np.concatenate([[0.0], np.cumsum(of_pair)])
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
    later = len(made.layers) - 1 - k
    sources = [replace(s, films=s.films.first(len(s.films.inputs) - later)) for s in made.sources]
    found = highest(sources, made.inputs, x, y)
    shares = np.zeros((len(x), len(made.inputs.inputs)))
    for number, source in enumerate(sources):
        here = np.flatnonzero(found.owner == number)
        if here.size:
            shares[here] = source.height
            of_films = source.films.shares(found.distance[here])
            for column, film in enumerate(source.films.inputs):
                shares[here, film] += of_films[:, column]
    return shares
