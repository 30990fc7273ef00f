"""Sidereal time, altitude, hour angle and airmass against astropy and the handbooks' examples."""

from collections.abc import Iterator
from datetime import datetime, timedelta
from math import cos, radians, sin

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import TETE, AltAz, Angle, EarthLocation, HADec, SkyCoord
from astropy.time import Time
from numpy.typing import NDArray
from observations import astropy_as_packaged, observations

import cellfuncs as cf
from cellfuncs.physics import earth

Floats = NDArray[np.float64]

pytestmark = [
    pytest.mark.filterwarnings("ignore:ERFA function:erfa.ErfaWarning"),
    pytest.mark.filterwarnings("ignore:Tried to get polar motions"),
]

ARCSEC = 1 / 3600


@pytest.fixture(autouse=True)
def _astropy_as_packaged() -> Iterator[None]:
    with astropy_as_packaged():
        yield


def around(difference: Floats, turn: float) -> Floats:
    """Return the smaller way around."""
    return (difference + turn / 2) % turn - turn / 2


SPANS = [
    (2000, "1990-01-01", "2030-01-01"),
    (500, "1973-01-02", "2100-01-01"),
    (100, "1960-01-01", "1973-01-02"),
]
spans = pytest.mark.parametrize(("count", "first", "last"), SPANS)


@spans
def test_sidereal_time_as_astropy_has_it(count: int, first: str, last: str) -> None:
    """Within 1 ms; nutation 2000B is within 1 mas of astropy's 2000A (0.07 ms; McCarthy & Luzum
    2003). Before 1972 UTC had a rate of its own, by up to 2.6 ms a day, which ERFA's utcut1 leaves
    out within a day."""
    limit = 1.0 if first > "1972" else 3.6
    rows = observations(1, count, first, last)
    theirs = rows.time.sidereal_time("apparent", longitude=rows.sites[0] * u.deg).hour
    ours = cf.time_sidereal(rows.utc, rows.sites[0])
    assert np.abs(around(ours - theirs, 24)).max() * 3.6e6 < limit
    assert ours.min() >= 0
    assert ours.max() < 24


@spans
def test_altitude_as_astropy_has_it(count: int, first: str, last: str) -> None:
    """Ours is without polar motion (0.6" at the most) and without the bending of light by the Sun
    (0.02" at 25° from it, 1.8" at its edge)."""
    rows = observations(2, count, first, last)
    theirs = rows.sky.transform_to(AltAz(obstime=rows.time, location=rows.location)).alt.deg
    ours = cf.altitude(*rows.arguments)
    assert np.abs(ours - theirs).max() < ARCSEC


@spans
def test_hour_angle_as_astropy_has_it(count: int, first: str, last: str) -> None:
    """As an angle on the sky; east of the meridian it is negative."""
    rows = observations(3, count, first, last)
    theirs = rows.sky.transform_to(HADec(obstime=rows.time, location=rows.location)).ha.hour
    ours = cf.angle_hour(*rows.arguments)
    on_the_sky = around(ours - theirs, 24) * 15 * np.cos(np.radians(rows.dec))
    assert np.abs(on_the_sky).max() < ARCSEC
    assert ours.min() > -12
    assert ours.max() <= 12


# Handbooks ----------------------------------------------------------------------------------------


def utc_of_ut(text: str) -> float:
    """Return the Julian date UTC at which UT1 tells this, by the IERS's table as astropy has it."""
    moment = Time(text)
    return float(moment.jd - moment.get_delta_ut1_utc().to_value(u.day))


def test_sidereal_time_of_meeus() -> None:
    """Meeus, Astronomical Algorithms (1998), example 12.a (from memory): apparent at Greenwich on
    1987 April 10 at 0h UT, 13h10m46.1351s, by the theories of 1976-1982.

    Those differ by 2 ms a decade from 2000 on (precession) and by 3 ms (nutation).
    """
    found = cf.time_sidereal(utc_of_ut("1987-04-10T00:00:00"), 0.0) * 3600
    assert found == pytest.approx(13 * 3600 + 10 * 60 + 46.1351, abs=0.006)


def test_sidereal_time_by_the_formula_of_1982() -> None:
    """Aoki et al. 1982, A&A 105, 359: the mean one at 0h UT1 (from memory), to which the equation
    of the equinoxes is added as the first terms of nutation have it; within 20 ms."""
    for day in range(0, 9000, 97):
        text = (datetime(1993, 1, 1) + timedelta(days=day)).isoformat()
        century = (Time(text, scale="ut1").jd - 2_451_545.0) / 36_525
        mean = 24_110.548_41 + 8_640_184.812_866 * century + 0.093_104 * century**2
        node = radians(125.044_52 - 1934.136_261 * century)
        sun = radians(280.4665 + 36_000.7698 * century)
        moon = radians(218.3165 + 481_267.8813 * century)
        # Meeus, chapter 22 (from memory): in arcsec, to 0.5
        nutation = -17.20 * sin(node) - 1.32 * sin(2 * sun) - 0.23 * sin(2 * moon)
        nutation += 0.21 * sin(2 * node)
        expected = mean + nutation * cos(radians(23.44)) / 15
        found = cf.time_sidereal(utc_of_ut(text), 0.0) * 3600
        difference = (found - expected + 43_200) % 86_400 - 43_200
        assert abs(difference) < 0.05


def test_altitude_and_hour_angle_of_meeus() -> None:
    """Meeus, example 13.b (from memory): Venus from Washington, 1987 April 10 at 19h21m00s UT, of
    date; hour angle 64.352133°, altitude 15.1249°, sidereal time at Greenwich 8h34m56.853s."""
    utc = utc_of_ut("1987-04-10T19:21:00")
    longitude = -Angle("77d03m56s").deg
    latitude = Angle("38d55m17s").deg
    found = cf.time_sidereal(utc, longitude) * 3600
    expected = 8 * 3600 + 34 * 60 + 56.853 + longitude * 240
    assert found == pytest.approx(expected, abs=0.006)
    # the place of date, taken to the ICRS, since that is what our functions are given
    seen = SkyCoord("23h09m16.641s -6d43m11.61s", frame=TETE(obstime=Time(utc, format="jd")))
    site = (longitude, latitude, 0.0)
    altitude = cf.altitude(seen.icrs.ra.deg, seen.icrs.dec.deg, utc, *site)
    assert altitude == pytest.approx(15.1249, abs=2 * ARCSEC)
    hours = cf.angle_hour(seen.icrs.ra.deg, seen.icrs.dec.deg, utc, *site)
    assert hours * 15 == pytest.approx(64.352_133, abs=2 * ARCSEC)


# Airmass ------------------------------------------------------------------------------------------

BEMPORAD = {
    # zenith distance: airmass; Bemporad 1904 as Allen's Astrophysical Quantities and Schoenberg
    # 1929 have it (from memory)
    60: 1.995,
    70: 2.904,
    75: 3.816,
    80: 5.60,
    82: 6.88,
    84: 8.90,
    85: 10.39,
    86: 12.44,
    87: 15.36,
    88: 19.79,
    89: 26.96,
}


@pytest.mark.parametrize(("zenith_distance", "tabulated"), BEMPORAD.items())
def test_airmass_as_the_handbooks_tabulate_it(zenith_distance: int, tabulated: float) -> None:
    """Pickering's formula, which was fitted to newer air, gives less than Bemporad's table: by
    0.1 % at 2, 0.5 % at 10, 1.2 % at 27."""
    limit = 0.0015 if zenith_distance <= 70 else 0.006 if zenith_distance <= 85 else 0.0125
    assert earth.airmass(90.0 - zenith_distance) == pytest.approx(tabulated, rel=limit)


def hardie_1962(altitude: float) -> float:
    """Hardie 1962, Astronomical Techniques, p. 180: a polynomial through Bemporad's table, to 0.1 %
    up to 6.8."""
    more = 1 / sin(radians(altitude)) - 1
    return 1 + more - 0.001_816_7 * more - 0.002_875 * more**2 - 0.000_808_3 * more**3


def kasten_young_1989(altitude: float) -> float:
    """Kasten & Young 1989, Applied Optics 28, 4735, eq. 3."""
    away = (altitude + 6.079_95) ** -1.6364
    return float(1 / (sin(radians(altitude)) + 0.505_72 * away))


@pytest.mark.parametrize("altitude", [90.0, 75.0, 60.0, 45.0, 30.0, 20.0, 15.0, 10.0])
def test_airmass_by_hardies_polynomial(altitude: float) -> None:
    limit = 0.0015 if altitude >= 20 else 0.0035
    assert earth.airmass(altitude) == pytest.approx(hardie_1962(altitude), rel=limit)


@pytest.mark.parametrize(
    ("lowest", "highest", "limit"),
    [
        *((30, 90, 0.0006), (20, 30, 0.0011), (10, 20, 0.0013)),
        *((5, 10, 0.0028), (1, 5, 0.013), (0, 1, 0.022)),
    ],
)
def test_airmass_by_kasten_and_young(lowest: float, highest: float, limit: float) -> None:
    """They and Pickering fitted different models of the air."""
    for altitude in np.linspace(lowest, highest, 101).tolist():
        assert earth.airmass(altitude) == pytest.approx(kasten_young_1989(altitude), rel=limit)


def test_airmass_of_observations() -> None:
    """AIRMASS itself, by Kasten & Young at astropy's altitude."""
    rows = observations(4, 1000, "1990-01-01", "2030-01-01")
    altitudes = rows.sky.transform_to(AltAz(obstime=rows.time, location=rows.location)).alt.deg
    found = cf.airmass(*rows.arguments)
    up = altitudes > 0.01
    assert np.isnan(found[altitudes < -0.01]).all()
    assert np.isfinite(found[up]).all()
    for altitude, airmass in zip(altitudes[up].tolist(), found[up].tolist(), strict=True):
        limit = 0.0012 if altitude > 20 else 0.003 if altitude > 5 else 0.03
        assert airmass == pytest.approx(kasten_young_1989(altitude), rel=limit)


def test_airmass_at_the_zenith_is_1() -> None:
    utc, site = "2026-12-24T03:30", (-70.4, -24.6, 2600.0)
    zenith = SkyCoord(
        alt=90 * u.deg,
        az=0 * u.deg,
        frame=AltAz(
            obstime=Time(utc),
            location=EarthLocation.from_geodetic(site[0] * u.deg, site[1] * u.deg, site[2] * u.m),
        ),
    ).icrs
    place = (float(zenith.ra.deg), float(zenith.dec.deg))
    assert cf.altitude(*place, utc, *site) == pytest.approx(90, abs=3 * ARCSEC)
    assert cf.airmass(*place, utc, *site) == pytest.approx(1, abs=1e-6)
    # "38.75 at the horizon", Pickering 2002 (from memory)
    assert earth.airmass(0.0) == pytest.approx(38.75, abs=0.005)


def test_what_refraction_would_change() -> None:
    """AIRMASS says: 0.1 % at 30°, 1 % at 10°. Bennett 1982, J. Navigation 35, 255, has the
    refraction in arcmin at an apparent altitude (from memory)."""
    for apparent, limit, at_least in ((30.0, 0.0012, 0.0005), (10.0, 0.0112, 0.005)):
        refraction = 1 / np.tan(radians(apparent + 7.31 / (apparent + 4.4))) / 60
        larger = earth.airmass(apparent - refraction) / earth.airmass(apparent) - 1
        assert at_least < larger < limit
