"""Random stacks, grids and recipes of every kind of step: never a hole in the numbers, never a rising surface."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.relief.evolve import Stage, evolve
from stackmill.relief.slope_speed import ROTATING, SWINGING, Light, slope_table
from stackmill.relief.terrain import Terrain
from stackmill.timing.fall import Cover, Lowering, Strip

MATERIALS = 3
NO_TIME = np.zeros(1)


class Peaked:
    """A yield that rises with the angle and falls to nothing: cos^-f exp(-s (1/cos - 1))."""

    def __init__(self, f, s):
        self.f, self.s = f, s

    def ratio(self, angle):
        cosine = np.maximum(np.cos(angle), 1e-9)
        return np.exp(-self.f * np.log(cosine) - self.s * (1.0 / cosine - 1.0))


SHAPES = [Peaked(2.3, 0.94), Peaked(1.5, 0.7), Peaked(2.0, 0.75)]


@st.composite
def terrains(draw):
    ny = draw(st.sampled_from([1, 1, 6]))
    nx = draw(st.integers(6, 24))
    segments = draw(st.integers(1, 4))
    columns = draw(st.integers(1, 3))
    numbers = np.random.default_rng(draw(st.integers(0, 10**6)))
    thickness = numbers.uniform(0.0, 200.0, (columns, segments)) * (numbers.random((columns, segments)) > 0.2)
    thickness[:, -1] += 50.0
    floor = np.cumsum(thickness[:, ::-1], axis=1)[:, ::-1]
    return Terrain(
        (25.0, 25.0),
        numbers.integers(0, columns, (ny, nx)),
        floor[:, 0],
        numbers.integers(0, MATERIALS, (columns, segments)),
        np.concatenate([floor[:, 1:], np.zeros((columns, 1))], axis=1),
        np.full(columns, segments),
    )


@st.composite
def stages(draw, section):
    found = []
    for _ in range(draw(st.integers(1, 4))):
        kind = draw(st.sampled_from(["mill", "mill", "etch", "strip", "cover"]))
        rates = np.array(draw(st.lists(st.floats(0.1, 2.0), min_size=MATERIALS, max_size=MATERIALS)))
        length = draw(st.floats(0.0, 200.0))
        if kind == "mill":
            tilt = np.radians(draw(st.sampled_from([0.0, 30.0, 60.0, 75.0])))
            swing = np.radians(draw(st.sampled_from([0.0, 20.0])))
            still = section and draw(st.booleans())
            light = Light(SWINGING, tilt - swing, tilt + swing) if still else Light(ROTATING, tilt, tilt)
            found.append(Stage(Lowering(rates[:, None]), length, slope_table(light, SHAPES, rates)))
        elif kind == "etch":
            found.append(Stage(Lowering(rates[:, None], counts=False), length))
        elif kind == "strip":
            found.append(Stage(Strip(frozenset({draw(st.integers(0, MATERIALS - 1))})), 0.0))
        else:
            found.append(Stage(Cover(frozenset({0}), draw(st.booleans())), 0.0))
    return found


@settings(max_examples=60, deadline=None)
@given(st.data(), st.booleans())
@pytest.mark.independent
def test_any_recipe_gives_finite_falling_surfaces_that_stop_at_the_floor(data, second_order):
    terrain = data.draw(terrains())
    recipe = data.draw(stages(terrain.is_section))
    end = sum(stage.length_s for stage in recipe if isinstance(stage.step, Lowering) and stage.step.counts)
    moments = sorted({end * share for share in (0.0, 0.3, 0.7, 1.0)})
    run = evolve(terrain, recipe, at_s=moments, end_s=end, second_order=second_order)
    assert run.finished
    assert [frame.time_s for frame in run.frames] == pytest.approx(moments, rel=1e-9, abs=1e-9)
    before = terrain.top_nm[terrain.column]
    for frame in run.frames:
        assert np.isfinite(frame.height_nm).all()
        assert (frame.height_nm <= before + 1e-9).all()
        assert (frame.height_nm >= -1e-9).all()
        before = frame.height_nm
    assert not np.isnan(run.passed_s).any()
    gone = np.isfinite(run.passed_s)
    assert (gone[..., :-1] >= gone[..., 1:]).all()  # no floor is met before the one above it
    both = gone[..., 1:]
    assert (run.passed_s[..., 1:][both] >= run.passed_s[..., :-1][both] - 1e-9).all()
    most = sum(
        (stage.step.rate_nm_per_s.max() if stage.table is None else fastest(stage.table)) * stage.length_s
        for stage in recipe
        if isinstance(stage.step, Lowering)
    )
    if not any(isinstance(stage.step, Strip) for stage in recipe):
        assert (terrain.top_nm[terrain.column] - run.frames[-1].height_nm <= most * (1 + 1e-9) + 1e-6).all()


def fastest(table):
    """The greatest vertical speed of any slope this side of 89.98 degrees: one of the maxima, or the steepest."""
    slopes = np.tan(np.radians(np.linspace(-89.98, 89.98, 2001)))
    return max(float(table.extreme.max()), *(float(table.speed_at(m, slopes).max()) for m in range(MATERIALS)))
