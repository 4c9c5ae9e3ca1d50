"""Pictures: the palette is told apart, polygons have the columns' areas, files repeat, nothing is loaded too early."""

from __future__ import annotations

import itertools
import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np
import pytest
from reliefs import relief_table

from stackmill.errors import FileAccessError, UsageError
from stackmill.jobs import load_job
from stackmill.materials.library import Library
from stackmill.planning.relief import When
from stackmill.relief.gridding import Cut
from stackmill.report.plots import draw_cell, draw_section, draw_stack, render, save, style, styles
from stackmill.report.plots.beam import _along, step_at
from stackmill.report.plots.block import top_material
from stackmill.report.plots.canvas import fitted
from stackmill.report.plots.cell import hillshade
from stackmill.report.plots.colours import EYES, from_lch, lightness
from stackmill.report.plots.goals import goal_levels
from stackmill.report.plots.labels import rows, spread
from stackmill.report.plots.names import View
from stackmill.report.plots.paint import job_styles
from stackmill.report.plots.palette import apart
from stackmill.report.plots.slices import busiest_cut, pieces, region_slices, surface_at, terrain_slices

ROOT = Path(__file__).parents[2]
DEMOS = ("four-metal/look", "two-metal/job", "copper/job", "gaas-amplifier/job", "sensor/job", "unknown/job")

SMALL = """
stack:
  cell: {x: 2 um, y: 2 um}
  layers:
    - {name: oxide, material: SiO2 PECVD, thickness: 200 nm}
    - {name: metal, material: SiO2 PECVD, thickness: 400 nm,
       features: [{name: bar, material: AlCu, line: {along: y, centre: 1 um, width: 0.8 um},
                   cap: {material: TiN, thickness: 50 nm}}]}
    - {name: under, material: BPSG, thickness: 500 nm}
    - {name: substrate, material: Si, thickness: 300 um}
  regions: [{name: array}, {name: field, absent: {features_of: [metal]}}]
mill: {gas: argon, current_density: 0.5 mA/cm2}
recipe:
  steps:
    - {cover: [array], with: silver paint}
    - {name: first, energy: 1 keV, incidence: 0 deg, motion: rotating, for: 2 min}
    - {uncover: [array]}
    - {name: second, energy: 1 keV, incidence: 45 deg, motion: MOTION, for: 20 min}
goal: {layer: metal, feature: bar, in: [array], at: LEVEL}
"""


def small(motion="rotating", level="top"):
    return load_job(SMALL.replace("MOTION", motion).replace("LEVEL", level))


def demo(name):
    return load_job(ROOT / f"stacks/{name}.yaml")


@pytest.fixture(scope="module")
def section():
    return relief_table(small(), when=When(at_s=(60.0, 600.0, 900.0)), section=Cut("y", 1000.0), points=100)


@pytest.fixture(scope="module")
def cell():
    return relief_table(small(), when=When(at_s=(900.0,)), cell=True, points=40)


# --- the palette ---


# Dichromats on linear sRGB after Vienot, Brettel and Mollon, Color Res. Appl. 24 (1999) 243: from memory, and another
# model than the palette's own.
_VIENOT = {
    "usual": np.eye(3),
    "protanopia": np.array([[0.11238, 0.88762, 0.0], [0.11238, 0.88762, 0.0], [0.00401, -0.00401, 1.0]]),
    "deuteranopia": np.array([[0.29275, 0.70725, 0.0], [0.29275, 0.70725, 0.0], [-0.02234, 0.02234, 1.0]]),
}


def luminance(colour, eyes):
    """CIE Y of `#rrggbb` (IEC 61966-2-1), through the dichromats above."""
    value = np.array([int(colour[k : k + 2], 16) for k in (1, 3, 5)]) / 255.0
    linear = np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)
    return float(np.clip(_VIENOT[eyes] @ linear, 0.0, 1.0) @ (0.2126, 0.7152, 0.0722))


def l_star(colour, eyes="usual"):
    y = luminance(colour, eyes)
    return 116.0 * np.cbrt(y) - 16.0 if y > 0.008856 else 903.3 * y


@pytest.mark.independent
@pytest.mark.parametrize("eyes", _VIENOT)
@pytest.mark.parametrize("name", DEMOS)
def test_no_two_materials_of_a_demo_look_alike_to_any_eye(name, eyes):
    looks = job_styles(demo(name))
    assert len(looks) == len(demo(name).column_map.materials)
    for one, other in itertools.combinations(looks.values(), 2):
        assert one.hatch != other.hatch or abs(l_star(one.face, eyes) - l_star(other.face, eyes)) > 7.0


@pytest.mark.independent
def test_lightness_is_that_of_cie_and_colours_are_made_with_the_lightness_asked_for():
    for light, chroma, hue in itertools.product((15.0, 40.0, 65.0, 90.0), (0.0, 10.0, 40.0), (20.0, 140.0, 260.0)):
        colour = from_lch(light, chroma, hue)
        assert l_star(colour) == pytest.approx(light, abs=0.6)
        assert lightness(colour) == pytest.approx(l_star(colour), abs=0.05)


@pytest.mark.common_practice
def test_white_stays_white_to_every_eye_and_red_is_dark_to_one_without_red_cones():
    assert all(lightness("#ffffff", eyes) == pytest.approx(100.0, abs=0.1) for eyes in EYES)
    assert lightness("#ff0000", "protanopia") < lightness("#ff0000") - 10.0
    assert lightness("#ff0000", "deuteranopia") > lightness("#ff0000", "protanopia") + 10.0


@pytest.mark.common_practice
def test_every_material_of_the_library_has_a_place_of_its_own_in_the_palette():
    names = Library.load().names()
    assert len(names) > 60
    assert all(style(name) == style(name, kind="composite", like="Cu") for name in names)
    whole = styles(names)
    assert all(apart(one, other) for one, other in itertools.combinations(whole.values(), 2))


@pytest.mark.common_practice
def test_a_material_looks_the_same_in_every_picture_of_a_demo():
    met = {}
    for name in DEMOS:
        for material, look in job_styles(demo(name)).items():
            assert met.setdefault(material, look) == look
    assert met["TiN"] == style("TiN")


@pytest.mark.common_practice
def test_a_labs_own_material_belongs_to_the_family_of_what_it_is_like():
    looks = job_styles(demo("unknown/job"))
    assert looks["dark film"].family == "nitride"
    assert looks["grey metal"].family == "metal"
    assert style("our silicon nitride").family == "nitride"
    assert style("mystery").family == "unknown"
    assert style("mystery") == style("mystery") != style("mystery 2")


@pytest.mark.closed_form
def test_two_that_would_be_alike_part_and_the_order_of_names_does_not_matter():
    names = [f"my oxide {k}" for k in range(30)]
    looks = styles(names)
    assert all(apart(one, other) for one, other in itertools.combinations(looks.values(), 2))
    assert styles(names[::-1]) == looks
    assert list(styles(names[::-1])) == names[::-1]


# --- what a line cuts through ---


@pytest.mark.closed_form
@pytest.mark.parametrize("name", DEMOS)
def test_the_pieces_along_a_line_have_the_areas_of_the_columns_they_cut(name):
    job = demo(name)
    for region in job.column_map.regions:
        cut = busiest_cut(region, job.column_map.cell)
        slices = region_slices(region, job.column_map.cell, cut)
        length = job.column_map.cell[0 if cut.along == "x" else 1]
        assert sum(one.s_nm[-1] - one.s_nm[0] for one in slices) == pytest.approx(length, abs=0.02)
        wanted = {}
        for one in slices:
            if region.slope[one.column]:
                continue
            for k in range(region.segments[one.column]):
                key = tuple(int(t[one.column, k]) for t in (region.material, region.layer, region.feature, region.part))
                size = (one.s_nm[-1] - one.s_nm[0]) * region.thickness_nm[one.column, k]
                wanted[key] = wanted.get(key, 0.0) + size
        flat = [one for one in slices if not region.slope[one.column]]
        found = {}
        for piece in pieces(flat):
            key = piece.material, piece.layer, piece.feature, piece.part
            found[key] = found.get(key, 0.0) + piece.area_nm2
        assert found.keys() == {key for key, size in wanted.items() if size > 0.0}
        for key, size in found.items():
            assert size == pytest.approx(wanted[key], rel=1e-9)


@pytest.mark.closed_form
def test_a_bar_and_its_cap_are_drawn_where_they_are():
    job = small()
    region = job.column_map.regions[0]
    found = pieces(region_slices(region, job.column_map.cell, Cut("y", 300.0)), bottom_nm=-50.0)
    areas = {}
    for one in found:
        name = job.column_map.materials[one.material]
        areas[name] = areas.get(name, 0.0) + one.area_nm2
    bar = 800.0
    assert areas["AlCu"] == pytest.approx(bar * 350.0)
    assert areas["TiN"] == pytest.approx(bar * 50.0)
    assert areas["SiO2 PECVD"] == pytest.approx(2000.0 * 200.0 + (2000.0 - bar) * 400.0)
    assert areas["Si"] == pytest.approx(2000.0 * 50.0)


@pytest.mark.independent
def test_the_drawn_polygons_enclose_what_the_pieces_say():
    job = small()
    figure = draw_stack(job, "array", Cut("y", 300.0))
    filled = [one for one in figure.axes[0].get_children() if one.__class__.__name__ == "Polygon" and one.get_fill()]
    names, looks = job.column_map.materials, job_styles(job)
    got = {}
    for one in filled:
        x, y = one.get_xy()[:-1].T
        area = 0.5 * abs(np.dot(x, np.roll(y, 1)) - np.dot(y, np.roll(x, 1)))
        got[one.get_facecolor()] = got.get(one.get_facecolor(), 0.0) + area
    from matplotlib.colors import to_rgba

    unit = 1000.0**2
    assert got[to_rgba(looks["AlCu"].face)] == pytest.approx(800.0 * 350.0 / unit)
    assert got[to_rgba(looks["TiN"].face)] == pytest.approx(800.0 * 50.0 / unit)
    assert set(names) == {"SiO2 PECVD", "TiN", "AlCu", "BPSG", "Si"}


@pytest.mark.closed_form
def test_what_is_left_and_what_has_gone_make_up_the_stack(section):
    region, frame = section.job.column_map.regions[0], section.run.frames[-1]
    slices = terrain_slices(region, section.run.terrain, row=0)
    step = section.run.terrain.step_nm[1]
    left = sum(one.area_nm2 for one in pieces(slices, bottom_nm=-100.0, surface=(frame.height_nm[0], step)))
    s = np.linspace(0.0, 2000.0, 200001)
    height = surface_at(s, frame.height_nm[0], step)
    assert left == pytest.approx(np.sum(0.5 * (height[1:] + height[:-1]) + 100.0) * (s[1] - s[0]), rel=1e-4)
    whole = sum(one.area_nm2 for one in pieces(slices, bottom_nm=-100.0))
    assert whole == pytest.approx(2000.0 * 1200.0, rel=1e-9)
    assert left < whole


@pytest.mark.closed_form
def test_terrain_and_region_cut_into_the_same_pieces_along_both_axes(cell):
    region = cell.job.column_map.regions[0]
    for slices in (
        terrain_slices(region, cell.run.terrain, row=0),
        terrain_slices(region, cell.run.terrain, column=20),
    ):
        assert sum(one.area_nm2 for one in pieces(slices, bottom_nm=0.0)) == pytest.approx(2000.0 * 1100.0)


@pytest.mark.closed_form
def test_the_goal_lies_at_its_level():
    for level, upper, lower in (("top", 900.0, 500.0), ("50 % ± 30 nm", 730.0, 670.0)):
        job = small(level=level)
        relief = relief_table(job, when=When(at_s=(0.0,)), section=Cut("y", 1000.0), points=20)
        found = goal_levels(job, relief.ensemble.best_ground, 0)
        assert {(one.upper_nm, one.lower_nm) for one in found.values()} == {(upper, lower)}
        assert goal_levels(job, relief.ensemble.best_ground, 1) == {}


@pytest.mark.common_practice
def test_the_line_chosen_meets_the_goal_and_the_features():
    job = demo("four-metal/look")
    region = job.column_map.regions[0]
    cut = busiest_cut(region, job.column_map.cell)
    met = {job.column_map.features[one.feature][1] for one in pieces(region_slices(region, job.column_map.cell, cut))
           if one.feature >= 0}  # fmt: skip
    assert {"rail", "rung", "plug 2", "bit line", "plug 1", "strap"} <= met


# --- drawing ---


@pytest.mark.closed_form
def test_labels_never_lie_on_each_other_and_keep_their_order():
    at, sizes = [10.0, 11.0, 12.0, 50.0, 90.0, 91.0], [12.0] * 6
    places = spread(at, sizes, 0.0, 100.0)
    assert np.all(np.diff(places) >= 12.0 - 1e-9)
    assert min(places) >= 6.0
    assert max(places) <= 94.0
    assert places[3] == pytest.approx(50.0)
    assert spread([5.0], [4.0], 0.0, 10.0) == [5.0]
    tight = spread([1.0, 2.0, 3.0], [10.0] * 3, 0.0, 15.0)
    assert np.diff(tight) == pytest.approx([5.0, 5.0])
    beside = rows([20.0, 25.0, 80.0], [30.0] * 3, 0.0, 100.0)
    assert [row for row, _ in beside] == [0, 1, 0]


@pytest.mark.closed_form
def test_an_exaggerated_picture_exaggerates_the_beam_alike():
    for times, wanted in ((1.0, 45.0), (3.0, np.degrees(np.arctan(1.0 / 3.0)))):
        view = View(1000.0, 0.0, 500.0, 400.0, 200.0 * times)
        across, up = _along(view, np.radians(45.0))
        assert np.degrees(np.arctan2(across, up)) == pytest.approx(wanted)


@pytest.mark.closed_form
def test_a_panel_is_true_to_scale_where_it_fits():
    assert fitted(4000.0, 6000.0, 240.0, 900.0, 300.0).times == 1.0
    flat = fitted(20000.0, 2000.0, 400.0, 900.0, 300.0)
    assert flat.times == 8.0
    assert flat.in_words() == "heights drawn 8 x"
    assert flat.px_per_nm * 20000.0 <= 400.0


@pytest.mark.closed_form
def test_the_beam_drawn_is_the_step_in_force_and_none_where_the_region_is_covered(section):
    assert step_at(section, 60.0) is None
    assert step_at(section, 600.0).name == "second"


@pytest.mark.closed_form
def test_the_hillshade_is_even_where_flat_and_lights_the_side_that_faces_the_sun():
    assert hillshade(np.full((5, 6), 70.0), (10.0, 10.0)) == pytest.approx(1.0)
    ridge = np.tile(np.array([0.0, 10.0, 20.0, 10.0, 0.0, 0.0]), (5, 1))
    shade = hillshade(ridge, (10.0, 10.0))
    assert shade[2, 1] > 1.0 > shade[2, 3]


@pytest.mark.independent
def test_the_block_is_coloured_by_the_material_at_the_surface(cell):
    frame, job = cell.run.frames[0], cell.job
    found = top_material(cell, frame)
    region, names = job.column_map.regions[0], job.column_map.materials
    for y, x in ((3, 5), (20, 20), (31, 2)):
        c = int(region.plan(cell.grid.x_nm[y, x], cell.grid.y_nm[y, x]))
        k = int(np.argmax(region.floor_nm[c, : region.segments[c]] < frame.height_nm[y, x] - 1e-6))
        assert names[found[y, x]] == names[region.material[c, k]]


@pytest.mark.common_practice
def test_pictures_say_what_they_show(section, cell):
    def said(figure):
        texts = [one.get_text() for one in figure.texts]
        return "\n".join(texts + [one.get_text() for axes in figure.axes for one in axes.texts])

    stack = said(draw_stack(small()))
    assert "heights drawn" in stack or "drawn to scale" in stack
    for word in ("array", "field", "bar", "under  500 nm", "goal: metal / bar, top", "TiN"):
        assert word in stack
    drawn = said(draw_section(section))
    for word in ("after 1 min", "covered: the beam does not reach it", "second: 1 keV, 45° from the normal, rotating"):
        assert word in drawn
    standing = next(row.standing for row in section.rows if row.time_s == 600.0)
    assert f"bar: {standing.kind} {abs(standing.height_nm):.0f} nm" in drawn
    assert "after 15 min" in said(draw_cell(cell))


@pytest.mark.common_practice
def test_a_still_and_a_rocking_beam_come_from_their_own_side():
    for motion in ("still", "rocking ± 20 deg"):
        relief = relief_table(small(motion), when=When(at_s=(600.0,)), section=Cut("y", 1000.0), points=40)
        texts = [one.get_text() for one in draw_section(relief).texts]
        assert any(f"45° from the normal, {motion}" in one for one in texts)


@pytest.mark.common_practice
@pytest.mark.parametrize("suffix", [".png", ".svg"])
def test_files_repeat_byte_for_byte_and_say_nothing_of_when_or_by_what(section, cell, suffix):
    for make in (lambda: draw_stack(small(), "array"), lambda: draw_section(section), lambda: draw_cell(cell)):
        one, other = render(make(), suffix), render(make(), suffix)
        assert one == other
        assert len(one) > 5000
        assert suffix == ".png" or ET.fromstring(one).tag.endswith("svg")
        for word in (b"<dc:date>", b"matplotlib v", b"Software"):
            assert word.lower() not in one.lower()


@pytest.mark.common_practice
def test_another_users_settings_neither_leak_in_nor_out(section):
    import matplotlib

    wanted = render(draw_section(section), ".png")
    with matplotlib.rc_context({"font.size": 30.0, "axes.facecolor": "red", "hatch.linewidth": 9.0}):
        before = dict(matplotlib.rcParams)
        assert render(draw_section(section), ".png") == wanted
        assert dict(matplotlib.rcParams) == before


def test_a_suffix_that_is_no_picture_is_refused_with_a_cure(tmp_path):
    figure = draw_stack(small(), "field")
    for name in ("a.pdf", "a", "a.jpeg"):
        with pytest.raises(UsageError, match=r"\.png or \.svg"):
            save(figure, tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_a_picture_is_saved_or_handed_to_whoever_writes(tmp_path):
    figure = draw_stack(small(), "field")
    content = save(figure, tmp_path / "a.PNG")
    assert (tmp_path / "a.PNG").read_bytes() == content
    taken = []
    assert save(figure, "b.png", lambda path, data: taken.append((path, data))) == content
    assert taken == [(Path("b.png"), content)]
    with pytest.raises(FileAccessError):
        save(figure, tmp_path / "none" / "a.png")


def test_what_cannot_be_drawn_is_refused(section, cell):
    with pytest.raises(UsageError, match="array, field"):
        draw_stack(small(), "arry")
    with pytest.raises(UsageError, match="outside the cell"):
        draw_stack(small(), cut=Cut("x", 3000.0))
    with pytest.raises(UsageError, match="no section"):
        draw_section(cell)
    with pytest.raises(UsageError, match="no cell"):
        draw_cell(section)
    with pytest.raises(UsageError, match="no moment"):
        draw_cell(cell, 3)


@pytest.mark.parametrize(
    ("does", "never"),
    [
        ("import stackmill.report, stackmill.report.plots, stackmill.report.plots.palette", "matplotlib"),
        (
            "from stackmill.report.plots import draw_stack, render; from stackmill.jobs import load_job;"
            f" render(draw_stack(load_job({str(ROOT / 'stacks/sensor/job.yaml')!r})), '.png')",
            "matplotlib.pyplot",
        ),
    ],
)
def test_matplotlib_comes_when_a_picture_is_drawn_and_pyplot_never(does, never):
    told = subprocess.run(
        [sys.executable, "-c", f"{does}; import sys; print({never!r} in sys.modules)"],
        capture_output=True,
        text=True,
        check=True,
    )
    assert told.stdout.strip() == "False"


@pytest.mark.regression
@pytest.mark.parametrize("name", DEMOS)
def test_every_demo_stack_is_drawn_with_no_text_off_the_picture(name):
    figure = draw_stack(demo(name))
    off = texts_off(figure)
    assert not off


@pytest.mark.common_practice
def test_a_surface_far_down_in_the_substrate_is_still_on_the_picture():
    relief = relief_table(demo("gaas-amplifier/job"), when=When(at_s=(3500.0,)), region="street")
    axes = draw_section(relief).axes[0]
    assert relief.run.frames[0].height_nm.max() < 0.0
    low, high = axes.get_ylim()
    assert low < relief.run.frames[0].height_nm.min() / 1000.0 < high


@pytest.mark.regression
def test_sections_and_cells_keep_their_text_on_the_picture(section, cell):
    assert not texts_off(draw_section(section))
    assert not texts_off(draw_cell(cell))


def texts_off(figure):
    renderer = figure.canvas.get_renderer()
    wide, high = figure.get_size_inches() * figure.dpi
    texts = [*figure.texts, *(one for axes in figure.axes for one in axes.texts)]
    boxes = [(one.get_text(), one.get_window_extent(renderer)) for one in texts if one.get_text()]
    return [text for text, box in boxes if box.x0 < 0 or box.y0 < 0 or box.x1 > wide + 1 or box.y1 > high]
