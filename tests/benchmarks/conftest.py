"""Benchmarks are ratios: each one times ours and an independent reference in turn, in the same run.

Skipped by default; run them with `python -m pytest --benchmark-only tests/benchmarks`. They report and never fail
on a time: a shared machine is no judge.
"""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable

import pytest

REPORT: list[str] = []


@pytest.fixture
def against(benchmark):
    """Gives measure(ours, reference, target=..., rounds=...): the median ratio of times, pair by pair."""

    def measure(
        name: str,
        ours: Callable[[], object],
        reference: Callable[[], object],
        *,
        target: float,
        rounds: int = 7,
        scale: float = 1.0,
    ) -> float:
        ours(), reference()  # warm caches
        ratios = []
        for _ in range(rounds):
            ratios.append(_time(ours) / (_time(reference) * scale))
        ratio = statistics.median(ratios)
        benchmark.extra_info.update(ratio=ratio, target=target)
        benchmark.pedantic(ours, rounds=1, warmup_rounds=0)
        verdict = "met" if ratio <= target else "MISSED"
        REPORT.append(
            f"{name}: {ratio:.4g} times the reference"
            f" (target at most {target:.4g}: {verdict}; {min(ratios):.4g} to {max(ratios):.4g})"
        )
        return ratio

    return measure


def _time(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def pytest_terminal_summary(terminalreporter):
    """Print the ratios after pytest's own summary."""
    for line in REPORT:
        terminalreporter.write_line(line)
