"""Reading files costs little, and drags nothing heavy in: it is on the way of every command."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from documents_examples import RECIPE, STACK

READ_ALL = """
import json, sys, time
import yaml, pydantic
class Warm(pydantic.BaseModel):
    number: int = 0
start = time.perf_counter()
from stackmill.documents import read_job, read_mill, read_recipe, read_stack
from stackmill.documents.mill import DEFAULT_MILL
read_stack(sys.argv[1])
read_mill(DEFAULT_MILL)
read_recipe(sys.argv[2])
read_job("stack: a.yaml\\nrecipe: b.yaml\\ngoal: {layer: metal 1, feature: strap}\\n")
print(json.dumps({"seconds": time.perf_counter() - start, "modules": sorted(sys.modules)}))
"""


def in_a_fresh_process(cache: Path) -> dict[str, object]:
    settings = {k: v for k, v in os.environ.items() if k != "PYTHONDONTWRITEBYTECODE"}
    settings["PYTHONPYCACHEPREFIX"] = str(cache)
    settings["PYTHONPATH"] = os.pathsep.join(path for path in sys.path if path)
    done = subprocess.run(
        [sys.executable, "-c", READ_ALL, STACK, RECIPE],
        env=settings,
        capture_output=True,
        text=True,
        check=True,
    )
    return dict(json.loads(done.stdout))


@pytest.fixture(scope="module")
def cache(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A place for compiled files, filled by a first run."""
    folder = tmp_path_factory.mktemp("compiled")
    in_a_fresh_process(folder)
    return folder


def test_models_and_four_files_in_a_cold_process(cache: Path) -> None:
    """Budget 60 ms beyond importing yaml and pydantic; the best of several, as others use the machine too."""
    times = [in_a_fresh_process(cache)["seconds"] for _ in range(4)]
    assert min(float(str(seconds)) for seconds in times) < 0.060


def test_nothing_heavy_is_imported(cache: Path) -> None:
    modules = in_a_fresh_process(cache)["modules"]
    assert isinstance(modules, list)
    assert {"numpy", "pandas", "pint", "scipy", "typer", "rich", "matplotlib"}.isdisjoint(modules)
