"""Every command shown in the README and the docs runs, and prints what is shown."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest

from stackmill.cli.main import main

ROOT = Path(__file__).parents[1]
PAGES = [ROOT / "README.md", *sorted((ROOT / "docs").rglob("*.md"))]
OMITTED = "[...]"


def shown(page):
    """(command, lines shown) of every console block; a line [...] stands for lines left out."""
    for block in re.findall(r"```console\n(.*?)\n```", page.read_text(encoding="utf-8"), re.DOTALL):
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, *lines = part.rstrip("\n").split("\n")
            yield command, lines


CASES = [pytest.param(c, lines, id=f"{page.name}: {c}") for page in PAGES for c, lines in shown(page)]


@pytest.mark.regression
@pytest.mark.parametrize(("command", "lines"), CASES)
def test_a_command_prints_what_is_shown(command, lines, capsys, monkeypatch):
    monkeypatch.chdir(ROOT)
    monkeypatch.setenv("COLUMNS", "80")
    program, *arguments = shlex.split(command)
    assert program == "stackmill"
    main(arguments)
    printed = capsys.readouterr()
    told = [line.rstrip() for line in (printed.out + printed.err).split("\n")]
    at = 0
    for chunk in "\n".join(lines).split(OMITTED):
        wanted = [line.rstrip() for line in chunk.strip("\n").split("\n")]
        if wanted == [""]:
            continue
        found = next((k for k in range(at, len(told)) if told[k : k + len(wanted)] == wanted), None)
        assert found is not None, "not printed:\n" + "\n".join(wanted)
        at = found + len(wanted)


def test_the_readme_opens_with_two_commands_of_one_line():
    from readme_commands import commands

    first, second = commands((ROOT / "README.md").read_text(encoding="utf-8"))[:2]
    assert first.startswith("python3 -m venv .venv")
    assert "stackmill stops" in first
    assert second.startswith("python3 -m venv .venv")
    assert "pytest" in second
