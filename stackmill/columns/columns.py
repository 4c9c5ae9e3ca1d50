"""What lies straight down at every point of a die: the distinct columns of each region, with derivatives."""

from __future__ import annotations

from dataclasses import field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stackmill.frozen import frozen

if TYPE_CHECKING:
    from stackmill.columns.plan import RegionPlan
    from stackmill.units import Measure

Array = NDArray[np.float64]
Index = NDArray[np.intp]

PARTS = ("fill", "core", "cap", "base", "liner")
"""What a segment is in its layer; `RegionColumns.part` counts in this order."""

FILL, CORE, CAP, BASE, LINER = range(5)


@frozen
class ThicknessInput:
    """One uncertain thickness, or the height of a layer's top where the stack gives tops.

    name: 'metal 2', 'metal 2 / bus / cap' or 'via 1 / plug / liner', of a height 'metal 2 top'; layer: index of
    its layer, from the top; thickness: in nm; is_height: whether it is a height over the substrate's top.
    """

    name: str
    layer: int
    thickness: Measure
    is_height: bool = False


@frozen
class Seam:
    """A gap that a conformal layer closes: the films from both sides meet in its middle.

    region, layer: names; between: the two features at its sides (the same one twice if a feature faces its
    own neighbour in the next cell); gap_nm: its narrowest width at the walls' foot.
    """

    region: str
    layer: str
    between: tuple[str, str]
    gap_nm: float

    def in_words(self) -> str:
        """One sentence for people, without the 'note:' before it."""
        one, other = self.between
        sides = f"{one} and its neighbour" if one == other else f"{one} and {other}"
        return f"{self.region}: {self.layer} closes the {self.gap_nm:.0f} nm gap between {sides}, leaving a seam"


@frozen
class RegionColumns:
    """The C distinct columns of one region, largest first, each of up to S segments from the top down.

    material, layer, feature, part (C, S): indices into the map's tables and PARTS, -1 beyond the last of the
    `segments` (C,) segments; feature is -1 in fill too.
    floor_nm, thickness_nm (C, S), top_nm (C,): heights over the substrate's top, thicknesses, at best values;
    beyond the last segment the floor stays and the thickness is 0.
    dfloor_dthickness, dthickness (C, S, L), dtop_dthickness (C, L): derivatives to the map's L inputs. All
    heights are sums of inputs, so derivative times best values gives the height itself.
    area (C,): shares of the region, which sum to 1.
    slope (C,): 0 where every surface is flat, else 1..8, the class on a conformal slope (the uppermost one),
    from the wall down.
    centre_nm (C, 2): the point of a column's plan area farthest from other columns.
    edge_distance_nm (C, C): from the centre of the row's column to the nearest point of the other's area, in
    plan, across the cell's edges too; inf on the diagonal.
    labels: one for each column, all different. where: finds the column of a point.
    placeless (C,): columns made by a pattern density, which nobody knows the place of. They have the centre of
    the column without it, and from there to it next to no distance; `plan` and `grid` give the column without.
    """

    name: str
    material: Index
    layer: Index
    feature: Index
    part: Index
    segments: Index
    floor_nm: Array
    thickness_nm: Array
    top_nm: Array
    area: Array
    dfloor_dthickness: Array
    dthickness: Array
    dtop_dthickness: Array
    slope: Index
    centre_nm: Array
    edge_distance_nm: Array
    labels: tuple[str, ...]
    where: RegionPlan = field(repr=False, compare=False)
    placeless: NDArray[np.bool_] = field(default_factory=lambda: np.zeros(0, dtype=bool))

    def label(self, column: int) -> str:
        """A column's sequence for people: the features met from the top down, or 'field'."""
        return self.labels[column]

    def plan(self, x_nm: ArrayLike, y_nm: ArrayLike) -> Index:
        """The column at points of the plan (any shape, broadcast together), wrapped into the cell."""
        return self.where.column(np.asarray(x_nm, dtype=np.float64), np.asarray(y_nm, dtype=np.float64))

    def above_mean_nm(self, x_nm: Array, y_nm: Array, column: Index) -> Array:
        """How much higher (N, S + 1) the tops of a point's segments lie than its column says, at points (N,).

        Not 0 only on conformal slopes, whose columns stand for a class of heights. The last is the lowest floor.
        """
        off = np.zeros((len(x_nm), self.material.shape[1] + 1))
        for layers, above in self.where.above_mean_nm(x_nm, y_nm):
            for layer, rows in zip(layers, above, strict=True):
                inside = self.layer[column] == layer
                points = np.flatnonzero(inside.any(axis=1))
                off[points, np.argmax(inside[points], axis=1)] = rows[points]
        return off

    def grid(self, nx: int, ny: int) -> Index:
        """The column (ny, nx) at the centres of nx by ny equal rectangles that tile the cell."""
        width, height = self.where.cell
        x = (np.arange(nx) + 0.5) * (width / nx)
        y = (np.arange(ny) + 0.5) * (height / ny)
        return self.plan(x[None, :], y[:, None])


@frozen
class ColumnMap:
    """All regions of a die with their columns.

    layers: names from the top down; features: (layer index, name) of every feature, the layer being the one it
    is written in; materials: every material used; inputs: the L uncertain thicknesses or heights, the
    substrate's thickness among them; cell: width and height (nm) of the plan that repeats; seams: gaps that
    conformal layers close; scale_sd: relative sd of one error that all inputs but the substrate's share.
    """

    layers: tuple[str, ...]
    features: tuple[tuple[int, str], ...]
    materials: tuple[str, ...]
    inputs: tuple[ThicknessInput, ...]
    cell: tuple[float, float]
    regions: tuple[RegionColumns, ...]
    seams: tuple[Seam, ...] = ()
    scale_sd: float = 0.0
