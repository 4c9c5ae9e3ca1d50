"""Standard normal draws: each row spread evenly over its bell, each with a stream of its own.

The only place that makes random numbers. A row's stream is made from the seed and the row's name, so that adding
an input leaves the draws of all others as they were.
"""

from __future__ import annotations

import zlib
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# Coefficients, highest power first, of the rational approximations of algorithm AS 241 (PPND16).
_CENTRE_TOP = (
    2509.0809287301226727,
    33430.575583588128105,
    67265.770927008700853,
    45921.953931549871457,
    13731.693765509461125,
    1971.5909503065514427,
    133.14166789178437745,
    3.387132872796366608,
)
_CENTRE_BOTTOM = (
    5226.495278852545925,
    28729.085735721942674,
    39307.89580009271061,
    21213.794301586595867,
    5394.1960214247511077,
    687.1870074920579083,
    42.313330701600911252,
    1.0,
)
_MIDDLE_TOP = (
    7.7454501427834140764e-4,
    0.0227238449892691845833,
    0.24178072517745061177,
    1.27045825245236838258,
    3.64784832476320460504,
    5.7694972214606914055,
    4.6303378461565452959,
    1.42343711074968357734,
)
_MIDDLE_BOTTOM = (
    1.05075007164441684324e-9,
    5.475938084995344946e-4,
    0.0151986665636164571966,
    0.14810397642748007459,
    0.68976733498510000455,
    1.6763848301838038494,
    2.05319162663775882187,
    1.0,
)
_TAIL_TOP = (
    2.01033439929228813265e-7,
    2.71155556874348757815e-5,
    0.0012426609473880784386,
    0.026532189526576123093,
    0.29656057182850489123,
    1.7848265399172913358,
    5.4637849111641143699,
    6.6579046435011037772,
)
_TAIL_BOTTOM = (
    2.04426310338993978564e-15,
    1.4215117583164458887e-7,
    1.8463183175100546818e-5,
    7.868691311456132591e-4,
    0.0148753612908506148525,
    0.13692988092273580531,
    0.59983220655588793769,
    1.0,
)


def normal_quantile(share: Array) -> Array:
    """Where the standard normal distribution has these shares (0 < share < 1) below it; good to 1e-15.

    Source: M. J. Wichura, algorithm AS 241, Applied Statistics 37, 477 (1988). Here rather than from a library
    because the two that have it take longer to import than a forecast takes.
    """
    away = share - 0.5
    near = 0.180625 - away**2
    central = away * np.polyval(_CENTRE_TOP, near) / np.polyval(_CENTRE_BOTTOM, near)
    root = np.sqrt(-np.log(np.minimum(share, 1.0 - share)))
    middle = np.polyval(_MIDDLE_TOP, root - 1.6) / np.polyval(_MIDDLE_BOTTOM, root - 1.6)
    tail = np.polyval(_TAIL_TOP, root - 5.0) / np.polyval(_TAIL_BOTTOM, root - 5.0)
    outer = np.copysign(np.where(root <= 5.0, middle, tail), away)
    return np.where(np.abs(away) <= 0.425, central, outer)


def latin_hypercube(names: Sequence[str], draws: int, seed: int) -> Array:
    """Standard normal draws (names, D): each row takes the middle of each of D equal shares of the bell once.

    Source: McKay, Beckman & Conover, Technometrics 21, 239 (1979), from memory.
    """
    values = normal_quantile((np.arange(draws) + 0.5) / draws)
    rows = [_stream(seed, name).permutation(values) for name in names]
    return np.stack(rows) if rows else np.zeros((0, draws))


def _stream(seed: int, name: str) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64([seed, zlib.crc32(name.encode())]))
