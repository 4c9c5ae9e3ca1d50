"""From a point of the plan to its column, by what each layer and each slope has there."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.carving import LayerPlan
from stackmill.columns.cover import Slopes
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Key = NDArray[np.int64]

Axis = LayerPlan | Slopes
_LARGEST_KEY = 2**50


@frozen
class Keys:
    """One number for each combination of the axes' states.

    known: for each axis, the numbers met so far, where their list was cut down to keep numbers small.
    """

    axes: tuple[Axis, ...]
    known: tuple[Key | None, ...]

    def at(self, x: Array, y: Array) -> Key:
        """The number at points (N,) of the cell."""
        key = np.zeros(x.shape, dtype=np.int64)
        for axis, known in zip(self.axes, self.known, strict=True):
            key = key * axis.states + axis.state(x, y)
            if known is not None:
                key = np.clip(np.searchsorted(known, key), 0, len(known) - 1)
        return key


def keys_of(axes: Sequence[Axis], x: Array, y: Array) -> tuple[Keys, Key, Key]:
    """How to number combinations, the combinations (K, axes) there are, and each point's (N,) among them."""
    key = np.zeros(x.shape, dtype=np.int64)
    known: list[Key | None] = []
    states, size = [], 1
    for axis in axes:
        states.append(axis.state(x, y))
        key, size = key * axis.states + states[-1], size * axis.states
        if size > _LARGEST_KEY or axis is axes[-1]:
            met, key = np.unique(key, return_inverse=True)
            known.append(met)
            size = len(met)
        else:
            known.append(None)
    first = np.unique(key, return_index=True)[1]
    combinations = np.stack([s[first] for s in states], axis=1) if states else np.zeros((1, 0), dtype=np.int64)
    return Keys(tuple(axes), tuple(known)), combinations, key


@frozen
class RegionPlan:
    """The plan of one region. column_of (K,): the column of each combination that `keys` numbers."""

    cell: tuple[float, float]
    keys: Keys
    column_of: Index

    @property
    def competing(self) -> bool:
        """Whether some columns meet on curves that are neither straight nor round."""
        return any(axis.competing for axis in self.keys.axes)

    def above_mean_nm(self, x: Array, y: Array) -> list[tuple[tuple[int, ...], Array]]:
        """For each set of conformal layers: their numbers, and Slopes.above_mean_nm at points (N,) of the plan."""
        x, y = x % self.cell[0], y % self.cell[1]
        slopes = [axis for axis in self.keys.axes if isinstance(axis, Slopes)]
        return [(axis.layers, axis.above_mean_nm(x, y)) for axis in slopes]

    def column(self, x: Array, y: Array) -> Index:
        """The column at points of the plan (any shapes that go together), wrapped into the cell."""
        x, y = np.broadcast_arrays(x % self.cell[0], y % self.cell[1])
        return self.column_of[self.keys.at(x.ravel(), y.ravel())].reshape(x.shape)
