# ruff: noqa: E501 - files and messages stand as they are written
"""Jobs: files bound and checked across each other, options and overrides, and what a Job then offers."""

from __future__ import annotations

import contextlib
import io
import sys
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.documents.recipe import Beam, Cover, Process, Strip
from stackmill.errors import FileAccessError, InputErrors, UsageError
from stackmill.jobs import bare_job, load_job, overrides
from stackmill.units import Measure

STACK = """\
title: two metals (invented)
cell: {x: 4 um, y: 4 um}
layers:
  - {name: overcoat, material: SiN PECVD, thickness: 600 nm ± 8 %}
  - name: metal 2
    material: SiO2 PECVD
    thickness: 900 nm
    features:
      - {name: bus, material: AlCu, line: {along: y, centre: 2 um, width: 1 um}}
  - {name: oxide, material: SiO2, thickness: 500 nm}
  - {name: substrate, material: Si, thickness: 300 um}
regions:
  - {name: array}
  - {name: field, absent: {features_of: [metal 2]}}
"""
MILL = "title: gun A (invented)\ngas: argon\ncurrent_density: 0.4 mA/cm2 ± 6 %\n"
RECIPE = """\
steps:
  - {name: paint, cover: [field], with: silver paint}
  - {name: etch, rates: {SiN PECVD: 90 nm/min, other: 0 nm/min}, for: 8 min}
  - {name: bulk, energy: 2 keV, incidence: 30 deg, motion: rotating, to: oxide}
  - {name: touch, energy: 500 eV, incidence: 45 deg, motion: rotating, seen: {layer: substrate, in: array}}
"""
JOB = """\
stack: stack.yaml
mill: mill.yaml
recipe: recipe.yaml
goal: {layer: metal 2, feature: bus, in: [array]}
keep: [{in: [field], layer: oxide, at_least: 300 nm}]
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, text in {"stack": STACK, "mill": MILL, "recipe": RECIPE, "job": JOB}.items():
        (tmp_path / f"{name}.yaml").write_text(text, encoding="utf-8")
    return tmp_path


def headlines(refused: pytest.ExceptionInfo[InputErrors], folder: Path) -> list[str]:
    return [error.headline().replace(f"{folder}/", "") for error in refused.value.errors]


def test_a_job_binds_its_files(folder: Path) -> None:
    job = load_job(folder / "job.yaml")
    assert job.title == "two metals (invented)"
    assert (job.mill.title, job.is_default_mill) == ("gun A (invented)", False)
    assert [step.name for step in job.recipe.steps] == ["paint", "etch", "bulk", "touch"]
    assert job.goal is not None
    assert (job.goal.layer, job.goal.feature, job.confidence) == ("metal 2", "bus", 0.9)
    assert list(job.milled_materials) == list(job.column_map.materials)
    assert set(job.milled_materials) == {"SiN PECVD", "SiO2 PECVD", "AlCu", "SiO2", "Si"}
    assert "silver paint" in job.materials
    assert job.column_map.features[job.feature_index("metal 2", "bus")] == (1, "bus")


def test_paths_count_from_the_job_file(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (folder / "elsewhere").mkdir()
    monkeypatch.chdir(folder / "elsewhere")
    assert load_job("../job.yaml").title == "two metals (invented)"


def test_blocks_in_place_say_the_same_as_files(folder: Path) -> None:
    blocks = JOB
    for name, text in {"stack": STACK, "mill": MILL, "recipe": RECIPE}.items():
        indented = "".join(f"  {line}\n" for line in text.splitlines())
        blocks = blocks.replace(f"{name}: {name}.yaml\n", f"{name}:\n{indented}")
    assert load_job(blocks).inputs_sha256 == load_job(folder / "job.yaml").inputs_sha256


def test_the_hash_is_of_what_the_files_say(folder: Path) -> None:
    before = load_job(folder / "job.yaml").inputs_sha256
    (folder / "stack.yaml").write_text("# a comment\n" + STACK, encoding="utf-8")
    assert load_job(folder / "job.yaml").inputs_sha256 == before
    (folder / "stack.yaml").write_text(STACK.replace("900 nm", "901 nm"), encoding="utf-8")
    assert load_job(folder / "job.yaml").inputs_sha256 != before


def test_standard_input(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(folder)
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(JOB.encode()), encoding="utf-8"))
    assert load_job("-").mill.title == "gun A (invented)"


def test_a_lone_stack_gets_the_default_mill_and_one_step() -> None:
    job = load_job(STACK, goal="metal 2 / bus", energy="800 eV", motion="rocking ± 10 deg")
    assert job.is_default_mill
    assert "invented" in job.mill.title
    (step,) = job.recipe.steps
    assert isinstance(step, Beam)
    assert step.to is not None
    assert (step.energy, step.incidence, str(step.motion)) == (800.0, 45.0, "rocking ± 10 deg")
    assert (step.to.layer, step.to.feature) == ("metal 2", "bus")
    assert job.goal is not None
    assert (job.goal.layer, job.goal.feature) == ("metal 2", "bus")


def test_a_lone_stack_without_a_goal_is_milled_to_its_substrate() -> None:
    job = load_job(STACK, current_density="0.8 mA/cm2 ± 5 %", incidence="60 deg", confidence="80 %")
    (step,) = job.recipe.steps
    assert isinstance(step, Beam)
    assert step.to is not None
    assert (job.goal, step.to.layer, step.incidence, job.confidence) == (None, "substrate", 60.0, 0.8)
    assert job.mill.current_density == Measure(0.8, 0.04)


def test_options_for_a_lone_stack_are_refused_with_a_job(folder: Path) -> None:
    with pytest.raises(UsageError) as refused:
        load_job(folder / "job.yaml", energy="1 keV")
    assert refused.value.headline() == (
        "error: --energy is for a lone stack, and this is a job (write --set 'recipe.steps.1.energy=1 keV')"
    )


def test_options_are_checked_like_files() -> None:
    with pytest.raises(InputErrors) as refused:
        load_job(STACK, goal="metal 3", energy="1", incidence="95 deg", confidence="1.5", motion="dancing")
    assert [error.headline() for error in refused.value.errors] == [
        "--confidence: error: 1.5 has no unit (write 1.5 %)",
        "--energy: error: 1 has no unit (write 1 keV)",
        "--incidence: error: 95 deg does not hit the surface (0 deg is straight down, and it must stay below 90 deg)",
        "--motion: error: 'dancing' is no motion (write rotating, still or rocking ± 20 deg)",
    ]


def test_an_unknown_goal_is_told_once() -> None:
    with pytest.raises(InputErrors) as refused:
        load_job(STACK, goal="metal 3")
    assert [error.headline() for error in refused.value.errors] == [
        "--goal: error: there is no layer called 'metal 3' (did you mean metal 2?)"
    ]


@pytest.mark.parametrize(
    ("key", "value", "found"),
    [
        ("mill.current_density", "0.3 mA/cm2", lambda job: job.mill.current_density.value == 0.3),
        ("mill.stage.zero_error", "± 2 deg", lambda job: job.mill.stage.zero_error.sd == 2.0),
        ("recipe.steps.3.energy", "1 keV", lambda job: job.recipe.steps[2].energy == 1000.0),
        ("recipe.steps.bulk.energy", "1 keV", lambda job: job.recipe.steps[2].energy == 1000.0),
        ("stack.layers.oxide.thickness", "400 nm ± 3 %, across die ± 1 %", lambda job: job.stack.layers[2].thickness.across_sd == 4.0),
        ("stack.layers.2.features.bus.line.width", "2 um", lambda job: job.stack.layers[1].features[0].shape.width == 2000.0),
        ("goal.in", "[array, array]", lambda job: job.goal.in_ == ("array", "array")),
        ("goal", "oxide", lambda job: job.goal.layer == "oxide"),
        ("confidence", "75 %", lambda job: job.confidence == 0.75),
        ("title", "another", lambda job: job.title == "another"),
    ],
)  # fmt: skip
def test_overrides(folder: Path, key: str, value: str, found: object) -> None:
    job = load_job(folder / "job.yaml", overrides={key: value})
    assert callable(found)
    assert found(job)
    assert not found(load_job(folder / "job.yaml"))


def test_an_override_changes_the_hash(folder: Path) -> None:
    hashes = {load_job(folder / "job.yaml", overrides=o).inputs_sha256 for o in ({}, {"mill.gas": "xenon"})}
    assert len(hashes) == 2


def test_a_lone_stack_takes_overrides_with_and_without_its_name() -> None:
    for key in ("stack.layers.oxide.thickness", "layers.oxide.thickness"):
        assert load_job(STACK, overrides={key: "400 nm"}).stack.layers[2].thickness == Measure(400.0)
    assert load_job(STACK, overrides={"mill.gas": "xenon"}).mill.gas == "xenon"


@pytest.mark.parametrize(
    ("key", "value", "message"),
    [
        ("mil.current_density", "1 mA/cm2", "--set mil.current_density: error: this job file has no key 'mil' (did you mean 'mill'?)"),
        ("mill.curent_density", "1 mA/cm2", "--set mill.curent_density: error: this mill file has no key 'curent_density' (did you mean 'current_density'?)"),
        ("mill.current_density", "0.3", "--set mill.current_density: error: 0.3 has no unit (write 0.3 mA/cm2)"),
        ("recipe.steps.9.energy", "1 keV", "--set recipe.steps.9.energy: error: there is no item '9' in this list (count from 1 to 4, or a name: paint, etch, bulk or touch)"),
        ("recipe.steps.0.energy", "1 keV", "--set recipe.steps.0.energy: error: there is no item '0' in this list (count from 1 to 4, or a name: paint, etch, bulk or touch)"),
        ("mill.gas.kind", "argon", "--set mill.gas.kind: error: gas is a single value and has no 'kind' (end the path there)"),
        ("goal.in", "[field]", "--set goal.in:1:2: error: region 'field' has no 'metal 2 / bus' (it is in array)"),
        ("goal.in", "[field", "--set goal.in:1:1: error: the list opened here with [ is not closed (add the missing ] or comma)"),
    ],
)  # fmt: skip
def test_overrides_are_checked_like_files(folder: Path, key: str, value: str, message: str) -> None:
    with pytest.raises(InputErrors) as refused:
        load_job(folder / "job.yaml", overrides={key: value})
    assert headlines(refused, folder) == [message]


def test_override_texts() -> None:
    assert overrides(["mill.gas=xenon", " confidence = 80 % "]) == {"mill.gas": "xenon", "confidence": "80 %"}
    for texts, what in (["mill.gas"], "not of the form KEY=VALUE"), (["a=1", "a=2"], "given twice"):
        with pytest.raises(UsageError, match=what):
            overrides(texts)


def test_complaints_of_all_files_at_once(folder: Path) -> None:
    (folder / "stack.yaml").write_text(STACK.replace("500 nm", "500").replace("AlCu", "AlCuu"), encoding="utf-8")
    (folder / "mill.yaml").write_text(MILL.replace("argon", "agron"), encoding="utf-8")
    (folder / "recipe.yaml").write_text(RECIPE.replace("to: oxide", "to: oxyde"), encoding="utf-8")
    (folder / "job.yaml").write_text(JOB.replace("layer: oxide", "layer: oxid"), encoding="utf-8")
    with pytest.raises(InputErrors) as refused:
        load_job(folder / "job.yaml")
    assert headlines(refused, folder) == [
        "job.yaml:5:29: error: there is no layer called 'oxid' (did you mean oxide?)",
        "stack.yaml:9:31: error: no material is called 'AlCuu' (did you mean AlCu?)",
        "stack.yaml:10:46: error: 500 has no unit (write 500 nm)",
        "mill.yaml:2:6: error: gas cannot be 'agron' (did you mean argon?)",
        "recipe.yaml:4:74: error: there is no layer called 'oxyde' (did you mean oxide?)",
    ]


def refusals(stack: str, job: str = "", *, recipe: str = "") -> list[str]:
    """The complaints about a job written in place, without their places."""
    blocks = {
        "stack": stack,
        "recipe": recipe or "steps: [{energy: 1 keV, incidence: 0 deg, motion: still, for: 1 min}]",
    }
    text = "".join(f"{key}:\n" + "".join(f"  {line}\n" for line in block.splitlines()) for key, block in blocks.items())
    with pytest.raises(InputErrors) as refused:
        load_job(text + job)
    return [error.what for error in refused.value.errors]


@pytest.mark.parametrize(
    ("regions", "goal", "complaints"),
    [
        ("{name: a, solid: {metal 2: pad}}", "metal 2 / bus", ["no region has 'metal 2 / bus'"]),
        ("{name: a, absent: {layers: [oxide]}}", "oxide", ["no region has layer 'oxide'"]),
        ("{name: a, absent: {features_of: [metal 2]}}", "metal 2", ["no region has layer 'metal 2'"]),
        ("{name: a, absent: {layers: [metal 2]}}", "metal 2 / bus", ["no region has 'metal 2 / bus'"]),
        ("{name: a}, {name: b, absent: {layers: [oxide]}}", "{layer: oxide, in: b}", ["region 'b' has no layer 'oxide'"]),
    ],
)  # fmt: skip
def test_goals_that_no_region_has(regions: str, goal: str, complaints: list[str]) -> None:
    pad = "      - {name: pad, material: W, block: {x: [0 um, 1 um], y: [0 um, 1 um]}}\n  - {name: oxide"
    stack = STACK.replace("material: SiO2 PECVD", "material: none").replace("  - {name: oxide", pad)
    stack = f"{stack[: stack.index('regions:')]}regions: [{regions}]"
    assert refusals(stack, f"goal: {goal}") == complaints


def test_a_step_may_end_on_a_layer_that_is_absent(folder: Path) -> None:
    """Reaching an absent layer is reaching the next present one below."""
    (folder / "stack.yaml").write_text(STACK.replace("features_of: [metal 2]", "layers: [metal 2]"), encoding="utf-8")
    (folder / "recipe.yaml").write_text(
        RECIPE.replace("to: oxide", "to: {layer: metal 2, in: field}"), encoding="utf-8"
    )
    assert load_job(folder / "job.yaml").recipe.steps[2].name == "bulk"


def test_a_value_that_stands_in_earns_no_complaint_of_its_own() -> None:
    """An unreadable value is replaced to look further; what it was replaced by may not fit, and that is not told."""
    thin = STACK.replace("500 nm", "100 nm")
    assert refusals(thin, "keep: {layer: oxide, at_least: 50}") == ["50 has no unit"]
    narrow = STACK.replace("cell: {x: 4 um, y: 4 um}", "cell: {x: 1 um, y: 1 um}").replace(
        "centre: 2 um", "centre: 0.5 um"
    )
    assert refusals(narrow.replace("width: 1 um", "width: 1")) == ["1 has no unit"]


def test_an_unknown_key_does_not_hide_what_else_is_wrong() -> None:
    stack = STACK.replace("thickness: 500 nm", "thickness: 500 nm, colour: red")
    assert refusals(stack, "goal: oxid") == [
        "layer 'oxide' has no key 'colour'",
        "there is no layer called 'oxid'",
    ]


def test_aliases_become_the_materials_own_names(folder: Path) -> None:
    job = load_job(folder / "job.yaml")
    alias = next(a for a in job.materials["Si"].aliases)
    text = STACK.replace("material: Si,", f"material: {alias},")
    again = load_job(text)
    assert again.stack.layers[-1].material == "Si"
    assert set(again.milled_materials) == set(job.milled_materials)


def test_aliases_are_understood_everywhere(folder: Path) -> None:
    plain = load_job(folder / "job.yaml").materials
    silicon, paint = plain["Si"].aliases[0], plain["silver paint"].aliases[0]
    films = f"width: 1 um}}, cap: {{material: {silicon}, thickness: 9 nm}}, liner: {{material: {silicon}, thickness: 9 nm}}}}"
    (folder / "stack.yaml").write_text(STACK.replace("width: 1 um}}", films), encoding="utf-8")
    (folder / "recipe.yaml").write_text(
        RECIPE.replace("silver paint", paint).replace(
            "  - {name: bulk", f"  - {{strips: [{silicon}]}}\n  - {{name: bulk"
        ),
        encoding="utf-8",
    )
    job = load_job(folder / "job.yaml")
    cover, _, strip, *_ = job.recipe.steps
    bus = job.stack.layers[1].features[0]
    assert isinstance(cover, Cover)
    assert isinstance(strip, Strip)
    assert bus.cap is not None
    assert (cover.with_, strip.strips) == ("silver paint", ("Si",))
    assert (bus.cap.material, bus.liner[0].material) == ("Si", "Si")
    assert silicon not in job.materials


def test_a_misfit_among_a_labs_materials_is_shown_where_it_stands(folder: Path) -> None:
    (folder / "lab.yaml").write_text(
        "materials:\n  - {name: my oxide, like: SiO2}\n  - {name: my other, like: SiO9}\n", encoding="utf-8"
    )
    (folder / "job.yaml").write_text(JOB + "materials: lab.yaml\n", encoding="utf-8")
    with pytest.raises(InputErrors) as refused:
        load_job(folder / "job.yaml")
    (line,) = headlines(refused, folder)
    assert line.startswith("lab.yaml:3:28: error: no material is called 'SiO9'")


def test_in_broken_files_a_labs_materials_are_not_taken_for_unknown(folder: Path) -> None:
    (folder / "lab.yaml").write_text("materials: [{name: my oxide, like: SiO2}]", encoding="utf-8")
    broken = STACK.replace("material: SiO2,", "material: my oxide,").replace("name: array", "nam: array")
    (folder / "stack.yaml").write_text(broken.replace("{name: field", "{nae: field"), encoding="utf-8")
    (folder / "job.yaml").write_text(JOB + "materials: lab.yaml\n", encoding="utf-8")
    with pytest.raises(InputErrors) as refused:
        load_job(folder / "job.yaml")
    assert [line for line in headlines(refused, folder) if "material" in line] == []


def test_a_labs_own_materials(folder: Path) -> None:
    (folder / "lab.yaml").write_text("materials: [{name: my oxide, like: SiO2}]", encoding="utf-8")
    (folder / "stack.yaml").write_text(STACK.replace("material: SiO2,", "material: my oxide,"), encoding="utf-8")
    (folder / "job.yaml").write_text(JOB + "materials: lab.yaml\n", encoding="utf-8")
    assert "my oxide" in load_job(folder / "job.yaml").milled_materials
    (folder / "job.yaml").write_text(JOB + "materials: [lab.yaml]\n", encoding="utf-8")
    assert "my oxide" in load_job(folder / "job.yaml").milled_materials


def test_a_bare_job_has_the_materials_asked_for() -> None:
    job = bare_job(["W", "Al"], gas="xenon", energy="1 keV", incidence="60 deg")
    assert list(job.milled_materials) == ["W", "Al"]
    (step,) = job.recipe.steps
    assert isinstance(step, Beam)
    assert (job.mill.gas, step.energy, step.incidence) == ("xenon", 1000.0, 60.0)
    with pytest.raises(InputErrors, match="no material is called 'Unobtainium'"):
        bare_job(["Unobtainium"])


def test_a_missing_file_is_no_input_error(tmp_path: Path) -> None:
    (tmp_path / "job.yaml").write_text("stack: x\n", encoding="utf-8")
    with pytest.raises(FileAccessError) as refused:
        load_job(tmp_path / "jop.yaml")
    assert refused.value.headline() == f"{tmp_path}/jop.yaml: error: there is no such file (did you mean job.yaml?)"
    assert refused.value.exit_code == 4
    with pytest.raises(FileAccessError, match="a folder"):
        load_job(tmp_path)


@pytest.mark.parametrize(("text", "kind"), [(MILL, "mill"), (RECIPE, "recipe"), ("materials: []\n", "materials")])
def test_other_kinds_of_file_need_a_job(text: str, kind: str) -> None:
    with pytest.raises(InputErrors, match=f"this is a {kind} file .give a job file that names it as '{kind}:'"):
        load_job(text)


def test_step_errors_for_timing_have_their_place(folder: Path) -> None:
    job = load_job(folder / "job.yaml")
    passed, never = job.step_error(2, passed=True), job.step_error(3, passed=False)
    assert passed.headline().replace(f"{folder}/", "") == (
        "recipe.yaml:4:74: error: 'oxide' has been reached before step 'bulk' begins"
        " (aim deeper, or leave the step out)"
    )
    assert (never.line, never.what) == (5, "step 'touch' never reaches 'substrate'")


def test_notes_tell_of_materials_the_stack_lacks(folder: Path) -> None:
    (folder / "recipe.yaml").write_text(RECIPE.replace("other: 0", "W: 5 nm/min, other: 0"), encoding="utf-8")
    assert load_job(folder / "job.yaml").notes == ("step 'etch' also names W, which this stack does not have",)


def test_steps_keep_their_order_and_kind(folder: Path) -> None:
    kinds = [type(step) for step in load_job(folder / "job.yaml").recipe.steps]
    assert kinds == [Cover, Process, Beam, Beam]


PIECES = [
    "",
    "0",
    "-1 nm",
    "[]",
    "{}",
    "x",
    "'",
    "{",
    "- ",
    "\n",
    "none",
    "1e9 nm",
    "array",
    "metal 2",
    "oxide",
    "90 deg",
]


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_mutated_jobs_are_read_or_refused(data: st.DataObject) -> None:
    """Whatever is wrong in a job, and however many things, it is told in words."""
    text = "stack:\n" + "".join(f"  {line}\n" for line in STACK.splitlines()) + "recipe:\n"
    text += "".join(f"  {line}\n" for line in RECIPE.splitlines()) + JOB.split("recipe.yaml\n")[1]
    for _ in range(data.draw(st.integers(1, 4))):
        start = data.draw(st.integers(0, len(text)))
        end = data.draw(st.integers(start, min(len(text), start + 12)))
        text = text[:start] + data.draw(st.sampled_from(PIECES)) + text[end:]
    with contextlib.suppress(InputErrors):
        assert load_job(text + "\n").column_map.regions
