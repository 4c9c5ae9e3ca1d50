"""Broken files, and the exact messages each earns, in expected.txt.

Files whose name begins with _ are sound; the broken ones bind them.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from stackmill.documents.showing import in_order
from stackmill.errors import InputErrors
from stackmill.jobs import load_job

HERE = Path(__file__).parent
FILES = HERE / "files"


def expected() -> dict[str, list[str]]:
    table: dict[str, list[str]] = {}
    name = ""
    for line in (HERE / "expected.txt").read_text(encoding="utf-8").splitlines():
        if line.startswith("["):
            name = line.strip("[]")
            table[name] = []
        elif line:
            table[name].append(line)
    return table


def broken() -> list[str]:
    return sorted(path.name for path in FILES.iterdir() if not path.name.startswith("_"))


@pytest.mark.parametrize("name", broken())
def test_every_broken_file_earns_its_message(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(FILES)
    with pytest.raises(InputErrors) as refused:
        load_job(name)
    assert [error.headline() for error in in_order([refused.value])] == expected()[name]


def test_the_table_speaks_of_these_files_only() -> None:
    assert sorted(expected()) == broken()


@pytest.mark.parametrize("line", [line for lines in expected().values() for line in lines])
def test_every_message_has_a_cure(line: str) -> None:
    assert line.endswith(")")
    assert " (" in line


def test_a_sound_stack_is_taken(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(FILES)
    assert load_job("_stack.yaml").title == "two metals (invented)"
