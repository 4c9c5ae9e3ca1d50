"""The calibrate verb: what it prints, what it writes, and when it refuses."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import pytest
import yaml

from stackmill.cli.main import main
from stackmill.report.calibration import ROW_NAMES

ROOT = Path(__file__).parents[2]
DEMO = ["calibrate", "stacks/unknown/coupons.csv", "--mill", "stacks/unknown/mill-from-coupon.yaml"]
HEADER = "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\n"


@pytest.fixture(autouse=True)
def _at_the_root(monkeypatch):
    monkeypatch.chdir(ROOT)
    monkeypatch.setenv("COLUMNS", "80")


def test_the_demo_calibration_is_what_the_verb_writes(tmp_path, capsys):
    path = tmp_path / "today.yaml"
    assert main([*DEMO, "-o", str(path)]) == 0
    assert capsys.readouterr().out.startswith("GOOD:")
    mine, kept = (yaml.safe_load(p.read_text(encoding="utf-8")) for p in (path, ROOT / "stacks/unknown/today.yaml"))
    for key in ("title", "made"):
        del mine[key], kept[key]
    assert mine == kept
    assert main([*DEMO, "-o", str(path)]) == 4
    assert "there already" in capsys.readouterr().err


def test_machine_forms(capsys):
    assert main([*DEMO, "-f", "json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert set(answer["rows"][0]) == set(ROW_NAMES)
    assert answer["verdict"] == "good"
    count = len(answer["parameters"])
    assert len(answer["mean"]) == count
    assert [len(row) for row in answer["covariance"]] == [count] * count
    assert main([*DEMO, "-f", "csv"]) == 0
    assert len(list(csv.DictReader(io.StringIO(capsys.readouterr().out)))) == 3


def test_a_refused_fit_leaves_with_one_and_writes_nothing(tmp_path, capsys):
    coupons, out = tmp_path / "c.csv", tmp_path / "o.yaml"
    coupons.write_text(HEADER + "a,W,1000,0,10,300,3\nb,W,1000,0,10,600,6\n", encoding="utf-8")
    assert main(["calibrate", str(coupons), "--mill", "stacks/four-metal/mill.yaml", "-o", str(out)]) == 1
    assert capsys.readouterr().out.startswith("REFUSED:")
    assert not out.exists()


def test_all_mistakes_of_all_files_come_at_once(tmp_path, capsys):
    coupons, mill = tmp_path / "c.csv", tmp_path / "m.yaml"
    coupons.write_text(HEADER + "a,W,1000,0,ten,300,3\n", encoding="utf-8")
    mill.write_text("gas: argonne\ncurrent_density: 0.5 mA/cm2\n", encoding="utf-8")
    assert main(["calibrate", str(coupons), "--mill", str(mill)]) == 3
    error = capsys.readouterr().err
    assert "m.yaml:1:6: error" in error
    assert "c.csv:2:12: error: 'ten' is no number" in error
    coupons.write_text(HEADER + "a,Wolframite,1000,0,10,300,3\nb,W,20,0,10,3,1\n", encoding="utf-8")
    assert main(["calibrate", str(coupons), "--mill", "stacks/four-metal/mill.yaml"]) == 3
    error = capsys.readouterr().err
    assert "c.csv:2:1: error: no material is called 'Wolframite'" in error
    assert "c.csv:3:1: error" in error


def test_forecasting_verbs_take_a_calibration_and_say_so(capsys):
    job, told = "stacks/four-metal/library.yaml", "stacks/unknown/today.yaml"
    chances = []
    for more in ([], ["--calibration", told]):
        main(["stops", job, "--flat", "-f", "json", *more])
        chances.append(json.loads(capsys.readouterr().out)["windows"][0]["best_chance"])
    assert chances[1] > 3 * chances[0]
    assert main(["rates", job, "--calibration", told, "--why"]) == 0
    text = capsys.readouterr().out
    assert "coupon 'oxide piece'" in " ".join(text.split())
    assert "- calibration Bench mill without a current probe (invented)" in text
    assert main(["relief", job, "--calibration", told, "--at", "10min", "--grid", "40"]) == 0


def test_a_calibration_for_another_gas_and_a_missing_one_are_refused(tmp_path, capsys):
    job = ["stops", "stacks/four-metal/library.yaml", "--flat"]
    assert main([*job, "--calibration", "nowhere.yaml"]) == 3
    assert "nowhere.yaml" in capsys.readouterr().err
    krypton = tmp_path / "kr.yaml"
    text = (ROOT / "stacks/unknown/today.yaml").read_text(encoding="utf-8").replace("gas: argon", "gas: krypton")
    krypton.write_text(text, encoding="utf-8")
    assert main([*job, "--calibration", str(krypton)]) == 3
    assert "was made with krypton, and the mill runs on argon" in capsys.readouterr().err
    assert main([*job, "--set", "mill.current_density=from coupon"]) == 3
    assert "needs a calibration" in capsys.readouterr().err


def test_a_doubtful_calibration_warns_whoever_binds_it(tmp_path, capsys):
    doubtful = tmp_path / "d.yaml"
    text = (
        (ROOT / "stacks/unknown/today.yaml").read_text(encoding="utf-8").replace("verdict: good", "verdict: doubtful")
    )
    doubtful.write_text(text, encoding="utf-8")
    main(["rates", "stacks/four-metal/library.yaml", "--calibration", str(doubtful)])
    assert "is doubtful" in capsys.readouterr().err
