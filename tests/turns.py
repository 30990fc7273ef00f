"""Times of two sides, taken in turns, for the benchmarks."""

from collections.abc import Callable
from time import perf_counter
from typing import Any


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
