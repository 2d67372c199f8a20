"""What the benchmarks share: medians of wall-clock times, peak memory of a process, rows of a table."""

from __future__ import annotations

import resource
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass


@dataclass(frozen=True)
class Row:
    """One line of the table.

    value is what the row is about (a ratio, wherever two things are compared), wanted what it should be.
    """

    group: str
    name: str
    value: float
    unit: str
    wanted: str
    met: bool
    detail: str


def at_least(group: str, name: str, value: float, unit: str, limit: float, detail: str) -> Row:
    """Return a row whose value should not be below the limit."""
    return Row(group, name, value, unit, f"at least {limit:g}", value >= limit, detail)


def at_most(group: str, name: str, value: float, unit: str, limit: float, detail: str) -> Row:
    """Return a row whose value should not be above the limit."""
    return Row(group, name, value, unit, f"at most {limit:g}", value <= limit, detail)


def seconds(task: Callable[[], object], repeats: int = 5) -> float:
    """Return the median wall-clock time of a task, after one run that is not counted."""
    task()
    times = []
    for _ in range(repeats):
        began = time.perf_counter()
        task()
        times.append(time.perf_counter() - began)
    return statistics.median(times)


def peak_megabytes() -> float:
    """Return the largest memory this process has held, in MB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def apart(code: str) -> str:
    """Run Python code in a process of its own and return what it printed."""
    return subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True).stdout
