"""What the further keys of stack and mill come to in a job."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from stackmill.errors import InputErrors
from stackmill.jobs import bare_job, load_job, taken_as_exact

STACK = """\
cell: {x: 1 um, y: 1 um}
layers:
  - {name: lid, material: SiN PECVD, thickness: 100 nm}
  - name: upper
    material: SiO2 PECVD
    thickness: 350 nm
    features:
      - {name: bar, material: AlCu, line: {along: y, centre: 800 nm, width: 200 nm}}
  - name: lower
    material: SiO2 PECVD
    thickness: 250 nm
    features:
      - {name: post, material: W, via: {x: 300 nm, y: 300 nm, diameter: 280 nm}, through: [upper, lower]}
  - {name: substrate, material: Si, thickness: 300 um}
regions:
  - {name: middle, at: {x: 0 mm, y: 0 mm}}
  - {name: rim, at: {x: 6 mm, y: 8 mm}}
  - {name: somewhere}
"""
MILL = "gas: argon\ncurrent_density: 0.5 mA/cm2\n"


def job(*, stack=STACK, mill=MILL, more=""):
    blocks = {"stack": stack, "mill": mill}
    text = "".join(f"{key}:\n" + "".join(f"  {line}\n" for line in block.splitlines()) for key, block in blocks.items())
    step = "recipe: {steps: [{energy: 1 keV, incidence: 0 deg, motion: still, for: 1 min}]}\n"
    return load_job(text + step + more)


@pytest.mark.closed_form
def test_regions_get_the_beam_of_their_place():
    found = job(mill=MILL + "profile: {falls: 3 %, at: 10 mm}")
    assert found.beam_share == (1.0, pytest.approx(0.97), 1.0)
    assert found.notes == (
        "the beam changes across the die, and 'somewhere' has no 'at': the stated current is taken there",
    )
    shifted = job(mill=MILL + "profile: {falls: 3 %, at: 10 mm, centre: {x: 6 mm, y: 8 mm}}")
    assert shifted.beam_share == (pytest.approx(0.97), 1.0, 1.0)
    plain = job()
    assert plain.beam_share == (1.0, 1.0, 1.0)
    assert plain.notes == ()
    assert bare_job(["W"]).beam_share == (1.0,)


@pytest.mark.closed_form
def test_a_map_counts_from_the_folder_of_the_mill_and_into_the_hash(tmp_path: Path):
    (tmp_path / "mills").mkdir()
    beam = tmp_path / "mills/beam.csv"
    (tmp_path / "mills/mill.yaml").write_text(MILL + "profile: {map: beam.csv}", encoding="utf-8")
    (tmp_path / "stack.yaml").write_text(STACK, encoding="utf-8")
    (tmp_path / "job.yaml").write_text(
        "stack: stack.yaml\nmill: mills/mill.yaml\n"
        "recipe: {steps: [{energy: 1 keV, incidence: 0 deg, motion: still, for: 1 min}]}\n",
        encoding="utf-8",
    )
    hashes = set()
    for rim in (0.9, 0.8):
        beam.write_text(f"x_mm,y_mm,relative\n0,0,1\n12,0,1\n0,16,1\n12,16,{rim}\n", encoding="utf-8")
        found = load_job(tmp_path / "job.yaml")
        assert found.beam_share == (1.0, pytest.approx(0.75 + rim / 4), 1.0)
        hashes.add(found.inputs_sha256)
    assert len(hashes) == 2
    stack = tmp_path / "mills/stack.yaml"
    stack.write_text(STACK, encoding="utf-8")
    lone = load_job(stack, overrides={"mill.profile": "{map: beam.csv}"})
    assert lone.is_default_mill
    assert lone.beam_share == (1.0, pytest.approx(0.95), 1.0)


@pytest.mark.closed_form
def test_a_feature_can_be_named_in_each_layer_it_goes_through():
    found = job(more="goal: {feature: upper / post, in: [middle]}\nkeep: {feature: lower / post, at_least: 100 nm}")
    assert found.goal is not None
    assert (found.goal.layer, found.goal.feature) == ("upper", "post")
    assert found.feature_index("upper", "post") == found.feature_index("lower", "post")
    with pytest.raises(InputErrors, match="layer 'lower' has no feature called 'bar'"):
        job(more="goal: lower / bar")
    gone = STACK.replace("{name: middle,", "{name: middle, absent: {features_of: [lower]},")
    with pytest.raises(InputErrors, match="region 'middle' has no 'upper / post'"):
        job(stack=gone, more="goal: {feature: upper / post, in: [middle]}")
    kept = STACK.replace("{name: middle,", "{name: middle, absent: {features_of: [upper]},")
    assert job(stack=kept, more="goal: {feature: upper / post, in: [middle]}").goal


@pytest.mark.closed_form
def test_aliases_in_such_stacks_become_own_names():
    stack = STACK.replace("material: W,", "material: tungsten,")
    own = job(stack=stack).stack.layers[2].features[0]
    assert own.material == "W"
    assert own.through == ("upper", "lower")


@pytest.mark.closed_form
def test_a_job_by_tops_and_a_scale():
    tops = STACK.replace("thickness: 100 nm", "top: 700 nm ± 30 nm").replace("thickness: 350 nm", "top: 600 nm ± 40 nm")
    tops = "measured: {scale: ± 2 %}\n" + tops.replace("thickness: 250 nm", "top: 250 nm ± 9 nm")
    found = job(stack=tops)
    assert found.column_map.scale_sd == 0.02
    assert [layer.thickness.value for layer in found.stack.layers[:3]] == [100.0, 350.0, 250.0]
    assert found.stack.layers[0].thickness.sd == pytest.approx(50.0)
    plain = job()
    for one, other in zip(found.column_map.regions, plain.column_map.regions, strict=True):
        assert np.allclose(one.floor_nm, other.floor_nm)
    again = job(stack=tops.replace("material: Si,", "material: silicon,"))
    assert [layer.thickness.value for layer in again.stack.layers[:3]] == [100.0, 350.0, 250.0]


def test_what_has_no_error_is_named():
    assert taken_as_exact(job()) == (
        "thickness of lid",
        "thickness of upper",
        "thickness of lower",
        "current density of the mill",
    )
    sure = STACK.replace("100 nm", "100 nm ± 5 %").replace("350 nm", '"350 nm, across die ± 2 %"')
    assert taken_as_exact(job(stack=sure, mill="gas: argon\ncurrent_density: 0.5 mA/cm2 ± 6 %\n")) == (
        "thickness of lower",
    )
    assert taken_as_exact(job(stack="measured: {scale: ± 2 %}\n" + STACK)) == ("current density of the mill",)


def test_a_step_s_own_current_and_process_rates_are_named_where_exact():
    blocks = {"stack": STACK, "mill": MILL}
    text = "".join(f"{key}:\n" + "".join(f"  {line}\n" for line in block.splitlines()) for key, block in blocks.items())
    beam = "energy: 1 keV, incidence: 0 deg, motion: still, for: 1 min"
    steps = (
        "recipe:\n  steps:\n"
        "    - {name: etch, rates: {SiN PECVD: 90 nm/min, W: 1 nm/min ± 10 %, other: 0 nm/min}, for: 1 min}\n"
        f"    - {{name: weak, {beam}, current_density: 0.2 mA/cm2}}\n"
        f"    - {{name: known, {beam}, current_density: 0.3 mA/cm2 ± 5 %}}\n"
    )
    named = [name for name in taken_as_exact(load_job(text + steps)) if not name.startswith("thickness")]
    assert named == ["current density in weak", "rate of SiN PECVD in etch"]
