"""Times and memory: the best of a few rounds, since a shared machine only ever adds."""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import time
from collections.abc import Callable, Mapping
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent.parent


def best(function: Callable[[], object], rounds: int = 3) -> float:
    """Shortest time of a few calls [s]; the first one also warms what is compiled on demand."""
    return alternating({"": function}, rounds)[""]


def alternating(functions: Mapping[str, Callable[[], object]], rounds: int = 3) -> dict[str, float]:
    """Shortest time of each [s], taken in turns, so that all meet the same machine."""
    times: dict[str, list[float]] = {name: [] for name in functions}
    for turn in range(rounds + 1):
        for name, function in functions.items():
            begin = time.perf_counter()
            function()
            if turn:
                times[name].append(time.perf_counter() - begin)
    return {name: min(taken) for name, taken in times.items()}


def peak() -> float:
    """Peak memory of this process so far [MB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def process(arguments: list[str], rounds: int = 3) -> tuple[float, float]:
    """Time [s] and peak memory [MB] of a fresh Python process; the best time, the largest memory."""
    # A forked child starts with the peak of its parent, so the parent must be a small one.
    wrapper = (
        "import resource, subprocess, sys, time; b = time.perf_counter(); "
        "status = subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL, check=False).returncode; "
        "peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024; "
        "print(status, time.perf_counter() - b, peak)"
    )
    rows = []
    # As installed packages have it, this checkout's byte code is kept from round to round.
    environment = {k: v for k, v in os.environ.items() if k != "PYTHONDONTWRITEBYTECODE"}
    for _ in range(rounds):
        run = subprocess.run(
            [sys.executable, "-c", wrapper, sys.executable, *arguments],
            capture_output=True,
            text=True,
            cwd=ROOT,
            env=environment,
            check=True,
        )
        status, seconds, memory = (float(word) for word in run.stdout.split())
        if status not in (0, 1, 3):  # verdicts
            raise RuntimeError(f"{arguments} ended with {status:g}")
        rows.append((seconds, memory))
    return min(row[0] for row in rows), max(row[1] for row in rows)
