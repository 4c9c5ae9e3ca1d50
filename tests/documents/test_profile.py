"""The beam across the die: formulas, measured maps, and what is wrong with them."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.documents import read_mill
from stackmill.documents.profile import BeamMap, read_map
from stackmill.errors import InputErrors

MM = 1e6
MILL = "gas: argon\ncurrent_density: 0.5 mA/cm2\n"


def profile(text):
    found = read_mill(f"{MILL}profile: {text}").model.profile
    assert found is not None
    return found


@pytest.mark.closed_form
def test_a_parabola_falls_by_its_share_at_its_distance():
    found = profile("{falls: 3 %, at: 10 mm}")
    assert found.relative(0.0, 0.0) == 1.0
    assert found.relative(6 * MM, -8 * MM) == pytest.approx(0.97)
    assert found.relative(5 * MM, 0.0) == pytest.approx(1 - 0.03 / 4)


@pytest.mark.closed_form
def test_a_gaussian_has_its_sd_and_its_centre():
    found = profile("{gaussian: 20 mm, centre: {x: 5 mm, y: -5 mm}}")
    assert found.relative(5 * MM, -5 * MM) == 1.0
    assert found.relative(25 * MM, -5 * MM) == pytest.approx(math.exp(-0.5))
    assert found.relative(5 * MM, 35 * MM) == pytest.approx(math.exp(-2.0))


GRID = BeamMap((-1 * MM, 0.0, 3 * MM), (0.0, 2 * MM), ((0.9, 1.0, 0.8), (0.7, 0.9, 1.1)))


@pytest.mark.closed_form
def test_a_map_is_met_at_its_points_and_straight_between():
    for j, y in enumerate(GRID.y_nm):
        for i, x in enumerate(GRID.x_nm):
            assert GRID.at(x, y) == pytest.approx(GRID.relative[j][i])
    assert GRID.at(1.5 * MM, 0.0) == pytest.approx(0.9)
    assert GRID.at(1.5 * MM, 1 * MM) == pytest.approx((0.9 + 1.0) / 2)
    assert GRID.at(-1.01 * MM, 1 * MM) is None
    assert GRID.at(0.0, 2.01 * MM) is None


@pytest.mark.independent
@settings(deadline=None)
@given(st.floats(-1, 3), st.floats(0, 2))
def test_a_map_agrees_with_scipy(x, y):
    from scipy.interpolate import RegularGridInterpolator

    other = RegularGridInterpolator((GRID.y_nm, GRID.x_nm), GRID.relative)
    assert GRID.at(x * MM, y * MM) == pytest.approx(float(other((y * MM, x * MM))))


@pytest.mark.closed_form
def test_a_map_is_read_beside_the_mill_file(tmp_path: Path):
    (tmp_path / "beam.csv").write_text(
        "# invented\nx_mm, y_mm, relative\n0,0,1\n4,0,0.9\n\n0,2,0.8\n4,2,0.7\n", encoding="utf-8"
    )
    mill = tmp_path / "mill.yaml"
    mill.write_text(MILL + "profile: {map: beam.csv, centre: {x: 1 mm, y: 0 mm}}", encoding="utf-8")
    found = read_mill(mill).model.profile
    assert found is not None
    assert found.relative(3 * MM, 1 * MM) == pytest.approx((1 + 0.9 + 0.8 + 0.7) / 4)
    assert found.relative(0.0, 0.0) is None
    assert found.model_copy().grid == found.grid


def test_a_map_that_is_not_there_is_told_with_its_line(tmp_path: Path):
    mill = tmp_path / "mill.yaml"
    mill.write_text(MILL + "profile: {map: beam.csv}", encoding="utf-8")
    with pytest.raises(InputErrors, match=r"mill.yaml:3:16: error: there is no file 'beam.csv'"):
        read_mill(mill)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "begins with a header, and this one with ''"),
        ("x_mm,y_mm,relative\n", "0 places"),
        ("x_mm,y_mm,relative\n0,0,1\n1,0,1\n", "2 different x by 1 different y"),
        ("x_mm,y_mm,relative\n0,0,1\n1,0,1\n0,1,1\n1,1,nan\n", "cannot be a beam"),
        ("x_mm,y_mm,relative\n0,0,1\n1,0,1\n0,1,1\n1,1,12\n", "cannot be a beam"),
        ("x_mm,y_mm,relative\n0,0,1\n1,0,1\n0,1,1\n1,1\n", "is not three numbers"),
    ],
)
def test_maps_that_cannot_be_used(tmp_path: Path, text: str, says: str):
    path = tmp_path / "beam.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputErrors) as refused:
        read_map(path)
    assert any(says in error.what for error in refused.value.errors)


@pytest.mark.closed_form
def test_a_uniformity_is_half_a_range_and_becomes_an_sd():
    """Values spread evenly over ± u have the sd u / sqrt(3)."""
    assert read_mill(MILL + "uniformity: ± 3 %").model.uniformity_sd == pytest.approx(0.03 / math.sqrt(3))
    assert read_mill(MILL).model.uniformity_sd == 0.0
