"""Random observations, and how astropy is asked about them; for the tests of the sky functions."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import astropy.units as u
import numpy as np
from astropy.coordinates import EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers
from numpy.typing import NDArray

Floats = NDArray[np.float64]

SITES = np.array(
    [
        # longitude, latitude, height: from pole to equator, from the sea to 5000 m
        (0.0, 90.0, 2800.0),
        (20.8, 69.7, 0.0),
        (10.0, 46.0, 3100.0),
        (-155.47, 19.82, 4200.0),
        (-78.5, 0.0, 5000.0),
        (123.4, -75.1, 3233.0),
    ]
)


@contextmanager
def astropy_as_packaged() -> Iterator[None]:
    """Let astropy take the Earth's rotation from the packaged tables, and nothing from a network"""
    with (
        iers.conf.set_temp("auto_download", False),
        iers.conf.set_temp("auto_max_age", None),
        iers.conf.set_temp("iers_degraded_accuracy", "ignore"),
        iers.earth_orientation_table.set(iers.IERS_A.open(iers.IERS_A_FILE)),
    ):
        yield


@dataclass
class Observations:
    """Places on the sky, moments (Julian dates), sites."""

    ra: Floats
    dec: Floats
    utc: Floats
    site: NDArray[np.intp]

    @property
    def arguments(self) -> tuple[Floats, ...]:
        """In the order of most sky functions"""
        return (self.ra, self.dec, self.utc, *self.sites)

    @property
    def sites(self) -> tuple[Floats, ...]:
        return tuple(SITES[self.site].T)

    @property
    def location(self) -> EarthLocation:
        longitude, latitude, height = self.sites
        return EarthLocation.from_geodetic(longitude * u.deg, latitude * u.deg, height * u.m)

    @property
    def sky(self) -> SkyCoord:
        return SkyCoord(self.ra, self.dec, unit="deg")

    @property
    def time(self) -> Time:
        """With UT1 = UTC outside the IERS's tables, where astropy goes on with the last value"""
        table = iers.earth_orientation_table.get()["MJD"].value + 2_400_000.5
        known = (self.utc >= table[0]) & (self.utc < table[-1])
        time = Time(self.utc, format="jd", scale="utc", location=self.location)
        time.delta_ut1_utc = np.where(known, time.get_delta_ut1_utc(), 0.0)
        return time


def observations(seed: int, count: int, first: str, last: str) -> Observations:
    """Return so many, less those at a moment when it is open what UT1 = UTC means."""
    draw = np.random.default_rng(seed)
    utc = draw.uniform(Time(first).jd, Time(last).jd, count)
    utc = utc[~stepped(utc)]
    return Observations(
        ra=draw.uniform(0, 360, utc.size),
        dec=np.degrees(np.arcsin(draw.uniform(-1, 1, utc.size))),
        utc=utc,
        site=draw.integers(0, len(SITES), utc.size),
    )


def stepped(utc: Floats) -> NDArray[np.bool_]:
    """Tell the days before the IERS's tables (1973) at whose end UTC stepped.

    There ours has the step spread over the day, as a Julian date has it, astropy at once.
    """
    day = np.floor(utc - 0.5) + 0.5
    length = (Time(day + 1, format="jd").tai - Time(day, format="jd").tai).sec
    return np.asarray((utc < Time("1973-01-02").jd) & (np.abs(length - 86_400) > 0.02))
