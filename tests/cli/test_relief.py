"""The relief verb and the surface in stops: tables, machine forms, archives, interrupts, what is said on stderr."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import numpy as np
import pytest

from stackmill.cli.main import main
from stackmill.relief import kernel
from stackmill.report.relief import ROW_NAMES

ROOT = Path(__file__).parents[2]
LOOK, TWO = "stacks/four-metal/look.yaml", "stacks/two-metal/job.yaml"
FAST = ["--grid", "80"]


@pytest.fixture(autouse=True)
def _at_the_root(monkeypatch):
    monkeypatch.chdir(ROOT)
    monkeypatch.setenv("COLUMNS", "80")


@pytest.mark.common_practice
def test_the_table_shows_tungsten_standing_in_tilted_milling_with_the_grids_error(capsys):
    assert main(["relief", LOOK]) == 0
    text = capsys.readouterr().out
    plug = next(line for line in text.splitlines() if line.startswith("via 1 / plug 1"))
    assert "pillar" in plug
    assert " ± " in plug
    assert "via 1" in plug.split("pillar")[1]
    assert max(map(len, text.splitlines())) <= 80
    assert "exclude redeposition and reflected ions" in text


def test_json_and_csv_have_the_names_that_others_build_on(capsys):
    assert main(["relief", LOOK, "--at", "30min,1 h", "-f", "json", *FAST]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert set(answer["rows"][0]) == set(ROW_NAMES)
    assert ROW_NAMES[:11] == (
        "time_s", "region", "layer", "feature", "kind", "height_nm", "width_nm", "base_width_nm", "side_slope_deg",
        "top_layer", "vanishes_s",
    )  # fmt: skip
    assert [m["time_s"] for m in answer["moments"]] == [1800.0, 3600.0]
    assert set(answer["moments"][0]) == {"region", "time_s", "relief_nm", "clear_share"}
    assert main(["relief", LOOK, "--at", "30min,1 h", "-f", "csv", *FAST]) == 0
    rows = list(csv.DictReader(io.StringIO(capsys.readouterr().out)))
    assert [row["feature"] for row in rows] == [row["feature"] for row in answer["rows"]]
    assert float(rows[0]["height_nm"]) == answer["rows"][0]["height_nm"]


def test_a_saved_archive_holds_the_surfaces_and_is_the_same_each_time(tmp_path, capsys):
    one, two = tmp_path / "a.npz", tmp_path / "b.npz"
    for path in (one, two):
        assert main(["relief", LOOK, "--at", "10min,2 h", "--save", str(path), *FAST]) == 0
    capsys.readouterr()
    assert one.read_bytes() == two.read_bytes()
    with np.load(one) as saved:
        assert saved["time_s"].tolist() == [600.0, 7200.0]
        assert saved["height_nm"].shape == saved["material"].shape == (2, 1, 80)
        assert saved["x_nm"].shape == (1, 80)
        assert (saved["height_nm"][1] < saved["height_nm"][0]).all()
        names = saved["materials"].tolist()
        assert {names[m] for m in np.unique(saved["material"][0])} == {"SiN PECVD"}  # the overcoat is still there
    assert main(["relief", LOOK, "--save", str(one), *FAST]) == 4
    assert "there already (give --force" in capsys.readouterr().err


def test_an_interrupt_keeps_the_frames_reached_and_says_so(tmp_path, capsys, monkeypatch):
    moved = kernel.mill
    calls = []

    def interrupted(terrain, surface, table, **more):
        if surface.clock_s > 4000.0:
            raise KeyboardInterrupt
        calls.append(surface.clock_s)
        moved(terrain, surface, table, **more)

    monkeypatch.setattr(kernel, "mill", interrupted)
    path = tmp_path / "part.npz"
    assert main(["relief", LOOK, "--at", "10min,1 h,2 h", "--save", str(path), "--grid", "200"]) == 130
    assert "INTERRUPTED" in capsys.readouterr().out
    with np.load(path) as saved:
        assert saved["time_s"].tolist() == [600.0, 3600.0]


@pytest.mark.parametrize(
    ("arguments", "code", "says"),
    [
        (["--at", "10 nm"], 2, "--at: "),
        (["--at", "-3 min"], 2, "before the start"),
        (["--section", "diagonal"], 2, "is no line across the cell (write x=2.4um or y=0.6um)"),
        (["--section", "x=9 um"], 2, "outside the cell"),
        (["--section", "x=1"], 2, "--section: "),
        (["--region", "moon"], 2, "there is no region 'moon'"),
        (["--at-reach", "metal 9"], 2, "there is no layer 'metal 9'"),
        (["--section", "x=1um", "--cell"], 2, "cannot both be run"),
        (["--plot", "picture.gif"], 2, ".png or .svg"),
    ],
)
def test_what_is_off_is_said_in_one_line(arguments, code, says, capsys):
    assert main(["relief", LOOK, *arguments]) == code
    error = capsys.readouterr().err
    assert says in error
    assert error.count("\n") == 1


def test_a_section_given_is_the_one_run_and_the_cell_is_told_as_such(capsys):
    assert main(["relief", LOOK, "--section", "x=2um", "--at", "5min", *FAST]) == 0
    assert "section x = 2 um: 80 points, 50 nm apart" in capsys.readouterr().out
    assert main(["relief", LOOK, "--cell", "--at", "5min", "--grid", "20"]) == 0
    assert "the whole cell: 20 x 20 points, 200 nm apart" in capsys.readouterr().out


def test_undercut_and_a_grid_too_coarse_are_told(capsys):
    assert main(["relief", TWO]) == 0
    assert "the wall of AlCu walks in under TiN by" in " ".join(capsys.readouterr().out.split())
    assert main(["relief", TWO, "--grid", "80"]) == 0
    assert "TOO COARSE in array for via 1 / plug: 6 points across it; 10 or more want --grid 134." in " ".join(
        capsys.readouterr().out.split()
    )


def test_compiling_is_said_on_stderr_once_and_quiet_keeps_still(capsys, monkeypatch):
    monkeypatch.setattr(kernel, "is_compiled", lambda *, section: False)
    assert main(["relief", LOOK, "--at", "1min", *FAST]) == 0
    assert "compiling the surface's kernel" in capsys.readouterr().err
    assert main(["relief", LOOK, "--at", "1min", "--quiet", *FAST]) == 0
    assert capsys.readouterr().err == ""


def test_stops_says_whether_the_surface_confirmed_it_and_flat_leaves_it_provisional(capsys):
    assert main(["stops", LOOK]) == 0
    text = capsys.readouterr().out
    assert "BY THE SURFACE: section y = 2.925 um of array, 200 points" in " ".join(text.split())
    assert "PROVISIONAL" not in text
    assert "^ from the surface" in text
    assert main(["stops", LOOK, "--flat"]) == 0
    flat = capsys.readouterr().out
    assert "PROVISIONAL" in flat
    assert "^" not in flat
    assert main(["stops", LOOK, "--flat", "--cell"]) == 2


def test_stops_tells_machines_the_basis_of_every_time(capsys):
    assert main(["stops", LOOK, "-f", "json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert {row["basis"] for row in answer["rows"]} == {"flat", "surface"}
    assert all(not row["flat_ok"] for row in answer["rows"] if row["basis"] == "surface")
    (window,) = answer["windows"]
    assert (window["basis"], window["provisional"]) == ("surface", False)
    assert 0.0 < window["surface_error_s"] < 60.0
    assert answer["surfaces"][0]["region"] == "array"
