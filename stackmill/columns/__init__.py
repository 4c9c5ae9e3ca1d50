"""What lies under every point of a die: geometry only, no laws and no rates."""

from __future__ import annotations

from stackmill.columns.building import build
from stackmill.columns.columns import PARTS, ColumnMap, RegionColumns, Seam, ThicknessInput
from stackmill.columns.problems import liner_too_thick, outside, overlaps

__all__ = [
    "PARTS",
    "ColumnMap",
    "RegionColumns",
    "Seam",
    "ThicknessInput",
    "build",
    "liner_too_thick",
    "outside",
    "overlaps",
]
