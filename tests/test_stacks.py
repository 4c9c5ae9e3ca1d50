"""Every demo runs, and tells the story it is there for."""

from __future__ import annotations

from pathlib import Path

import pytest

from stackmill.cli.main import main
from stackmill.jobs import load_job
from stackmill.planning.stops import stop_table

ROOT = Path(__file__).parents[1]
FOUND = sorted(path for path in (ROOT / "stacks").rglob("*.yaml") if "\nrecipe:" in path.read_text(encoding="utf-8"))


@pytest.mark.parametrize("job", FOUND, ids=lambda path: str(path.relative_to(ROOT)))
def test_every_demo_job_is_in_order_and_forecast(job, capsys):
    assert main(["check", str(job)]) == 0
    assert main(["stops", str(job)]) in (0, 1)
    printed = capsys.readouterr().out
    assert "(invented)" in printed
    assert "Goal:" in printed


@pytest.mark.regression
def test_what_is_known_of_the_rates_decides_what_can_be_promised():
    library, lab, look = (
        stop_table(load_job(ROOT / f"stacks/four-metal/{name}.yaml")).window for name in ("library", "lab", "look")
    )
    assert library.best_chance < 0.3
    assert library.exposed_s is None
    assert 0.7 < lab.best_chance < 0.9
    assert lab.exposed_s is None
    assert lab.first_look_s < lab.best_stop_s + 60
    assert look.best_chance > 0.98
    assert look.lost_s - look.exposed_s > 300


@pytest.mark.closed_form
def test_the_plugs_that_stand_are_about_three_per_cent_of_the_goal():
    table = stop_table(load_job(ROOT / "stacks/four-metal/look.yaml"), flat=True)
    region = table.ensemble.inputs.job.column_map.regions[0]
    goal = [c for r, c in table.ensemble.best_outcome.wanted if r == 0]
    plugs = [c for c in goal if "plug 1" in region.label(c)]
    share = region.area[plugs].sum() / region.area[goal].sum()
    assert share == pytest.approx(3.14159 * 250**2 / (1600 * 4000), rel=1e-3)
    assert table.window.left_standing == pytest.approx(share, abs=0.01)


@pytest.mark.regression
def test_covered_pads_keep_their_metal_and_the_look_makes_the_window():
    table = stop_table(load_job(ROOT / "stacks/two-metal/job.yaml"), flat=True)
    pads = [row for row in table.rows if row.region == "bond pad" and row.layer == "via 1"]
    assert pads
    assert all(row.time_s is None for row in pads)
    assert table.window.leg == 1
    assert table.window.best_chance > 0.9


@pytest.mark.regression
def test_copper_lands_inside_the_via_only_by_its_looks():
    table = stop_table(load_job(ROOT / "stacks/copper/job.yaml"), flat=True)
    assert table.window.leg == 3
    assert table.window.best_chance > 0.85
    assert table.window.lost_s - table.window.exposed_s < 120  # a stop of seconds, not minutes
    first = {row.region: row.time_s for row in table.rows if row.layer == "pad oxide" and row.column_number == 0}
    # the beam falls by 3 % at 10 mm, as the square: 0.03 x (1 + 4) mm2 / 100 mm2 in the field at (-1, 2) mm
    assert first["filled field"] / first["array"] == pytest.approx(1 / (1 - 0.03 * 5 / 100), rel=1e-9)


def test_arsenic_is_warned_of(capsys):
    main(["stops", str(ROOT / "stacks/gaas-amplifier/job.yaml")])
    told = capsys.readouterr().out
    assert "CAUTION, GaAs: arsenic" in told
    assert "trained staff" in told


@pytest.mark.regression
def test_the_sensors_membrane_is_kept():
    table = stop_table(load_job(ROOT / "stacks/sensor/job.yaml"))
    assert table.window.best_chance > 0.9
    assert table.window.lost_keep == 0  # the platinum itself, not the membrane, ends it


@pytest.mark.regression
def test_an_unknown_die_has_no_safe_window_but_a_first_look():
    table = stop_table(load_job(ROOT / "stacks/unknown/job.yaml"))
    assert table.window.exposed_s is None
    assert 0.0 < table.window.first_look_s < table.window.best_stop_s
    assert table.shares[0].name == "grey metal: rate" or "rate" in table.shares[0].name


@pytest.mark.regression
def test_three_coupons_are_worth_more_than_a_known_current():
    guessed, told = (
        stop_table(load_job(ROOT / f"stacks/unknown/{name}.yaml")).window for name in ("job", "from-coupon")
    )
    assert told.best_chance > guessed.best_chance + 0.3
