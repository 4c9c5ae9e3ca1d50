"""One layer in plan and in section: fill, and features with their films carved inside the drawn outlines.

Bottom beats sides, sides beat top. From the top, the inside of a feature is cap, core, the liner's bottoms
from the innermost out, base; the ring of a liner film is that film down to the bottoms of those further out.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.columns.columns import BASE, CAP, CORE, FILL, LINER
from stackmill.columns.curves import Curves, joined
from stackmill.columns.inputs import StackInputs
from stackmill.columns.outlines import Outline, Union, copies, primitive, union
from stackmill.columns.regions import PresentLayer
from stackmill.documents.stack import Feature
from stackmill.frozen import frozen

Array = NDArray[np.float64]
Key = NDArray[np.int64]


@frozen
class Zone:
    """A kind of place in a layer: a feature's number in it (None: fill), and the liner ring from outside.

    ring counts the liner's films; it is their number in the inside of the feature.
    """

    feature: int | None
    ring: int = 0


FILL_ZONE = Zone(None)


@frozen
class Group:
    """Features of one layer alike in material and films, which merge where they overlap.

    outline: all of them together; members: the area of each; features: their numbers in the layer;
    depths (films,): how far from the wall each liner film ends.
    """

    outline: Outline
    members: tuple[Union, ...]
    features: tuple[int, ...]
    depths: Array

    def curves(self) -> Curves:
        """Where what lies below can change."""
        rings = [self.outline.offset(-float(depth)) for depth in self.depths]
        between = [f.edges() for member in self.members for f in member.figures] if len(self.members) > 1 else []
        return joined([self.outline.walls, *rings, *between])


@frozen
class LayerPlan:
    """A layer with features in plan.

    zones: what each number given by `state` means; outline: all its features together.
    """

    groups: tuple[Group, ...]
    zones: tuple[Zone, ...]
    outline: Outline

    @property
    def states(self) -> int:
        """How many zones there are."""
        return len(self.zones)

    @property
    def competing(self) -> bool:
        """Whether zones meet on curves that are neither straight nor round: never."""
        return False

    def state(self, x: Array, y: Array) -> Key:
        """The number of the zone at points (any shape) of the cell."""
        found = np.zeros(x.shape, dtype=np.int64)
        first = 1
        for group in self.groups:
            rings = len(group.depths)
            for k, member in enumerate(group.members):
                here = (found == 0) & member(x, y)
                if not here.any():
                    continue
                depth = group.outline.walls.distance(x[here], y[here]) if rings else np.empty(0)
                ring = np.searchsorted(group.depths, depth, side="right") if rings else 0
                found[here] = first + k * (rings + 1) + ring
            first += len(group.members) * (rings + 1)
        return found

    def curves(self) -> Curves:
        """Where the zone can change."""
        return joined([group.curves() for group in self.groups])


def layer_plan(present: PresentLayer, cell: tuple[float, float], reach_nm: float) -> LayerPlan:
    """Draw a layer's features in plan, with walls that are right within reach_nm of the cell."""
    groups, everything = [], []
    zones = [FILL_ZONE]
    for numbers in alike(present.layer.features, present.features):
        features = [present.layer.features[k] for k in numbers]
        depths = np.cumsum([film.thickness.value for film in features[0].liner])
        reach = max(reach_nm, float(depths[-1]) if len(depths) else 0.0)
        figures = [primitive(feature.shape, cell) for feature in features]
        everything += figures
        members = tuple(Union(tuple(copies(figure, cell, reach))) for figure in figures)
        groups.append(Group(union(figures, cell, reach), members, tuple(numbers), depths))
        zones += [Zone(k, ring) for k in numbers for ring in range(len(depths) + 1)]
    together = groups[0].outline if len(groups) == 1 else union(everything, cell, reach_nm)
    return LayerPlan(tuple(groups), tuple(zones), together)


def alike(features: Sequence[Feature], numbers: Sequence[int]) -> list[list[int]]:
    """Sort features into groups of the same material and films."""
    groups: dict[object, list[int]] = {}
    for k in numbers:
        groups.setdefault(make_up(features[k]), []).append(k)
    return list(groups.values())


def make_up(feature: Feature) -> object:
    """What a feature is made of and which layers it is in; features of one layer that agree in this merge."""
    films = (feature.cap, feature.base, *feature.liner)
    through = frozenset(feature.through) if len(feature.through) > 1 else None
    return (feature.material, through, *((film.material, film.thickness) if film else None for film in films))


@frozen
class Cut:
    """A segment before it is put in its place: numbers of material and feature, part, thickness (L,)."""

    material: int
    feature: int
    part: int
    shares: Array


@frozen
class Section:
    """What a layer has in one zone, top down; `cuts[stretch]` grows with the layer's height there.

    feature: its number in the map's table (-1: fill); passes: whether it goes on in other layers.
    """

    cuts: tuple[Cut, ...]
    stretch: int
    feature: int = -1
    passes: bool = False


def fill_section(present: PresentLayer, inputs: StackInputs) -> Section:
    """Fill from floor to top."""
    material = inputs.materials.index(present.layer.material)
    return Section((Cut(material, -1, FILL, np.zeros(len(inputs.inputs))),), 0)


def feature_section(present: PresentLayer, zone: Zone, inputs: StackInputs) -> Section:
    """A feature in one of its zones."""
    assert zone.feature is not None
    feature = present.layer.features[zone.feature]
    number = inputs.feature[present.index][zone.feature]
    films, passes = inputs.films[number], len(feature.through) > 1

    def cut(material: str, part: int, shares: Array) -> Cut:
        return Cut(inputs.materials.index(material), number, part, shares)

    liner = zip(feature.liner, films.liner, strict=True)
    bottoms = [cut(film.material, LINER, inputs.share_of(i)) for film, i in liner][: zone.ring][::-1]
    if feature.base and films.base is not None:
        bottoms.append(cut(feature.base.material, BASE, inputs.share_of(films.base)))
    rest = -np.sum([np.zeros(len(inputs.inputs)), *(b.shares for b in bottoms)], axis=0)
    if zone.ring < len(feature.liner):
        return Section((cut(feature.liner[zone.ring].material, LINER, rest), *bottoms), 0, number, passes)
    if feature.cap and films.cap is not None:
        cap = inputs.share_of(films.cap)
        caps = (cut(feature.cap.material, CAP, cap), cut(feature.material, CORE, rest - cap))
        return Section((*caps, *bottoms), 1, number, passes)
    return Section((cut(feature.material, CORE, rest), *bottoms), 0, number, passes)
