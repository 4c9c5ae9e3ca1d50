"""What every law does with its arguments: refuse what is not a number, warn once outside its range."""

from __future__ import annotations

import warnings

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stackmill.errors import StackmillWarning

Array = NDArray[np.float64]


def finite(name: str, value: ArrayLike) -> Array:
    """`value` as a float array of any shape; ValueError when anything in it is NaN or infinite."""
    array = np.asarray(value, dtype=np.float64)
    if not np.all(np.isfinite(array)):
        raise ValueError(f"{name} holds a value that is not a finite number; give finite numbers only")
    return array


def positive(name: str, value: ArrayLike) -> Array:
    """`value` as a float array of any shape; ValueError unless all of it is finite and above zero."""
    array = finite(name, value)
    if np.any(array <= 0.0):
        raise ValueError(f"{name} must be above zero, but its smallest value is {float(array.min()):g}")
    return array


def warn_outside(law: str, value: Array, *, name: str, allowed: tuple[float, float], source: str) -> None:
    """One StackmillWarning when any of `value` lies outside `allowed`; nothing is changed."""
    low, high = allowed
    outside = (value < low) | (value > high)
    if np.any(outside):
        worst = float(np.asarray(value)[outside].flat[0])
        warnings.warn(
            f"{law}: {name} = {worst:g} lies outside {low:g} to {high:g} ({source}); computed all the same",
            StackmillWarning,
            stacklevel=3,
        )
