"""How fast the stop table is, against the machine's own measure of the same work."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from stackmill.timing.fall import Column, Lowering, fall

ROOT = Path(__file__).parents[2]
CHUNK = 2048


IMPORTS = "import numpy, yaml, pydantic, typer"
# pydantic and typer load most of themselves at first use: the least that any program does with them.
ONE_OF_EACH = (
    IMPORTS
    + """
class Model(pydantic.BaseModel):
    x: int
app = typer.Typer()
@app.command()
def command(x: int = 1): Model(x=x)
app(["--x", "2"], standalone_mode=False)
"""
)


def python(*arguments: str):
    """A fresh process, with compiled modules kept as an installed program has them."""
    kept = {key: value for key, value in os.environ.items() if key != "PYTHONDONTWRITEBYTECODE"}

    def work() -> None:
        subprocess.run([sys.executable, *arguments], check=False, stdout=subprocess.DEVNULL, cwd=ROOT, env=kept)

    return work


@pytest.mark.parametrize(("what", "program"), [("only imports", IMPORTS), ("uses one of each", ONE_OF_EACH)])
def test_stops_cold_against_imports(against, what, program):
    against(
        f"stops --flat, cold, on the four-metal demo, against a process that {what} of numpy, yaml, pydantic, typer",
        python("-m", "stackmill", "stops", "stacks/four-metal/look.yaml", "--flat"),
        python("-c", program),
        target=1.6,
        rounds=11,
    )


def numbers(draws: int):
    random = np.random.default_rng(1)
    columns = [
        Column(tuple(random.integers(0, 5, 30).tolist()), random.uniform(20, 300, (30, draws))) for _ in range(12)
    ]
    rates = random.uniform(0.3, 1.2, (3, 5, draws))
    steps = [Lowering(rate, np.full(draws, time)) for rate, time in zip(rates, (2000.0, 2000.0, 1e5), strict=True)]
    return columns, steps


def test_a_hundred_thousand_draws_against_one_cumsum(against):
    draws, columns, steps = 100_000, *numbers(CHUNK)
    chunks = -(-draws // CHUNK)
    flat = np.random.default_rng(2).uniform(size=(12 * 3, 30, CHUNK))

    def ours() -> None:
        for _ in range(chunks):
            fall([columns], steps)

    def reference() -> None:
        for _ in range(chunks):
            np.cumsum(flat, axis=1)

    against(
        "100 000 draws x 12 columns x 30 layers x 3 steps against numpy cumsum of as many numbers",
        ours,
        reference,
        target=10.0,
        rounds=3,
    )


def test_a_hundred_thousand_draws_against_solve_ivp(against):
    draws, columns, steps = 100_000, *numbers(CHUNK)
    chunks = -(-draws // CHUNK)
    sample = 4

    def ours() -> None:
        for _ in range(chunks):
            fall([columns], steps)

    def reference() -> None:
        for draw in range(sample):
            for column in columns[:1]:
                floors = np.cumsum(column.thickness_nm[:, draw])
                _solve(floors, column.material, [step.rate_nm_per_s[:, draw] for step in steps])

    against(
        "the same against solve_ivp with events (one column, four draws, scaled up)",
        ours,
        reference,
        target=1 / 200,
        rounds=3,
        scale=12 * draws / sample,
    )


def _solve(floors, material, rates) -> None:
    """One column through three steps: a fresh start at each boundary, as an event solver has to."""
    start, end = 0.0, 0.0
    for step_rates, duration in zip(rates, (2000.0, 2000.0, 1e5), strict=True):
        time = 0.0
        while time < duration:
            k = int(np.searchsorted(floors, start * (1 + 1e-13), side="right"))
            if k == len(floors):
                return
            floor = floors[k]

            def event(t, z, floor=floor):
                return z[0] - floor

            event.terminal = True
            run = solve_ivp(lambda t, z, v=step_rates[material[k]]: [v], (time, duration), [start], events=event)
            time, start = (run.t_events[0][0], floor) if run.t_events[0].size else (duration, run.y[0, -1])
        end += duration
