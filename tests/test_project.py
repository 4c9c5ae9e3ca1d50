"""The repository tells the truth about itself."""

from __future__ import annotations

import ast
import json
import re
import subprocess
from pathlib import Path

import pytest
from write_glossary import page

from stackmill.cli.main import main

ROOT = Path(__file__).parents[1]
LABELS = {"published", "closed_form", "independent", "common_practice", "regression"}


def test_the_room_map_equals_the_disk():
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    rooms = re.search(r"<!-- rooms: begin -->\n```\nstackmill/\n(.*?)```", text, re.DOTALL)
    assert rooms
    told = {line.split()[0].rstrip("/") for line in rooms[1].splitlines()}
    there = {path.name for path in (ROOT / "stackmill").iterdir() if path.name != "__pycache__"}
    assert told == there


def test_the_top_level_is_what_was_agreed():
    allowed = {
        "pyproject.toml",
        "README.md",
        "DEVELOPERS.md",
        "LICENSE",
        "stackmill",
        "stacks",
        "tests",
        "docs",
    }
    tracked = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout.split()
    top = {path.split("/")[0] for path in tracked}
    assert {name for name in top if not name.startswith(".")} <= allowed


KERNEL = "kernel.py"  # compiled code and all it calls must be in one file


def test_files_keep_to_their_soft_limit():
    long = {
        str(path.relative_to(ROOT)): n
        for path in (ROOT / "stackmill").rglob("*.py")
        if path.name != KERNEL and (n := len(path.read_text(encoding="utf-8").splitlines())) > 400
    }
    assert long == {}


def test_functions_keep_to_their_soft_limit():
    long = []
    for path in (ROOT / "stackmill").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.FunctionDef) and path.parent.name != "cli" and path.name != KERNEL:
                body = node.body[1:] if ast.get_docstring(node) else node.body
                lines = body[-1].end_lineno - body[0].lineno + 1 if body else 0
                if lines > 40:
                    long.append(f"{path.name}::{node.name} ({lines})")
    assert long == []


def test_the_glossary_page_is_the_glossary():
    assert (ROOT / "docs/glossary.md").read_text(encoding="utf-8") == page()


def test_every_demo_says_it_is_invented():
    for path in (ROOT / "stacks").rglob("*.yaml"):
        assert "nvented" in path.read_text(encoding="utf-8").splitlines()[0], path


def test_every_test_of_a_number_says_what_it_is_worth():
    unlabelled = []
    for path in (ROOT / "tests").rglob("test_*.py"):
        if path.parent.name == "benchmarks":
            continue
        tree = ast.parse(path.read_text(encoding="utf-8"))
        whole = "pytestmark" in {
            t.id for n in tree.body if isinstance(n, ast.Assign) for t in n.targets if isinstance(t, ast.Name)
        }
        for node in ast.walk(tree):
            if isinstance(node, ast.FunctionDef) and node.name.startswith("test_") and not whole:
                labels = {a.attr for d in node.decorator_list for a in ast.walk(d) if isinstance(a, ast.Attribute)}
                tests_numbers = any(
                    isinstance(n, ast.Attribute) and n.attr in ("approx", "assert_allclose", "assert_array_equal")
                    for n in ast.walk(node)
                )
                if tests_numbers and not labels & LABELS:
                    unlabelled.append(f"{path.name}::{node.name}")
    assert unlabelled == []


@pytest.mark.parametrize("name", sorted(p.name for p in ROOT.glob("*.md")))
def test_links_in_the_top_pages_lead_somewhere(name):
    text = (ROOT / name).read_text(encoding="utf-8")
    for target in re.findall(r"\]\(([^)#:]+?)(?:#[^)]*)?\)", text):
        assert (ROOT / target).exists(), target


def keys_of(schema):
    """Every key a schema knows, at any depth."""
    if isinstance(schema, dict):
        yield from schema.get("properties", {})
        for part in schema.values():
            yield from keys_of(part)
    elif isinstance(schema, list):
        for part in schema:
            yield from keys_of(part)


@pytest.mark.parametrize("kind", ["stack", "mill", "recipe", "job", "materials", "calibration"])
def test_the_file_reference_knows_every_key(kind, capsys):
    assert main(["schema", kind]) == 0
    page = (ROOT / "docs/files.md").read_text(encoding="utf-8")
    words = set(re.findall(r"[a-z_0-9]+", " ".join(re.findall(r"`([^`]*)`", page))))
    assert set(keys_of(json.loads(capsys.readouterr().out))) - words == set()
