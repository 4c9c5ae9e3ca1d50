"""From a job and its draws to surfaces: what the beam does to slopes in each step, and which ground it meets."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from stackmill.documents.recipe import Beam
from stackmill.ensemble.run import Descent, Ensemble
from stackmill.errors import InputError
from stackmill.jobs import Job
from stackmill.rates.model import setting
from stackmill.rates.yields import angular_shape
from stackmill.relief.evolve import Stage
from stackmill.relief.gridding import Cut, Grid, Layout, layout, terrain_of
from stackmill.relief.slope_speed import ROTATING, SWINGING, Light, SlopeTable, slope_table
from stackmill.relief.terrain import Terrain
from stackmill.timing.fall import Lowering

Array = NDArray[np.float64]

_LOWEST_DEG = 85.0  # beyond, a surface would take thousands of steps for shadows that mean nothing
_ALONG_DEG = 0.5  # how far a beam's azimuth may lie off a section's line


@dataclass
class Surfaces:
    """Makes the ground and the stages of a region's surface, for best values and for draws.

    cut: the section's line, None for the cell. Tables are built once for each setting of the beam, for flat ground
    that falls 1 nm/s, and scaled to each draw's own rates.
    """

    ensemble: Ensemble
    region: int
    cut: Cut | None
    _known: dict[tuple[object, ...], SlopeTable] = field(default_factory=dict)

    @property
    def job(self) -> Job:
        """The job behind it."""
        return self.ensemble.inputs.job

    def layout(self, grid: Grid) -> Layout:
        """What lies where on a grid of this region."""
        return layout(self.job.column_map.regions[self.region], grid)

    def terrain(self, laid: Layout, down: Descent, draw: int = 0) -> Terrain:
        """The ground of one draw under the points of a grid."""
        region = self.job.column_map.regions[self.region]
        where = down.ground
        columns = [column.of_draw(draw) for column in where.columns[self.region]]
        return terrain_of(region, columns, where.boundary[self.region], laid)

    def stages(self, terrain: Terrain, down: Descent, draw: int = 0) -> list[Stage]:
        """The steps of one draw, as this region meets them, with what the beam does to slopes."""
        recipe = self.job.recipe.steps
        beams = [i for i, step in enumerate(recipe) if isinstance(step, Beam)]
        stages = []
        for i, (step, span) in enumerate(zip(down.steps, down.fall.spans, strict=True)):
            length = float(span.length_s[draw])
            if not isinstance(step, Lowering):
                stages.append(Stage(step, length))
                continue
            share = 1.0 if step.region_share is None else float(step.region_share[self.region][draw])
            rate = step.rate_nm_per_s[:, draw] * share
            own = Lowering(rate[:, None], counts=step.counts, name=step.name)
            what = recipe[i] if i < len(recipe) else recipe[(beams or [-1])[-1]]
            table = (
                self._table(terrain.materials, what).scaled(rate[: len(self.job.column_map.materials)])
                if isinstance(what, Beam)
                else None
            )
            stages.append(Stage(own, length, table))
        return stages

    def _table(self, materials: frozenset[int], step: Beam) -> SlopeTable:
        key = (*setting(step), materials)
        if key not in self._known:
            names = self.job.column_map.materials
            shapes = [
                angular_shape(self.job.materials[name], energy_ev=step.energy, gas=self.job.mill.gas)
                if m in materials
                else None
                for m, name in enumerate(names)
            ]
            self._known[key] = slope_table(light_of(step, self.cut), shapes, np.ones(len(names)))
        return self._known[key]


def along_the_beam(job: Job, cut: Cut | None) -> bool:
    """Whether the beams of all steps lie in a section, or turn over the cell (None)."""
    try:
        for step in job.recipe.steps:
            if isinstance(step, Beam):
                light_of(step, cut)
    except InputError:
        return False
    return True


def light_of(step: Beam, cut: Cut | None) -> Light:
    """Where the beam comes from, along a section, or over a cell (None). Raises InputError where it is neither."""
    tilt = float(np.radians(step.incidence))
    motion = step.motion
    swing = float(np.radians(motion.half_angle)) if motion.kind == "rocking" else 0.0
    if tilt + swing > np.radians(_LOWEST_DEG):
        raise InputError(
            f"step {step.name!r} mills beyond {_LOWEST_DEG:.0f} deg from the normal, where no surface can be followed",
            cure="tilt it less, or ask for --flat",
        )
    if motion.kind == "rotating" or (tilt == 0.0 and swing == 0.0):
        return Light(ROTATING, tilt, tilt)
    if cut is None:
        raise InputError(
            f"step {step.name!r} is {motion}: a cell is moved only under a rotating sample",
            cure="give --section along the beam's azimuth, or make the motion rotating",
        )
    along = motion.azimuth - (0.0 if cut.along == "x" else 90.0)
    off = (along + 90.0) % 180.0 - 90.0
    if abs(off) > _ALONG_DEG:
        line = "y" if cut.along == "x" else "x"
        raise InputError(
            f"step {step.name!r} is {motion}: its beam does not lie in the section {cut}",
            cure=f"give --section {line}=..., which runs along the beam, or make the motion rotating",
        )
    forward = np.cos(np.radians(along)) > 0.0
    low, high = (tilt - swing, tilt + swing) if forward else (-tilt - swing, swing - tilt)
    return Light(SWINGING, low, high)
