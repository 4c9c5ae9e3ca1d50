"""Gaps between features that a conformal layer closes."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from stackmill.columns.columns import Seam
from stackmill.columns.curves import SIDE_NM
from stackmill.columns.outlines import Disc, Primitive, Union, copies, primitive
from stackmill.columns.regions import PresentLayer
from stackmill.frozen import frozen


@frozen
class Gap:
    """The narrowest open place between two features: width, and its middle."""

    between: tuple[str, str]
    width_nm: float
    middle: tuple[float, float]


def seams(region: str, layers: Sequence[PresentLayer], cell: tuple[float, float]) -> list[Seam]:
    """The gaps in a region (layers from the bottom up) that conformal layers close, and which layer does."""
    found = []
    for k, present in enumerate(layers):
        if present.has_fill or present.solid:
            continue
        reach, films = 0.0, []
        for above in layers[k + 1 :]:
            if above.layer.coverage == "conformal":
                reach += above.layer.thickness.value * above.layer.sidewall
                films.append((2.0 * reach, above.layer.name))
            elif above.has_fill:
                break
        if films:
            gaps = _gaps(present, cell, 2.0 * reach)
            for gap in gaps:
                closing = next((name for closes, name in films if gap.width_nm < closes), None)
                if closing is not None:
                    found.append(Seam(region, closing, gap.between, gap.width_nm))
    return found


def _gaps(present: PresentLayer, cell: tuple[float, float], widest_nm: float) -> list[Gap]:
    """Gaps of a layer up to a width, the narrowest for each pair of features."""
    names = [present.layer.features[k].name for k in present.features]
    figures = [primitive(present.layer.features[k].shape, cell) for k in present.features]
    near = [copies(figure, cell, widest_nm) for figure in figures]
    covered = Union(tuple(copy for some in near for copy in some))
    narrowest: dict[tuple[str, str], Gap] = {}
    for i, one in enumerate(figures):
        for j in range(i, len(figures)):
            for other in near[j]:
                gap = _gap((names[i], names[j]), one, other)
                if not SIDE_NM < gap.width_nm < widest_nm or _is_covered(gap, covered):
                    continue
                known = narrowest.get(gap.between)
                if known is None or gap.width_nm < known.width_nm:
                    narrowest[gap.between] = gap
    return list(narrowest.values())


def _is_covered(gap: Gap, covered: Union) -> bool:
    return bool(covered(np.array([gap.middle[0]]), np.array([gap.middle[1]]))[0])


def _gap(between: tuple[str, str], one: Primitive, other: Primitive) -> Gap:
    """Between the cores of two figures: a rectangle is its own core, a disc's is its centre."""
    x0, x1, y0, y1 = _core(one)
    u0, u1, v0, v1 = _core(other)
    ax, bx = _nearest(x0, x1, u0, u1)
    ay, by = _nearest(y0, y1, v0, v1)
    apart = float(np.hypot(bx - ax, by - ay))
    r1, r2 = _radius(one), _radius(other)
    width = apart - r1 - r2
    along = 0.5 if apart == 0.0 else (r1 + width / 2) / apart
    return Gap(between, width, (ax + along * (bx - ax), ay + along * (by - ay)))


def _core(figure: Primitive) -> tuple[float, float, float, float]:
    return (figure.x, figure.x, figure.y, figure.y) if isinstance(figure, Disc) else figure.box()


def _radius(figure: Primitive) -> float:
    return figure.radius if isinstance(figure, Disc) else 0.0


def _nearest(a0: float, a1: float, b0: float, b1: float) -> tuple[float, float]:
    """The nearest points of two intervals; the middle of what they share where they overlap."""
    if a1 < b0:
        return a1, b0
    if b1 < a0:
        return a0, b1
    low, high = max(a0, b0), min(a1, b1)
    middle = (low + high) / 2 if np.isfinite(low + high) else 0.0
    return middle, middle
