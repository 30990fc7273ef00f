"""Times of two sides, taken in turns, and what a process takes, for comparisons in one run."""

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from time import perf_counter
from typing import Any

# What a process had in use counts for the one that it starts, and pytest's own is large.
_LAUNCHER = """
import os, subprocess, sys
from time import perf_counter

begun = perf_counter()
process = subprocess.Popen(sys.argv[1:], stdout=subprocess.DEVNULL)
_, status, usage = os.wait4(process.pid, 0)
process.returncode = os.waitstatus_to_exitcode(status)
assert process.returncode == 0
print(perf_counter() - begun, usage.ru_maxrss * 1024)
"""


def seconds(work: Callable[[], Any], times: int) -> float:
    start = perf_counter()
    for _ in range(times):
        work()
    return (perf_counter() - start) / times


def best_in_turns(
    ours: tuple[Callable[[], Any], int], theirs: tuple[Callable[[], Any], int], rounds: int
) -> tuple[float, float]:
    """Return the best seconds of each; a side is its work and how often a round does it."""
    for work, _ in (ours, theirs):
        work()  # tables are made and caches filled on first use
    turns = [(seconds(*ours), seconds(*theirs)) for _ in range(rounds)]
    return min(one for one, _ in turns), min(other for _, other in turns)


def of_process(*arguments: object) -> tuple[float, int]:
    """Run Python in a process of its own; return the seconds and the most bytes it had in use."""
    ran = subprocess.run(
        [sys.executable, "-c", _LAUNCHER, sys.executable, *map(str, arguments)],
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])},
        stdout=subprocess.PIPE,
        text=True,
        check=True,
    )
    spent, most = ran.stdout.split()
    return float(spent), int(most)
