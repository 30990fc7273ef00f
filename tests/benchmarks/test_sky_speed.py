"""How fast a barycentric velocity is, as ratios to astropy within one run.

As in test_speed.py: both sides in turns, the best of several rounds counts, only ratios are
asserted and each is printed. Every call has a moment of its own, so that nothing kept from an
earlier call helps.
"""

from collections.abc import Callable, Iterator
from itertools import count
from typing import Any

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import EarthLocation, SkyCoord
from astropy.time import Time
from observations import astropy_as_packaged
from pytest_benchmark.fixture import BenchmarkFixture
from turns import best_in_turns

from cellfuncs import velocity_barycentric

TARGET = (101.287, -16.716)
SITE = (-70.4, -24.6, 2600.0)
FIRST = 2_460_676.5  # 2025-01-01
ROWS = 10_000


@pytest.fixture(autouse=True)
def _astropy_as_packaged() -> Iterator[None]:
    with astropy_as_packaged():
        yield


def of_astropy(ra: Any, dec: Any, jd: Any) -> Any:
    sky = SkyCoord(ra, dec, unit="deg")
    location = EarthLocation.from_geodetic(SITE[0] * u.deg, SITE[1] * u.deg, SITE[2] * u.m)
    return sky.radial_velocity_correction(
        obstime=Time(jd, format="jd", scale="utc"), location=location
    ).to_value(u.km / u.s)


def test_one_barycentric_velocity(benchmark: BenchmarkFixture, show: Callable[[str], None]) -> None:
    moments = (FIRST + 0.0137 * number for number in count())

    def ours() -> float:
        return velocity_barycentric(*TARGET, next(moments), *SITE)  # type: ignore[no-any-return]

    def theirs() -> float:
        return float(of_astropy(*TARGET, next(moments)))

    benchmark(ours)
    one, other = best_in_turns((ours, 300), (theirs, 10), rounds=12)
    ratio = other / one
    benchmark.extra_info["times as fast as astropy"] = ratio
    show(
        f"one barycentric velocity: {one * 1e6:.0f} µs, astropy {other * 1e6:.0f} µs:"
        f" {ratio:.0f} times as fast (30 wanted)"
    )
    assert ratio >= 30


def test_ten_thousand_barycentric_velocities(
    benchmark: BenchmarkFixture, show: Callable[[str], None]
) -> None:
    """Random targets at random moments of two years, other moments at each call."""
    draw = np.random.default_rng(1)
    ra, dec = draw.uniform(0, 360, ROWS), draw.uniform(-90, 90, ROWS)

    def moments() -> Any:
        return draw.uniform(FIRST, FIRST + 731, ROWS)

    def ours() -> Any:
        return velocity_barycentric(ra, dec, moments(), *SITE)

    def theirs() -> Any:
        return of_astropy(ra, dec, moments())

    benchmark(ours)
    column, other = best_in_turns((ours, 2), (theirs, 1), rounds=6)
    ratio = other / column
    benchmark.extra_info["times as fast as astropy"] = ratio
    show(
        f"{ROWS} barycentric velocities: {column * 1e3:.0f} ms, {column / ROWS * 1e6:.1f} µs each;"
        f" astropy {other * 1e3:.0f} ms: {ratio:.0f} times as fast (20 wanted)"
    )
    assert ratio >= 20
