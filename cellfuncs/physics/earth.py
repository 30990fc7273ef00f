"""The Earth under an observatory: how it moves and turns, and what that does to a measurement.

Vectors are tuples of three components along the axes of the ICRS. A moment is a number of days
since 2000 January 1, 0h (JD 2451544.5), in UTC where it is called `utc`, in TT where it is `tt`.
The same definitions act on floats, on arrays, and on the symbols of a season table: rows of daily
values from which a spreadsheet interpolates by itself.
"""

from collections.abc import Callable
from datetime import date, timedelta
from functools import cache, cached_property, lru_cache
from importlib.metadata import version
from math import pi
from pathlib import Path
from typing import Any, Final, TypeAlias

import erfa
import numpy as np
from astropy_iers_data import IERS_A_FILE

from cellfuncs.constants import ASTRONOMICAL_UNIT, LIGHT_SPEED
from cellfuncs.physics import times
from cellfuncs.symbols import (
    Expr,
    Real,
    angle_of,
    cos,
    floor,
    kept,
    modulo,
    name,
    sin,
    sqrt,
)

Vector: TypeAlias = tuple[Real, Real, Real]

EPOCH: Final = 2_451_544.5
"""2000 January 1, 0h, from which days are counted here"""

DAY: Final = 86_400.0
DEGREE: Final = pi / 180

EQUATORIAL_RADIUS: Final = 6378.137
"""km, of the WGS84 ellipsoid (NIMA TR8350.2, 3rd edition)"""
FLATTENING: Final = 1 / 298.257223563
"""of the WGS84 ellipsoid"""

TURNS_PER_DAY: Final = 1.002_737_811_911_354_48
"""of the Earth against the stars: IAU 2000 resolution B1.8 (Capitaine et al. 2000)"""
TURN_AT_J2000: Final = 0.779_057_273_264_0
SPIN: Final = 2 * pi * TURNS_PER_DAY / DAY
"""rad/s"""

GM_SUN: Final = 1.327_124_4e11
"""km³/s²: IAU 2015 resolution B3, nominal"""
GM_EARTH: Final = 3.986_004e5
"""km³/s²: IAU 2015 resolution B3, nominal"""
GM_JUPITER: Final = 1.266_865_3e8
"""km³/s²: IAU 2015 resolution B3, nominal"""
JUPITER: Final = GM_JUPITER / (5.2044 * ASTRONOMICAL_UNIT * LIGHT_SPEED**2)
"""The potential of Jupiter at its mean distance from the Sun: with it 0.5 mm/s are right to 0.1"""

MOTION: Final = (
    *(f"earth_velocity_{axis}" for axis in "xyz"),
    *(f"earth_position_{axis}" for axis in "xyz"),
    *(f"sun_velocity_{axis}" for axis in "xyz"),
    "sun_potential",
)
"""Of the Earth's and the Sun's centre from the barycentre [km/s, s of light], and GM/rc² at the
Earth of the Sun"""

SEASON_TABLE: Final = (
    *("first", "last", *MOTION, "pole_x", "pole_y", "turn_offset", "origin"),
    *("tdb_minus_tt", "tt_minus_utc", "leap_second"),
)
"""What a season table names: its first date and the day after its last, and what it has of each
day at 0h TT; the last two of the UTC day"""


def tt_minus_utc(utc: Any) -> Any:
    """Return TT − UTC in seconds at a moment in UTC."""
    if type(utc) is float:
        day = float(floor(utc))
        return times.tt_minus_utc(day + EPOCH, utc - day)
    whole = np.floor(utc)
    return times.tt_minus_utc(whole + EPOCH, utc - whole)


# What is tabulated ------------------------------------------------------------------------------


def motion(tt: Any) -> Any:
    """Return MOTION one by one, by ERFA's epv00 (Moisson & Bretagnon 2001, VSOP2000)

    Against DE405 it is good to 13 km and 5 mm/s at the worst, 1900-2100 (its own documentation).
    """
    about_sun, about_all = erfa.ufunc.epv00(EPOCH, tt)[:2]
    (x, y, z), (vx, vy, vz) = (_components(about_sun[part]) for part in "pv")
    (px, py, pz), (ux, uy, uz) = (_components(about_all[part]) for part in "pv")
    to_light, to_speed = ASTRONOMICAL_UNIT / LIGHT_SPEED, ASTRONOMICAL_UNIT / DAY
    distance = sqrt(x * x + y * y + z * z) * ASTRONOMICAL_UNIT
    return (
        *(ux * to_speed, uy * to_speed, uz * to_speed),
        *(px * to_light, py * to_light, pz * to_light),
        *((ux - vx) * to_speed, (uy - vy) * to_speed, (uz - vz) * to_speed),
        GM_SUN / (distance * LIGHT_SPEED**2),
    )


def _components(vectors: Any) -> Any:
    """Return what the last axis holds one by one, as plain floats where that is all there is"""
    return vectors.tolist() if vectors.ndim == 1 else np.moveaxis(vectors, -1, 0)


def orientation(tt: Any) -> Any:
    """Return the celestial intermediate pole's x and y, the CIO's locator and the equation of the
    origins [rad]: IAU 2006 precession, IAU 2000B nutation.

    2000B keeps 77 of 2000A's 1365 terms and is within 1 mas of it until 2050 (McCarthy & Luzum
    2003), which is 0.07 ms of sidereal time.
    """
    of_date = erfa.pn06(EPOCH, tt, *erfa.nut00b(EPOCH, tt))[-1]
    x, y = erfa.bpn2xy(of_date)
    locator = erfa.s06(EPOCH, tt, x, y)
    return x, y, locator, erfa.eors(of_date, locator)


def tdb_minus_tt(tt: Any) -> Any:
    """Return TDB − TT in seconds at the Earth's centre (Fairhead & Bretagnon 1990)"""
    return (erfa.dtdb(EPOCH, tt, 0.0, 0.0, 0.0, 0.0),)


STEP: Final = 1.0
"""Days between the nodes"""
POINTS: Final = 16
"""A column's rows are so what each is alone, within 2e-5 mm/s and 1 ns of sidereal time;
tests/physics/compare_interpolations.py has what other choices give"""


def interpolated(of: Callable[[Any], tuple[Any, ...]], tt: Any) -> tuple[Any, ...]:
    """Return what `of` gives for an array of moments, from nodes a day apart where that is less

    Lagrange's formula through sixteen nodes.
    """
    whole = np.floor(tt / STEP)
    reach = np.arange(1 - POINTS // 2, 1 + POINTS // 2)
    nodes = np.unique(whole[..., None] + reach)
    if nodes.size > whole.size:
        return of(tt)
    first = np.searchsorted(nodes, whole + reach[0])
    part = tt / STEP - whole
    weights = []
    for place in reach.tolist():
        weight = np.ones_like(part)
        for other in reach.tolist():
            if other != place:
                weight *= (part - other) / (place - other)
        weights.append(weight)
    return tuple(
        sum(weight * column[first + point] for point, weight in enumerate(weights))
        for column in of(nodes * STEP)
    )


@cache
def earth_rotation() -> tuple[Any, Any, Any, Any]:
    """Return the IERS's daily values: day since the epoch, UT1 − TT [s], pole's x and y [rad]

    From the packaged finals2000A (IERS Bulletin A; of Bulletin B where it has been published).
    """
    rows = [
        (line[7:15], *(line[b].strip() or line[a] for a, b in _FIELDS))
        for line in Path(IERS_A_FILE).read_text(encoding="ascii").splitlines()
        if line[58:68].strip()
    ]
    mjd, x, y, ut1_minus_utc = np.array(rows).astype(float).T
    day = mjd + 2_400_000.5 - EPOCH
    ut1_minus_tt = ut1_minus_utc - tt_minus_utc(day)
    arcsec = DEGREE / 3600
    return day, ut1_minus_tt, x * arcsec, y * arcsec


_FIELDS: Final = (
    (slice(18, 27), slice(134, 144)),
    (slice(37, 46), slice(144, 154)),
    (slice(58, 68), slice(154, 165)),
)
"""Of pole x, pole y [arcsec] and UT1 − UTC [s]: first Bulletin A's, then B's columns"""


def spin(utc: Any) -> tuple[Any, ...]:
    """Return UT1 − TT [s] and the pole's x and y [rad]

    Outside the IERS's days UT1 = UTC, which is wrong by up to 0.9 s: 3 cm/s at the equator. The
    pole is then where the IERS Conventions' secular polar motion has it (2010, update of 2018).
    """
    days, ut1_minus_tt, x, y = earth_rotation()
    first, last = float(days[0]), float(days[-1])
    if type(utc) is float:
        if not first <= utc < last:
            return _unknown_spin(utc)
        place = int(utc - first)
        part = utc - first - place
        return tuple(
            float(each[place]) * (1 - part) + float(each[place + 1]) * part
            for each in (ut1_minus_tt, x, y)
        )
    known = (utc >= first) & (utc < last)
    return tuple(
        np.where(known, np.interp(utc, days, each), otherwise)
        for each, otherwise in zip((ut1_minus_tt, x, y), _unknown_spin(utc), strict=True)
    )


def _unknown_spin(utc: Any) -> tuple[Any, ...]:
    years = utc / 365.25
    milliarcsec = DEGREE / 3.6e6
    return (
        -tt_minus_utc(utc),
        (55.0 + 1.677 * years) * milliarcsec,
        (320.5 + 3.460 * years) * milliarcsec,
    )


def ephemeris_in_words() -> str:
    return (
        f"Earth and Sun: epv00 of ERFA {erfa.__version__} (VSOP2000, within 13 km and 5 mm/s of "
        "DE405 from 1900 to 2100)"
    )


def orientation_in_words() -> str:
    days = earth_rotation()[0]
    first, last = (date(2000, 1, 1) + timedelta(days=float(each)) for each in (days[0], days[-1]))
    leap = times.last_leap_second()
    return (
        f"IERS finals2000A of astropy-iers-data {version('astropy-iers-data')}, {first} to {last} "
        "(predicted at the end); outside, UT1 = UTC, wrong by up to 0.9 s (3 cm/s, 0.9 s of "
        f"sidereal time); leap seconds known to {leap.since}; IAU 2006 precession, 2000B nutation"
    )


# The Earth at a moment ----------------------------------------------------------------------------


class Earth:
    """The Earth at a moment, or at each of an array of moments; computed as far as it is asked."""

    def __init__(self, utc: Any) -> None:
        self.utc = utc
        self.tt = utc + tt_minus_utc(utc) / DAY

    def _of(self, of: Callable[[Any], tuple[Any, ...]]) -> tuple[Any, ...]:
        if type(self.tt) is float:
            # numpy's own scalars are slow to go on with
            return tuple(map(float, of(self.tt)))
        known = np.isfinite(self.tt)
        found = interpolated(of, np.where(known, self.tt, 0.0))
        return found if known.all() else tuple(np.where(known, each, np.nan) for each in found)

    @cached_property
    def _motion(self) -> Any:
        return self._of(motion)

    @cached_property
    def _orientation(self) -> Any:
        return self._of(orientation)

    @cached_property
    def _spin(self) -> tuple[Any, ...]:
        return spin(self.utc)

    @property
    def velocity(self) -> Vector:
        """Of the Earth's centre from the barycentre, km/s"""
        return tuple(self._motion[0:3])

    @property
    def position(self) -> Vector:
        """Of the Earth's centre from the barycentre, s of light"""
        return tuple(self._motion[3:6])

    @property
    def sun_velocity(self) -> Vector:
        """Of the Sun's centre from the barycentre, km/s"""
        return tuple(self._motion[6:9])

    @property
    def sun_potential(self) -> Real:
        return self._motion[9]

    @property
    def pole(self) -> tuple[Real, Real]:
        """Of the Earth's rotation among the stars"""
        return self._orientation[0], self._orientation[1]

    @property
    def origin(self) -> Real:
        """The equation of the origins less the locator, rad"""
        return self._orientation[3] - self._orientation[2]

    @property
    def turn_offset(self) -> Real:
        """What a clock on TT lacks to tell the Earth's rotation, rad"""
        return SPIN * self._spin[0] - self._orientation[2]

    @property
    def wobble(self) -> tuple[Real, Real]:
        """Of the pole on the ground, rad"""
        return self._spin[1], self._spin[2]

    @property
    def tdb(self) -> Real:
        return self.tt + self._of(tdb_minus_tt)[0] / DAY


class EarthOfTable:
    """The Earth at a moment in a cell, as expressions over a season table."""

    wobble = (0.0, 0.0)

    def __init__(self, utc: Expr) -> None:
        self.utc = utc
        day = kept("row of the day", self._row(floor(utc)))
        at_start, gained = (
            Expr("INDEX", name(f"season_{column}"), day)
            for column in ("tt_minus_utc", "leap_second")
        )
        # the fraction of a day with a leap second runs slower
        self.tt = kept("TT", utc + (at_start + gained * (utc - floor(utc))) / DAY)
        row = kept("row of the moment", self._row(floor(self.tt)))
        part = kept("part of the day", self.tt - floor(self.tt))
        before, after, beyond = part + 1, part - 1, part - 2
        self._points = (
            (row - 1, kept("weight of the day before", part * after * beyond / -6)),
            (row, kept("weight of the day", before * after * beyond / 2)),
            (row + 1, kept("weight of the day after", before * part * beyond / -2)),
            (row + 2, kept("weight of the second day after", before * part * after / 6)),
        )

    def _row(self, day: Real) -> Real:
        first, last = name("season_first"), name("season_last")
        inside = (self.utc >= first) & (self.utc < last)
        return Expr("IF", inside, day - first + SEASON_MARGIN + 1, Expr("#NUM!"))

    def _column(self, column: str) -> Real:
        of_rows = [
            weight * Expr("INDEX", name(f"season_{column}"), row) for row, weight in self._points
        ]
        return kept(column.replace("_", " "), of_rows[0] + of_rows[1] + of_rows[2] + of_rows[3])

    def _vector(self, column: str) -> Vector:
        return tuple(self._column(f"{column}_{axis}") for axis in "xyz")

    @property
    def velocity(self) -> Vector:
        return self._vector("earth_velocity")

    @property
    def position(self) -> Vector:
        return self._vector("earth_position")

    @property
    def sun_velocity(self) -> Vector:
        return self._vector("sun_velocity")

    @property
    def sun_potential(self) -> Real:
        return self._column("sun_potential")

    @property
    def pole(self) -> tuple[Real, Real]:
        return self._column("pole_x"), self._column("pole_y")

    @property
    def origin(self) -> Real:
        return self._column("origin")

    @property
    def turn_offset(self) -> Real:
        return self._column("turn_offset")

    @property
    def tdb(self) -> Real:
        return self.tt + self._column("tdb_minus_tt") / DAY


SEASON_MARGIN: Final = 2
"""Days that a season table has before its first date and after its last, to interpolate with"""


def season(first: float, last: float) -> dict[str, Any]:
    """Return a season table for the dates from `first` to before `last`: columns by name.

    first, last: days since 2000 January 1
    """
    days = np.arange(first - SEASON_MARGIN, last + SEASON_MARGIN + 1.0)
    ut1_minus_tt, _, _ = spin(days)
    pole_x, pole_y, locator, origin = orientation(days)
    return {
        **dict(zip(MOTION, motion(days), strict=True)),
        "pole_x": pole_x,
        "pole_y": pole_y,
        "turn_offset": SPIN * ut1_minus_tt - locator,
        "origin": origin - locator,
        "tdb_minus_tt": tdb_minus_tt(days)[0],
        "tt_minus_utc": tt_minus_utc(days),
        "leap_second": times.tt_minus_utc(days + EPOCH, 1.0) - tt_minus_utc(days),
    }


@lru_cache(maxsize=64)
def _at_float(utc: float) -> Earth:
    # the cells of one row ask for one moment
    return Earth(utc)


def at(utc: Real) -> Any:
    """Return the Earth at a moment: a float, an array or a symbol."""
    if type(utc) is float:
        return _at_float(utc)
    return EarthOfTable(utc) if isinstance(utc, Expr) else Earth(utc)


# What an observer sees ----------------------------------------------------------------------------


def direction(ra: Real, dec: Real) -> Vector:
    """Return the unit vector toward a place on the sky, degrees"""
    east, north = ra * DEGREE, dec * DEGREE
    return cos(north) * cos(east), cos(north) * sin(east), sin(north)


def dot(one: Vector, other: Vector) -> Real:
    return one[0] * other[0] + one[1] * other[1] + one[2] * other[2]


def added(one: Vector, other: Vector) -> Vector:
    return one[0] + other[0], one[1] + other[1], one[2] + other[2]


def scaled(factor: Real, vector: Vector) -> Vector:
    return factor * vector[0], factor * vector[1], factor * vector[2]


def rotation(earth: Any) -> Real:
    """Return the Earth's rotation angle less the CIO's locator, rad (Capitaine et al. 2000)"""
    turns = TURN_AT_J2000 + TURNS_PER_DAY * (earth.tt - 0.5)
    return 2 * pi * (turns - floor(turns)) + earth.turn_offset


def on_the_ground(earth: Any, longitude: Real, latitude: Real, height: Real) -> Vector:
    """Return an observer's place from the Earth's centre in km, along axes that turn with it"""
    squashed = (1 - FLATTENING) ** 2
    sine, cosine = sin(latitude * DEGREE), cos(latitude * DEGREE)
    across = EQUATORIAL_RADIUS / sqrt(cosine * cosine + squashed * sine * sine)
    from_axis = (across + height / 1000) * cosine
    along_axis = (across * squashed + height / 1000) * sine
    x, y = from_axis * cos(longitude * DEGREE), from_axis * sin(longitude * DEGREE)
    xp, yp = earth.wobble
    return x - xp * along_axis, y + yp * along_axis, along_axis + (xp * x - yp * y)


def to_the_stars(pole: tuple[Real, Real], turned: Vector) -> Vector:
    """Return a vector along the ICRS's axes, of one along the pole and the CIO (IERS 2010, 5.4.4)

    To second order in the pole's coordinates, which leaves 1e-11.
    """
    x, y = pole
    a, b, c = turned
    tilt = (x * a + y * b) / 2
    return a - x * tilt + x * c, b - y * tilt + y * c, c - 2 * tilt - (x * x + y * y) / 2 * c


def from_the_stars(pole: tuple[Real, Real], fixed: Vector) -> Vector:
    """Return a vector along the pole and the CIO, of one along the ICRS's axes."""
    x, y = pole
    a, b, c = fixed
    tilt = (x * a + y * b) / 2
    return a - x * tilt - x * c, b - y * tilt - y * c, c + 2 * tilt - (x * x + y * y) / 2 * c


def _kept(words: str, vector: Vector) -> Vector:
    return tuple(kept(f"{words} {axis}", each) for axis, each in zip("xyz", vector, strict=True))


def observer(earth: Any, longitude: Real, latitude: Real, height: Real) -> tuple[Vector, Vector]:
    """Return an observer's place [km] and velocity [km/s] from the Earth's centre."""
    x, y, z = on_the_ground(earth, longitude, latitude, height)
    angle = kept("Earth rotation", rotation(earth))
    cosine, sine = cos(angle), sin(angle)
    east, north = kept("site u", x * cosine - y * sine), kept("site v", x * sine + y * cosine)
    place = to_the_stars(earth.pole, (east, north, z))
    velocity = to_the_stars(earth.pole, (-SPIN * north, SPIN * east, 0.0))
    return _kept("site place", place), _kept("site velocity", velocity)


def barycentric_factor(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Return 1 + v/c, which multiplied with a measured 1 + z gives that of the barycentre.

    Wright & Eastman 2014, equation 28, without parallax, the star's own motion and Shapiro's
    delay: the classical shift, time dilation, and the potentials of Sun, Earth and Jupiter.
    """
    earth = at(utc)
    place, moving = observer(earth, longitude, latitude, height)
    beta = _kept("beta", scaled(1 / LIGHT_SPEED, added(earth.velocity, moving)))
    potential = earth.sun_potential + GM_EARTH / LIGHT_SPEED**2 / sqrt(dot(place, place))
    along = 1 + dot(beta, direction(ra, dec))
    return along / sqrt(1 - dot(beta, beta)) / (1 - potential - JUPITER)


def heliocentric_factor(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Return the same about the Sun's centre: what is seen from there moves with the Sun."""
    beta = scaled(1 / LIGHT_SPEED, at(utc).sun_velocity)
    of_sun = (1 + dot(beta, direction(ra, dec))) / sqrt(1 - dot(beta, beta))
    return barycentric_factor(ra, dec, utc, longitude, latitude, height) / of_sun


def barycentric_date(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Return the Julian date in TDB at which light from a place on the sky meets the barycentre.

    Eastman, Siverd & Gaudi 2010: Rømer's and Einstein's delays. Shapiro's, and the curvature of
    the wave front of a star nearby, are left out.
    """
    earth = at(utc)
    place, _ = observer(earth, longitude, latitude, height)
    whole = added(earth.position, scaled(1 / LIGHT_SPEED, place))
    return EPOCH + (earth.tdb + dot(whole, direction(ra, dec)) / DAY)


def sidereal_time(utc: Real, longitude: Real) -> Real:
    """Return the local apparent sidereal time, h."""
    earth = at(utc)
    return modulo((rotation(earth) - earth.origin) / (15 * DEGREE) + longitude / 15, 24)


def in_the_sky(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Vector:
    """Return where a star is seen, as components toward the south, the east and the zenith.

    With the aberration of its light, without refraction.
    """
    earth = at(utc)
    _, moving = observer(earth, longitude, latitude, height)
    seen = added(direction(ra, dec), scaled(1 / LIGHT_SPEED, added(earth.velocity, moving)))
    x, y, z = _kept("seen", from_the_stars(earth.pole, seen))
    angle = kept("meridian", rotation(earth) + longitude * DEGREE)
    toward, east = x * cos(angle) + y * sin(angle), y * cos(angle) - x * sin(angle)
    sine, cosine = sin(latitude * DEGREE), cos(latitude * DEGREE)
    return _kept("toward", (toward * sine - z * cosine, east, toward * cosine + z * sine))


def altitude(ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real) -> Real:
    """Return the altitude without refraction, degrees."""
    south, east, up = in_the_sky(ra, dec, utc, longitude, latitude, height)
    return angle_of(sqrt(south * south + east * east), up) / DEGREE


def hour_angle(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Return the hour angle, h, west of the meridian positive."""
    south, east, up = in_the_sky(ra, dec, utc, longitude, latitude, height)
    across = south * sin(latitude * DEGREE) + up * cos(latitude * DEGREE)
    return angle_of(across, -east) / (15 * DEGREE)


def airmass(altitude: Real) -> Real:
    """Return the airmass at an altitude above 0, degrees: Pickering 2002, DIO 12, 20, note 39"""
    return 1 / sin((altitude + 244 / (165 + 47 * altitude**1.1)) * DEGREE)
