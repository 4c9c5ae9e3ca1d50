"""Where labels go so that none lies on another."""

from __future__ import annotations

from collections.abc import Sequence


def spread(at: Sequence[float], sizes: Sequence[float], low: float, high: float) -> list[float]:
    """Middles for labels of some sizes, near where they want to be, none over another, between two ends.

    The order along the line is kept; where there is no room for all, they are pushed together alike.
    """
    order = sorted(range(len(at)), key=lambda k: (at[k], k))
    need = sum(sizes)
    share = min(1.0, (high - low) / need) if need > 0.0 else 1.0
    half = [0.5 * share * size for size in sizes]
    groups: list[list[int]] = []
    places: dict[int, float] = {}
    for k in order:
        groups.append([k])
        _settle(groups[-1], at, half, low, high, places)
        while (
            len(groups) > 1
            and places[groups[-2][-1]] + half[groups[-2][-1]] > places[groups[-1][0]] - half[groups[-1][0]] + 1e-9
        ):
            last = groups.pop()
            groups[-1] += last
            _settle(groups[-1], at, half, low, high, places)
    return [places[k] for k in range(len(at))]


def _settle(
    group: Sequence[int], at: Sequence[float], half: Sequence[float], low: float, high: float, places: dict[int, float]
) -> None:
    """Put a group of touching labels where they are least off on average."""
    offset, starts = 0.0, []
    for k in group:
        starts.append(offset + half[k])
        offset += 2.0 * half[k]
    first = sum(at[k] - start for k, start in zip(group, starts, strict=True)) / len(group)
    first = min(max(first, low), max(high - offset, low))
    for k, start in zip(group, starts, strict=True):
        places[k] = first + start


def rows(at: Sequence[float], sizes: Sequence[float], low: float, high: float) -> list[tuple[int, float]]:
    """Row and middle for labels beside each other, each straight over its place if it can be, in as few rows."""
    ends: list[float] = []
    placed: dict[int, tuple[int, float]] = {}
    for k in sorted(range(len(at)), key=lambda one: (at[one], one)):
        half = 0.5 * sizes[k]
        middle = min(max(at[k], low + half), max(high - half, low + half))
        row = next((n for n, end in enumerate(ends) if middle - half >= end), None)
        if row is None:
            row = len(ends)
            ends.append(low)
        ends[row] = middle + half
        placed[k] = (row, middle)
    return [placed[k] for k in range(len(at))]
