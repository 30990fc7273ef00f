"""How long a redshift takes to be found, beside a search that tries every redshift.

Both are timed in turns in one run and the best of several rounds counts; only the ratio is
asserted. The milliseconds are printed: 20 are wanted for a spectrum of eight lines.
"""

from collections.abc import Callable
from time import perf_counter
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from pytest_benchmark.fixture import BenchmarkFixture

from cellfuncs.physics import identification
from cellfuncs.physics.lines import lines

TABLE = np.array([line.vacuum for line in lines()])
ERROR = 0.5
Z_MAX = 7.0


def spectrum() -> NDArray[np.float64]:
    """Seven lines of one source at z = 2.3 and one of none, 3600 to 9800 Å."""
    rng = np.random.default_rng(8)
    seen = TABLE[(TABLE * 3.3 > 3600) & (TABLE * 3.3 < 9800)] * 3.3
    return np.append(rng.choice(seen, 7, replace=False) + rng.normal(0.0, ERROR, 7), 7777.7)


def every_redshift(wavelengths: NDArray[np.float64]) -> float:
    """Count, in steps of the error at the blue end, how many wavelengths lie near a line."""
    most, best = -1, 0.0
    table = np.log(TABLE)
    step = ERROR / wavelengths.max()
    x = np.arange(0.0, np.log1p(Z_MAX), step)
    near = 3 * ERROR / wavelengths
    for start in range(0, len(x), 4096):
        rest = np.log(wavelengths) - x[start : start + 4096, None]
        above = np.clip(np.searchsorted(table, rest), 1, len(table) - 1)
        away = np.minimum(abs(rest - table[above - 1]), abs(rest - table[above]))
        counts = (away < near).sum(axis=1)
        if counts.max() > most:
            most, best = int(counts.max()), float(np.expm1(x[start + counts.argmax()]))
    return best


def test_a_spectrum_of_eight_lines(
    benchmark: BenchmarkFixture, capsys: pytest.CaptureFixture[str]
) -> None:
    wavelengths = spectrum()
    errors, strengths = np.full(8, ERROR), np.ones(8)

    def solve() -> Any:
        identification._identified.cache_clear()  # a second cell would get what the first found
        return identification.identify(wavelengths, errors, strengths, 0.0, Z_MAX)

    def seconds(work: Callable[[], Any]) -> float:
        start = perf_counter()
        work()
        return perf_counter() - start

    benchmark(solve)
    assert abs(solve().best.z - 2.3) < 1e-3
    assert abs(every_redshift(wavelengths) - 2.3) < 1e-3
    turns = [(seconds(solve), seconds(lambda: every_redshift(wavelengths))) for _ in range(15)]
    ours, brute = (min(side) for side in zip(*turns, strict=True))
    benchmark.extra_info["times as fast as every redshift in turn"] = brute / ours
    with capsys.disabled():
        print(
            f"\n  a spectrum of eight lines: {ours * 1e3:.1f} ms (20 wanted), trying every redshift"
            f" {brute * 1e3:.1f} ms: {brute / ours:.1f} times as fast (1.5 wanted)"
        )
    assert brute / ours >= 1.5
