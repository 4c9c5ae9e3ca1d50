"""What each verb loads: heavy libraries stay out of the way until they are needed."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from stackmill.cli.main import app

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


VERBS = sorted(command.callback.__name__ for command in app.registered_commands)


@pytest.mark.parametrize("verb", VERBS)
def test_help_loads_only_the_command_line(verb):
    for arguments in (["--help"], [verb, "--help"]):
        modules = loaded(*arguments)
        assert not modules & (HEAVY | {"numpy", "yaml"})  # typer itself brings pydantic


LIGHT = {
    "calibrate": ["stacks/unknown/coupons.csv", "--mill", "stacks/four-metal/mill.yaml"],
    "check": ["stacks/four-metal/look.yaml"],
    "materials": ["W"],
    "rates": ["stacks/four-metal/look.yaml"],
    "schema": ["stack"],
    "stops": ["stacks/four-metal/look.yaml", "--flat"],
}
MOVING = {
    "relief": ["stacks/four-metal/look.yaml", "--grid", "40"],
    "stops": ["stacks/four-metal/look.yaml"],
}


@pytest.mark.parametrize("verb", VERBS)
def test_no_verb_loads_a_heavy_library(verb):
    if verb in LIGHT:
        assert not loaded(verb, *LIGHT[verb]) & HEAVY
    else:
        assert verb in MOVING


@pytest.mark.parametrize("verb", sorted(MOVING))
def test_a_surface_loads_the_compiler_and_no_other_heavy_library(verb):
    assert loaded(verb, *MOVING[verb]) & {"pandas", "pint", "matplotlib", "rich", "numba"} == {"numba"}


def test_a_stop_table_that_needs_no_surface_loads_no_compiler():
    assert not loaded("stops", "stacks/sensor/job.yaml") & HEAVY


def test_importing_the_package_loads_next_to_nothing():
    run = subprocess.run(
        [sys.executable, "-c", "import sys, stackmill; print(*sys.modules)"],
        capture_output=True,
        text=True,
        cwd=ROOT,
        check=True,
    )
    assert not {m.split(".")[0] for m in run.stdout.split()} & (HEAVY | {"numpy", "pydantic", "yaml", "typer"})
