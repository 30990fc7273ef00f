"""How fast a cell and a column are, as ratios to astropy within one run.

Both sides of a ratio are timed in turns and the best of several rounds counts, so that whatever
else the machine does touches both. Only ratios are asserted; each is printed. Where astropy would
take minutes it is given a sample, and the ratio is that of the times for a value.
"""

import subprocess
import sys
from collections.abc import Callable
from typing import Any

import numpy as np
from astropy.cosmology import Planck18
from pytest_benchmark.fixture import BenchmarkFixture
from turns import best_in_turns

from cellfuncs import age_at_redshift, distance_luminosity


def test_one_luminosity_distance(benchmark: BenchmarkFixture, show: Callable[[str], None]) -> None:
    benchmark(distance_luminosity, 0.5)
    ours, theirs = best_in_turns(
        (lambda: distance_luminosity(0.5), 2000),
        (lambda: Planck18.luminosity_distance(0.5), 100),
        rounds=12,
    )
    ratio = theirs / ours
    benchmark.extra_info["times as fast as astropy"] = ratio
    show(
        f"one luminosity distance: {ours * 1e6:.2f} µs, astropy {theirs * 1e6:.0f} µs:"
        f" {ratio:.0f} times as fast (15 wanted)"
    )
    assert ratio >= 15


def test_a_million_luminosity_distances(
    benchmark: BenchmarkFixture, show: Callable[[str], None]
) -> None:
    z = np.linspace(1e-4, 10, 1_000_000)
    sample = z[:: len(z) // 5000]
    benchmark(distance_luminosity, z)
    ours, theirs = best_in_turns(
        (lambda: distance_luminosity(z), 1),
        (lambda: Planck18.luminosity_distance(sample), 1),
        rounds=6,
    )
    ratio = (theirs / len(sample)) / (ours / len(z))
    benchmark.extra_info["times as fast as astropy, per value"] = ratio
    show(
        f"a million luminosity distances: {ours * 1e3:.0f} ms, {ours / len(z) * 1e9:.0f} ns each;"
        f" astropy (a sample of {len(sample)}) {theirs / len(sample) * 1e6:.1f} µs each:"
        f" {ratio:.0f} times as fast (50 wanted)"
    )
    assert ratio >= 50


def test_a_hundred_thousand_ages(benchmark: BenchmarkFixture, show: Callable[[str], None]) -> None:
    z = np.linspace(1e-4, 10, 100_000)
    sample = z[:: len(z) // 500]
    benchmark(age_at_redshift, z)
    ours, theirs = best_in_turns(
        (lambda: age_at_redshift(z), 5), (lambda: Planck18.age(sample), 1), rounds=6
    )
    ratio = (theirs / len(sample)) / (ours / len(z))
    benchmark.extra_info["times as fast as astropy, per value"] = ratio
    show(
        f"a hundred thousand ages: {ours * 1e3:.1f} ms, {ours / len(z) * 1e9:.0f} ns each;"
        f" astropy (a sample of {len(sample)}) {theirs / len(sample) * 1e6:.0f} µs each:"
        f" {ratio:.0f} times as fast (1000 wanted)"
    )
    assert ratio >= 1000


def test_import(show: Callable[[str], None]) -> None:
    """A fresh interpreter each time, its own start included; files are in the cache after one."""

    def fresh(module: str) -> Callable[[], Any]:
        return lambda: subprocess.run([sys.executable, "-c", f"import {module}"], check=True)

    ours, theirs = best_in_turns((fresh("cellfuncs"), 1), (fresh("astropy.cosmology"), 1), rounds=7)
    ratio = ours / theirs
    show(
        f"import cellfuncs: {ours * 1e3:.0f} ms, astropy.cosmology {theirs * 1e3:.0f} ms:"
        f" {ratio:.2f} of its time (0.25 wanted)"
    )
    assert ratio < 0.25
