"""Layers given by the heights of their tops: what thickness each then has."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from stackmill.units import Measure

if TYPE_CHECKING:
    from stackmill.documents.stack import Layer


def with_thicknesses(layers: Sequence[Layer]) -> tuple[Layer, ...]:
    """The layers, from the top down, with the thickness between their tops; the substrate keeps its own.

    Heights are measured one by one, so the sds of two tops add in squares. The thicknesses of neighbours are then
    not independent: what draws differ in are the heights (see columns/inputs.py), and this sd is for showing.
    """
    tops = [layer.top or Measure(0.0) for layer in layers]
    return tuple(
        layer if layer.top is None else layer.model_copy(update={"thickness": _between(layer.top, tops[k + 1])})
        for k, layer in enumerate(layers)
    )


def _between(top: Measure, below: Measure) -> Measure:
    return Measure(top.value - below.value, math.hypot(top.sd, below.sd), math.hypot(top.across_sd, below.across_sd))
