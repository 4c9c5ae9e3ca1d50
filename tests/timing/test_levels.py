"""Cutting columns at levels that lie inside segments."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.timing.fall import Lowering, fall
from stackmill.timing.levels import CutColumn


def times(cut: CutColumn, level: int, rates):
    run = fall(
        [[cut.done()]],
        [
            Lowering(
                np.array(rates)[:, None] * np.ones(cut.thickness_nm[0].shape),
                np.full(cut.thickness_nm[0].shape, 1e6),
            )
        ],
    )
    return run.reach(0, 0, cut.levels[level])


@pytest.mark.closed_form
def test_a_level_inside_different_segments_of_different_draws():
    # above the floor of the last segment lie 30 + 20 nm; the level is 10 nm up in one draw and 40 in the other
    cut = CutColumn([2, 0, 1], [np.array([5.0, 5.0]), np.array([30.0, 30.0]), np.array([20.0, 20.0])], 1.0)
    level = cut.cut(1, 2, np.array([10.0, 40.0]))
    np.testing.assert_allclose(times(cut, level, [1.0, 0.5, 5.0]), [1 + 30 + 20, 1 + 10])
    assert [int(b) for b in cut.boundary] == [0, 1, 3, 5]


@pytest.mark.closed_form
def test_two_cuts_of_the_same_segments_in_any_order():
    for heights in ([35.0, 12.0], [12.0, 35.0]):
        cut = CutColumn([0, 1], [np.array([30.0]), np.array([20.0])], 1.0)
        levels = [cut.cut(0, 1, np.array([h])) for h in heights]
        found = {h: float(times(cut, k, [1.0, 2.0])[0]) for h, k in zip(heights, levels, strict=True)}
        assert found == {35.0: pytest.approx(15.0), 12.0: pytest.approx(34.0)}


@pytest.mark.closed_form
def test_levels_beyond_the_segments_are_kept_within_them():
    cut = CutColumn([0], [np.array([30.0])], 1.0)
    over, under = cut.cut(0, 0, np.array([99.0])), cut.cut(0, 0, np.array([-5.0]))
    assert times(cut, over, [1.0])[0] == 0.0
    assert times(cut, under, [1.0])[0] == 30.0
