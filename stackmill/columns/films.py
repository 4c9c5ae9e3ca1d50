"""The top of conformal films around a wall, as if a ball had rolled over it.

A film of thickness t and sidewall share c lifts the surface to the highest point of half-ellipses with
half-axes c t (in plan) and t (up) put on every point of it. Of several films in turn, the half-ellipses add
up point by point of equal slope.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen

Array = NDArray[np.float64]

_ANGLES = 4001


@frozen
class Films:
    """Conformal films laid down one after the other: inputs (their numbers), thickness and sidewall share."""

    inputs: tuple[int, ...] = ()
    thickness_nm: tuple[float, ...] = ()
    sidewall: tuple[float, ...] = ()

    def then(self, number: int, thickness_nm: float, sidewall: float) -> Films:
        """One more film on top."""
        return Films((*self.inputs, number), (*self.thickness_nm, thickness_nm), (*self.sidewall, sidewall))

    def first(self, count: int) -> Films:
        """The first few of them."""
        return Films(self.inputs[:count], self.thickness_nm[:count], self.sidewall[:count])

    @property
    def flat_nm(self) -> float:
        """Their thickness on flat ground."""
        return sum(self.thickness_nm)

    @property
    def reach_nm(self) -> float:
        """How far from a wall they still lean on it."""
        return sum(t * c for t, c in zip(self.thickness_nm, self.sidewall, strict=True))

    def shares(self, distance_nm: Array) -> Array:
        """How much of each film's thickness there is over the wall's top (..., films) at a distance (...).

        1 at the wall, 0 at the end of its reach and beyond.
        """
        t, c = np.array(self.thickness_nm), np.array(self.sidewall)
        if np.ptp(c) == 0.0:
            one = np.sqrt(np.clip(1.0 - (distance_nm / self.reach_nm) ** 2, 0.0, None))
            return np.broadcast_to(one[..., None], (*one.shape, len(t)))
        angle = np.interp(distance_nm, *self._foot)
        return _sines_and_cosines(angle, c)[1]

    def height(self, distance_nm: Array) -> Array:
        """Height of their top over the wall's top (...) in nm; -inf beyond their reach."""
        height = self.shares(distance_nm) @ np.array(self.thickness_nm)
        return np.where(distance_nm <= self.reach_nm, height, -np.inf)

    def distance_at(self, height_nm: float) -> float:
        """How far from the wall their top is at this height over the wall's; 0 if never so high."""
        low, high = 0.0, self.reach_nm
        if height_nm >= self.flat_nm:
            return 0.0
        for _ in range(60):
            middle = (low + high) / 2
            low, high = (middle, high) if float(self.height(np.array(middle))) > height_nm else (low, middle)
        return (low + high) / 2

    @cached_property
    def _foot(self) -> tuple[Array, Array]:
        """Distance from the wall against the slope's angle, both rising."""
        t, c = np.array(self.thickness_nm), np.array(self.sidewall)
        angle = np.linspace(0.0, np.pi / 2, _ANGLES)
        return _sines_and_cosines(angle, c)[0] @ (t * c), angle


def _sines_and_cosines(angle: Array, c: Array) -> tuple[Array, Array]:
    """For the slope tan(angle): distance over c t and height over t on each half-ellipse (..., films)."""
    across, up = c * np.sin(angle)[..., None], np.cos(angle)[..., None]
    length = np.hypot(across, up)
    return across / length, up / length
