"""The JSON Schemas: sound themselves, true of every file shipped, and no rubber stamps."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
import yaml
from documents_examples import RECIPE, STACK
from jsonschema import Draft202012Validator

from stackmill.cli.main import main
from stackmill.documents.marks import read_tree
from stackmill.documents.schema import json_schema
from stackmill.errors import InputErrors
from stackmill.jobs.files import kind_of

ROOT = Path(__file__).parents[2]
KINDS = ("stack", "mill", "recipe", "job", "materials", "calibration")
SHIPPED = sorted([*(ROOT / "stacks").rglob("*.yaml"), *(ROOT / "tests/published/open_stack").glob("*.yaml")])
BROKEN = ROOT / "tests/bad/files"


@pytest.fixture(scope="module")
def validators():
    return {kind: Draft202012Validator(json_schema(kind)) for kind in KINDS}


@pytest.mark.parametrize("kind", KINDS)
def test_each_is_a_schema_of_its_dialect(kind, validators):
    Draft202012Validator.check_schema(validators[kind].schema)
    assert validators[kind].schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    text = json.dumps(validators[kind].schema)
    assert '"null"' not in text
    for reference in text.split('"#/$defs/')[1:]:
        assert reference.split('"')[0] in validators[kind].schema["$defs"]


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: str(path.relative_to(ROOT)))
def test_every_shipped_file_fits_as_we_read_it_and_as_editors_do(path, validators):
    text = path.read_text(encoding="utf-8")
    tree = read_tree(text, str(path))
    kind = kind_of(tree)
    assert kind is not None
    for content in (tree.plain(), yaml.safe_load(text)):
        assert [error.message for error in validators[kind].iter_errors(content)] == []


def fits(validators, kind, text):
    return validators[kind].is_valid(read_tree(text, "").plain())


@pytest.mark.parametrize(("kind", "text"), [("stack", STACK), ("recipe", RECIPE)])
def test_the_examples_fit(kind, text, validators):
    assert fits(validators, kind, text)


LAYERS = "layers: [{{name: a, material: SiO2, {}}}, {{name: b, material: Si, thickness: 300 um}}]"
STEP = "steps: [{{energy: 1 keV, incidence: 45 deg, motion: rotating, {}}}]"
MILL = "gas: argon\ncurrent_density: 0.5 mA/cm2\n"


@pytest.mark.parametrize(
    ("kind", "text", "good"),
    [
        ("stack", LAYERS.format("thickness: 600 nm +/- 8 %"), True),
        ("stack", LAYERS.format('thickness: "600 nm ± 8 %, across die ± 3 %"'), True),
        ("stack", LAYERS.format("top: 5.37 um ± 50 nm, level: die"), True),
        ("stack", LAYERS.format("thickness: 600"), False),
        ("stack", LAYERS.format("thickness: 600 nm ± 8"), False),
        ("stack", LAYERS.format("thickness: 600 nm, top: 5 um"), False),
        ("stack", LAYERS.format("coverage: planarised"), False),
        ("stack", LAYERS.format("thickness: 600 nm, colour: red"), False),
        ("stack", LAYERS.format("thickness: 600 nm, coverage: planarized"), False),
        ("stack", LAYERS.format("thickness: 9 nm, features: [{name: f, material: W, pattern_density: 20 %}]"), True),
        ("stack", LAYERS.format("thickness: 9 nm, features: [{name: f, material: W}]"), False),
        ("stack", "measured: {scale: ± 2 %}\n" + LAYERS.format("thickness: 9 nm"), True),
        ("stack", "measured: {scale: 2 %}\n" + LAYERS.format("thickness: 9 nm"), False),
        ("mill", MILL + "profile: {falls: 3 %, at: 10 mm}\nneutraliser: on", True),
        ("mill", MILL + "profile: {falls: 3 %, gaussian: 10 mm}", False),
        ("mill", "gas: argon\ncurrent_density: from coupon", True),
        ("mill", "gas: argon\ncurrent_density: 0.5", False),
        ("mill", "gas: helium\ncurrent_density: 0.5 mA/cm2", False),
        ("recipe", STEP.format("for: 12 min 30 s"), True),
        ("recipe", STEP.format("to: metal 1 / strap"), True),
        ("recipe", STEP.format("seen: {layer: metal 1, in: array, within: ± 20 s}"), True),
        ("recipe", STEP.format("for: 12"), False),
        ("recipe", STEP.format("for: about 12 min"), False),
        ("recipe", STEP.format("for: 1 min, to: metal 1"), False),
        ("recipe", "steps: [{name: nothing}]", False),
        ("job", "stack: a.yaml\nrecipe: b.yaml\ngoal: metal 1\nkeep: {feature: m / f, at_least: 3 nm}", True),
        ("job", "stack: a.yaml\nrecipe:\n  " + STEP.format("for: 1 min"), True),
        ("job", "stack: a.yaml\nrecipe:\n  " + STEP.format("for: 1"), False),
        ("job", "stack: a.yaml", False),
        ("job", "stack: a.yaml\nrecipe: b.yaml\nmaterials: [c.yaml, {materials: [{name: x, like: W}]}]", True),
        ("materials", "materials: {name: x, like: W}", True),
        ("materials", "materials: [{like: W}]", False),
    ],
)
def test_what_fits_and_what_does_not(kind, text, good, validators):
    assert fits(validators, kind, text) is good


def test_the_schemas_find_many_of_the_slips_that_check_finds(validators):
    found = total = 0
    for path in sorted(BROKEN.glob("[!_]*.yaml")):
        try:
            tree = read_tree(path.read_bytes(), path.name)
        except InputErrors:
            continue
        kind = kind_of(tree)
        if kind is not None:
            total += 1
            found += not validators[kind].is_valid(tree.plain())
    assert total > 100
    assert found > total / 4


@pytest.mark.parametrize("kind", KINDS)
def test_the_command_prints_it(kind, capsys, tmp_path):
    assert main(["schema", kind]) == 0
    assert json.loads(capsys.readouterr().out) == json_schema(kind)
    assert main(["schema", kind, "-o", str(tmp_path / "s.json"), "--ascii"]) == 0
    text = (tmp_path / "s.json").read_text(encoding="ascii")
    assert json.loads(text) == json_schema(kind)


def test_an_unknown_kind_is_refused(capsys):
    assert main(["schema", "die"]) == 2
    assert "die" in capsys.readouterr().err
