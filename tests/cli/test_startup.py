"""What each verb loads: heavy libraries stay out of the way until they are needed."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
HEAVY = {"pandas", "pint", "scipy", "matplotlib", "numba", "rich", "statistics"}
PROBE = """
import sys
from stackmill.cli.main import main
code = main({arguments!r})
print("LOADED", *sorted({{m.split('.')[0] for m in sys.modules}}), file=sys.stderr)
sys.exit(code)
"""


def loaded(*arguments):
    run = subprocess.run(
        [sys.executable, "-c", PROBE.format(arguments=list(arguments))],
        capture_output=True,
        text=True,
        cwd=ROOT,
        check=False,
    )
    assert run.returncode in (0, 1), run.stderr
    return set(run.stderr.split("LOADED", 1)[1].split())


@pytest.mark.parametrize("verb", ["check", "rates", "stops", "materials"])
def test_help_loads_only_the_command_line(verb):
    for arguments in (["--help"], [verb, "--help"]):
        modules = loaded(*arguments)
        assert not modules & (HEAVY | {"numpy", "yaml"})  # typer itself brings pydantic


def test_check_and_stops_load_no_heavy_library():
    assert not loaded("check", "stacks/four-metal/look.yaml") & HEAVY
    assert not loaded("stops", "stacks/four-metal/look.yaml") & HEAVY


def test_importing_the_package_loads_next_to_nothing():
    run = subprocess.run(
        [sys.executable, "-c", "import sys, stackmill; print(*sys.modules)"],
        capture_output=True,
        text=True,
        cwd=ROOT,
        check=True,
    )
    assert not {m.split(".")[0] for m in run.stdout.split()} & (HEAVY | {"numpy", "pydantic", "yaml", "typer"})
