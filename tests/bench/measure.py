"""How the bench measures."""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from typing import Any

Figures = dict[str, dict[str, Any]]


def seconds(work: Callable[[], object]) -> float:
    """Wall time of one run."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def median_s(work: Callable[[], object], turns: int = 3) -> float:
    """Median wall time, after one run to warm up."""
    work()
    return statistics.median(seconds(work) for _ in range(turns))


def interleaved(ours: Callable[[], object], other: Callable[[], object], turns: int) -> float:
    """Median of ours / other over runs that take turns, after one of ours to warm up."""
    ours()
    return statistics.median(seconds(ours) / seconds(other) for _ in range(turns))


def figure(name: str, value: float, unit: str, n: int, how: str) -> Figures:
    """One entry of docs/bench.json."""
    entry = {"value": float(f"{value:.4g}"), "unit": unit, "n": n, "how": how}
    print(f"{name}: {entry['value']} {unit} ({how})", flush=True)
    return {name: entry}


def timed_steps(runs: list[dict[str, float]], what: str) -> Figures:
    """Median seconds of each step."""
    figures: Figures = {}
    for name in runs[0]:
        value = statistics.median(run[name] for run in runs)
        figures |= figure(f"step_{name}_s", value, "s", len(runs), what)
    return figures


def one_run(*arguments: object) -> dict[str, float]:
    """What a large run in a process of its own found."""
    command = [sys.executable, "-m", "tests.bench.one_run", *map(str, arguments)]
    found = subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True)
    last: dict[str, float] = json.loads(found.stdout.splitlines()[-1])
    return last
