"""Manners at the border: exit codes, files, formats, errors, terminals."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from stackmill.cli.main import app, main

ROOT = Path(__file__).parents[2]
LOOK, LAB = "stacks/four-metal/look.yaml", "stacks/four-metal/lab.yaml"


@pytest.fixture(autouse=True)
def _at_the_root(monkeypatch):
    monkeypatch.chdir(ROOT)
    monkeypatch.setenv("COLUMNS", "100")


def run(*arguments, **more):
    return subprocess.run(
        [sys.executable, "-m", "stackmill", *arguments], capture_output=True, text=True, cwd=ROOT, check=False, **more
    )


@pytest.mark.parametrize(
    ("arguments", "code", "says"),
    [
        (["stops", "--flat", LOOK], 0, ""),
        (["stops", "--flat", LAB], 1, ""),
        (["stops", LOOK, "--nonsense"], 2, "--nonsense"),
        (["stops", LOOK, "--goal", "metal 1"], 2, "--goal is for a lone stack"),
        (["rates"], 2, "rates takes a file or --material"),
        (["rates", "--material", "Wolframite"], 3, "no material is called"),
        (["stops", LOOK, "--set", "confidence=2"], 3, "--set confidence"),
        (["stops", "nowhere.yaml"], 4, "nowhere.yaml"),
        (["stops", "--flat", LOOK, "-o", "/no/such/folder/x.csv"], 4, "cannot be written"),
        (["stops", LOOK, "-o", "x.pdf"], 2, "no format is known"),
        (["materials", "unobtainium"], 3, "unobtainium"),
    ],
)
def test_exit_codes_and_what_is_said(arguments, code, says, capsys):
    assert main(arguments) == code
    error = capsys.readouterr().err
    assert says in error
    assert "Traceback" not in error


@pytest.mark.parametrize("verb", sorted(command.callback.__name__ for command in app.registered_commands))
def test_every_help_has_an_example(verb, capsys):
    assert main([verb, "--help"]) == 0
    assert f"Example: stackmill {verb}" in capsys.readouterr().out


def test_version_and_no_arguments(capsys):
    assert main(["--version"]) == 0
    assert capsys.readouterr().out.startswith("stackmill ")
    assert main([]) == 2


STOP_NAMES = [
    "region",
    "column",
    "layer",
    "time_s",
    "time_early_s",
    "time_late_s",
    "depth_nm",
    "height_nm",
    "step",
    "flat_ok",
    "basis",
    "present",
    "area_share",
]
WINDOW_NAMES = [
    "goal",
    "regions",
    "exposed_s",
    "lost_s",
    "stop_s",
    "chance",
    "best_chance",
    "confidence",
    "first_look_s",
    "lost_by",
    "left_standing_share",
    "provisional",
]


def test_stops_as_json_has_the_pinned_names(capsys):
    assert main(["stops", "--flat", LOOK, "-f", "json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert {"schema_version", "stackmill_version", "inputs_sha256", "seed", "warnings", "rows", "windows"} <= set(
        answer
    )
    assert all(list(row) == STOP_NAMES for row in answer["rows"])
    assert set(WINDOW_NAMES) <= set(answer["windows"][0])
    assert answer["windows"][0]["regions"] == ["array"]


def test_no_window_is_null_in_json(capsys):
    assert main(["stops", "--flat", LAB, "-f", "json"]) == 1
    window = json.loads(capsys.readouterr().out)["windows"][0]
    assert window["exposed_s"] is None
    assert window["lost_s"] is None
    assert 0.5 < window["best_chance"] < 0.9


def test_rates_as_json_and_csv_have_the_pinned_names(capsys):
    names = "material energy_ev incidence_deg current_density_ma_per_cm2 yield_atoms_per_ion rate_nm_per_min"
    names += " rate_rel_sd source"
    assert main(["rates", "--material", "W", "--material", "Al", "-f", "json"]) == 0
    rows = json.loads(capsys.readouterr().out)["rows"]
    assert [row["material"] for row in rows] == ["W", "Al"]
    assert set(names.split()) <= set(rows[0])
    assert main(["rates", LOOK, "-f", "csv"]) == 0
    table = list(csv.DictReader(io.StringIO(capsys.readouterr().out)))
    assert len(table) == 14
    assert set(names.split()) <= set(table[0])


@pytest.mark.parametrize("form", ["table", "csv", "json", "markdown"])
def test_same_inputs_same_bytes_whatever_the_jobs(form, capsys):
    main(["stops", "--flat", LOOK, "-f", form])
    one = capsys.readouterr().out
    main(["stops", "--flat", LOOK, "-f", form, "--jobs", "2"])
    assert capsys.readouterr().out == one
    main(["stops", "--flat", LOOK, "-f", form, "--seed", "1"])
    assert capsys.readouterr().out != one


def test_an_output_file_is_not_overwritten_unless_told_and_leaves_nothing_beside(tmp_path, capsys):
    target = tmp_path / "out.csv"
    assert main(["stops", "--flat", LOOK, "-o", str(target)]) == 0
    first = target.read_text(encoding="utf-8")
    assert main(["stops", "--flat", LAB, "-o", str(target)]) == 4
    assert "give --force" in capsys.readouterr().err
    assert target.read_text(encoding="utf-8") == first
    assert main(["stops", "--flat", LAB, "-o", str(target), "--force"]) == 1
    assert target.read_text(encoding="utf-8") != first
    assert [path.name for path in tmp_path.iterdir()] == ["out.csv"]


def test_strict_refuses_what_would_only_warn(capsys):
    arguments = ["rates", "--material", "Si", "--energy", "45 eV"]
    assert main(arguments) == 0
    assert "warning: Yamamura-Tawara" in capsys.readouterr().err
    assert main([*arguments, "--quiet"]) == 0
    assert capsys.readouterr().err == ""
    assert main([*arguments, "--strict", "-f", "json"]) == 3
    refused = capsys.readouterr()
    assert "--strict" in refused.err
    assert refused.out == ""
    main([*arguments, "-f", "json"])
    assert "Yamamura-Tawara" in json.loads(capsys.readouterr().out)["warnings"][0]


@pytest.mark.parametrize("width", ["60", "80", "120"])
@pytest.mark.parametrize("job", [LOOK, LAB, "stacks/two-metal/job.yaml"])
def test_no_line_is_wider_than_the_paper(width, job, capsys, monkeypatch):
    monkeypatch.setenv("COLUMNS", width)
    main(["stops", job])
    assert max(map(len, capsys.readouterr().out.splitlines())) <= int(width)


def test_ascii_on_request_and_on_a_terminal_that_knows_no_other(capsys):
    main(["stops", "--flat", LOOK, "--ascii"])
    assert capsys.readouterr().out.isascii()
    plain = run("stops", "--flat", LOOK, env={**os.environ, "PYTHONIOENCODING": "ascii"})
    assert plain.returncode == 0
    assert plain.stdout.isascii()


def test_a_closed_pipe_ends_quietly():
    ends = subprocess.run(
        f"{sys.executable} -m stackmill materials | head -n 1",
        shell=True,
        capture_output=True,
        text=True,
        cwd=ROOT,
        check=False,
    )
    assert ends.stderr == ""


def test_a_job_may_come_from_standard_input():
    stack = (ROOT / "stacks/two-metal/stack.yaml").read_text(encoding="utf-8")
    answer = run("stops", "--flat", "-", "--goal", "metal 1 / strap", "--energy", "1 keV", input=stack)
    assert answer.returncode in (0, 1), answer.stderr
    assert "default mill" in answer.stdout


def test_why_traces_every_rate_and_ends_with_what_would_narrow_it(capsys):
    main(["stops", "--flat", LOOK, "--why"])
    told = capsys.readouterr().out
    for word in ("Yamamura", "measured on this mill: 41 nm/min", "density", "angular shape", "sha256", "seed 2026"):
        assert word in told
    assert told.rstrip().splitlines()[-1].startswith("To narrow it:")


def test_what_is_no_plain_file_is_never_replaced_and_a_link_stays_a_link(tmp_path, capsys):
    pipe, target, link = tmp_path / "pipe.csv", tmp_path / "target.csv", tmp_path / "link.csv"
    os.mkfifo(pipe)
    assert main(["stops", "--flat", LOOK, "-o", str(pipe), "--force"]) == 4
    assert "not a plain file" in capsys.readouterr().err
    assert pipe.is_fifo()
    target.write_text("old", encoding="utf-8")
    target.chmod(0o640)
    link.symlink_to(target)
    assert main(["stops", "--flat", LOOK, "-o", str(link), "--force"]) == 0
    assert link.is_symlink()
    assert target.read_text(encoding="utf-8").startswith("region,")
    assert target.stat().st_mode & 0o777 == 0o640


def test_a_new_file_has_the_usual_mode(tmp_path):
    before = os.umask(0o027)
    try:
        main(["stops", "--flat", LOOK, "-o", str(tmp_path / "a.csv")])
    finally:
        os.umask(before)
    assert (tmp_path / "a.csv").stat().st_mode & 0o777 == 0o640


@pytest.mark.parametrize("arguments", [["stops", LOOK, "--why"], ["stops", LOOK, "--all"], ["rates", LOOK, "--why"]])
def test_an_option_that_a_format_would_ignore_is_refused(arguments, capsys):
    assert main([*arguments, "-f", "json"]) == 2
    assert "does nothing for json" in capsys.readouterr().err


def shell(line):
    command = f"{sys.executable} -m stackmill {line}"
    return subprocess.run(command, shell=True, capture_output=True, text=True, cwd=ROOT, check=False)


def test_a_full_disk_or_no_output_at_all_is_no_fault_of_ours():
    full = shell("materials W > /dev/full")
    assert full.returncode == 4
    assert "standard output cannot be written" in full.stderr
    gone = shell("materials W >&-")
    assert gone.returncode == 4
    assert "Traceback" not in gone.stderr


def test_json_is_ascii_on_paper_that_knows_no_other(tmp_path):
    stack = (ROOT / "stacks/two-metal/stack.yaml").read_text(encoding="utf-8").replace("overcoat", "é±top")
    (tmp_path / "s.yaml").write_text(stack, encoding="utf-8")
    for form in ("json", "csv", "table"):
        answer = run(
            "stops", "--flat", str(tmp_path / "s.yaml"), "-f", form, env={**os.environ, "PYTHONIOENCODING": "ascii"}
        )
        assert answer.returncode == 0, answer.stderr
        assert answer.stdout.isascii()


def test_a_negative_seed_is_a_usage_error(capsys):
    assert main(["stops", LOOK, "--seed", "-1"]) == 2


@pytest.mark.parametrize("width", ["80", "120"])
@pytest.mark.parametrize("job", [LOOK, "stacks/two-metal/job.yaml", "stacks/copper/job.yaml"])
@pytest.mark.parametrize("verb", ["check", "rates"])
def test_no_description_is_wider_than_the_paper(verb, width, job, capsys, monkeypatch):
    monkeypatch.setenv("COLUMNS", width)
    assert main([verb, job]) == 0
    assert max(map(len, capsys.readouterr().out.splitlines())) <= int(width)


def test_stops_says_what_it_takes_as_exact(capsys):
    assert main(["stops", "--flat", LOOK, "--set", "mill.current_density=0.5 mA/cm2"]) == 0
    assert "NO ± GIVEN for the current density of the mill" in " ".join(capsys.readouterr().out.split())
    assert main(["stops", "--flat", LOOK, "--set", "mill.current_density=0.5 mA/cm2", "--format", "json"]) == 0
    assert json.loads(capsys.readouterr().out)["taken_as_exact"] == ["current density of the mill"]
    assert main(["stops", "--flat", LOOK]) == 0
    assert "NO ± GIVEN" not in capsys.readouterr().out
