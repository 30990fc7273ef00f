"""The barycentric velocity and date against astropy, a JPL ephemeris and published values.

astropy computes from the same series for the Earth's motion (ERFA's epv00), but by code of its own
from the site to the sum. Independent of that are JPL's DE421, read by jplephem, with the site's
place and motion by skyfield; and what the authors of the method computed for others.
"""

import subprocess
import sys
from collections.abc import Iterator
from typing import Any

import astropy.units as u
import numpy as np
import pytest
from astropy.constants import G, GM_earth, GM_sun, M_jup, c
from astropy.coordinates import get_body_barycentric_posvel
from astropy.time import Time
from numpy.typing import NDArray
from observations import SITES, astropy_as_packaged, observations

import cellfuncs as cf
from cellfuncs.physics import earth

Floats = NDArray[np.float64]

pytestmark = [
    pytest.mark.filterwarnings("ignore:ERFA function:erfa.ErfaWarning"),
    pytest.mark.filterwarnings("ignore:Tried to get polar motions"),
]

C = 299_792.458  # km/s


@pytest.fixture(autouse=True)
def _astropy_as_packaged() -> Iterator[None]:
    with astropy_as_packaged():
        yield


SPANS = [(2000, "1990-01-01", "2030-01-01"), (500, "1973-01-02", "2050-01-01")]
spans = pytest.mark.parametrize(("count", "first", "last"), SPANS)


# Against astropy ----------------------------------------------------------------------------------


@spans
def test_velocity_as_astropy_has_it(count: int, first: str, last: str) -> None:
    """Within 1 mm/s: 0.05 are what ours leaves out of Jupiter's potential and the Moon's; beyond
    the tables up to 0.6, by 2050, the pole, which astropy holds where it was on the average."""
    rows = observations(1, count, first, last)
    theirs = rows.sky.radial_velocity_correction(obstime=rows.time).to_value(u.mm / u.s)
    ours = cf.velocity_barycentric(*rows.arguments) * 1e6
    assert np.abs(ours - theirs).max() < 1.0
    assert set(rows.site) == set(range(len(SITES)))


@spans
def test_date_as_astropy_has_it(count: int, first: str, last: str) -> None:
    """Within 0.1 ms, of which a Julian date in a double takes 0.04."""
    rows = observations(2, count, first, last)
    ra, dec, utc, *site = rows.arguments
    theirs = (rows.time.tdb + rows.time.light_travel_time(rows.sky)).jd
    ours = cf.time_barycentric(utc, ra, dec, *site)
    assert np.abs(ours - theirs).max() * 86.4e6 < 0.1


def test_heliocentric_velocity_from_astropys_parts() -> None:
    """What is seen from the Sun's centre moves with it: the barycentric factor over the Sun's own
    relativistic Doppler factor, of astropy's numbers."""
    rows = observations(3, 2000, "1990-01-01", "2030-01-01")
    time, sky = rows.time, rows.sky
    barycentric = 1 + (sky.radial_velocity_correction(obstime=time) / c).to_value(u.one)
    sun = (get_body_barycentric_posvel("sun", time)[1] / c).xyz.to_value(u.one)
    away = np.sum(sun * sky.cartesian.xyz.value, axis=0)
    theirs = C * (barycentric * np.sqrt(1 - np.sum(sun**2, axis=0)) / (1 + away) - 1)
    ours = cf.velocity_heliocentric(*rows.arguments)
    assert np.abs(ours - theirs).max() * 1e6 < 1.0


def test_heliocentric_velocity_against_the_classical_one() -> None:
    """astropy's is classical: what it leaves out are the Sun's and the Earth's potential (the Sun's
    is 3.0 m/s) and time dilation (1.5 m/s), together 4.4 to 4.8 m/s, and products of velocities
    (30 km/s x 16 m/s / c, 2 mm/s)."""
    rows = observations(4, 2000, "1990-01-01", "2030-01-01")
    theirs = rows.sky.radial_velocity_correction("heliocentric", obstime=rows.time)
    more = (cf.velocity_heliocentric(*rows.arguments) - theirs.to_value(u.km / u.s)) * 1000
    assert more.min() > 4.3
    assert more.max() < 4.9
    apart = cf.velocity_heliocentric(*rows.arguments) - cf.velocity_barycentric(*rows.arguments)
    # the Sun moves by up to 16 m/s about the barycentre
    assert 0.010 < np.abs(apart).max() < 0.017


def test_one_row_is_computed_as_a_column_is() -> None:
    rows = observations(5, 300, "1962-01-01", "2099-12-31")
    ra, dec, utc, *site = rows.arguments
    for function, arguments in [
        (cf.velocity_barycentric, rows.arguments),
        (cf.velocity_heliocentric, rows.arguments),
        (cf.time_barycentric, (utc, ra, dec, *site)),
        (cf.time_sidereal, (utc, site[0])),
        (cf.angle_hour, rows.arguments),
        (cf.altitude, rows.arguments),
    ]:
        column = function(*arguments)
        alone = [function(*map(float, row)) for row in zip(*arguments, strict=True)]
        assert alone == pytest.approx(column, rel=1e-15, abs=1e-10)


def test_a_long_column_of_nights_close_together() -> None:
    """There the Earth's motion is interpolated; a cell and a filled column are to hold one number
    (shared/DESIGN.md: to 1e-9)."""
    utc = 2_461_000.5 + np.sort(np.random.default_rng(6).uniform(0, 30, 3000))
    column = cf.velocity_barycentric(201.3, -43.0, utc, *SITES[3])
    alone = [cf.velocity_barycentric(201.3, -43.0, float(each), *SITES[3]) for each in utc]
    assert np.abs(column / alone - 1).max() < 1e-9
    sidereal = cf.time_sidereal(utc, SITES[3][0])
    alone = [cf.time_sidereal(float(each), float(SITES[3][0])) for each in utc]
    assert np.abs(sidereal / alone - 1).max() < 1e-9


def test_a_redshift_is_multiplied_not_added() -> None:
    """Wright & Eastman 2014, eq. 1 and 2: (1 + z)(1 + z_B) − 1; at z = 6 the sum z + z_B would be
    wrong by 6 z_B, 180 km/s."""
    rows = observations(7, 200, "1990-01-01", "2030-01-01")
    shift = rows.sky.radial_velocity_correction(obstime=rows.time).to_value(u.km / u.s) / C
    for z in (-0.001, 0.0, 0.05, 6.0):
        ours = cf.redshift_barycentric(z, *rows.arguments)
        assert np.abs(ours - ((1 + z) * (1 + shift) - 1)).max() < (1 + z) * 1e-6 / C


# Against a JPL ephemeris --------------------------------------------------------------------------


@pytest.fixture(scope="module")
def de421() -> Any:
    import de421
    from jplephem import Ephemeris

    return Ephemeris(de421)


def of_body(ephemeris: Any, body: str, tdb: Any) -> tuple[Floats, Floats]:
    """Return km and km/s from the barycentre."""
    place, velocity = ephemeris.position_and_velocity(body, tdb)
    return place, velocity / 86_400


def of_earth(ephemeris: Any, tdb: Any) -> tuple[Floats, Floats]:
    """The ephemeris has the centre of mass of Earth and Moon, and the Moon about the Earth."""
    both, moon = of_body(ephemeris, "earthmoon", tdb), of_body(ephemeris, "moon", tdb)
    share = 1 / (1 + ephemeris.EMRAT)
    return both[0] - moon[0] * share, both[1] - moon[1] * share


def wright_eastman_28(
    toward: Floats, velocity: Floats, distances: list[tuple[float, Floats]]
) -> Floats:
    """z_B of equation 28 of Wright & Eastman 2014, of a star at rest, far away, and not near the
    Sun: γ (1 + β·ρ) / (1 + Σ φ/c²) − 1, with the potential φ = −GM/r of each body."""
    beta = velocity / C
    gamma = 1 / np.sqrt(1 - np.sum(beta**2, axis=0))
    potential = sum(-mass / r / C**2 for mass, r in distances)
    return np.asarray(gamma * (1 + np.sum(beta * toward, axis=0)) / (1 + potential) - 1)


def test_velocity_from_de421_within_2_cm_s(de421: Any) -> None:
    """DE421 with skyfield's precession, nutation, rotation and polar motion.

    epv00 itself is good to 5 mm/s; skyfield counts UT1 by tables of its own, and there is no other
    part that both have.
    """
    from skyfield.api import load, wgs84

    rows = observations(8, 500, "1990-01-01", "2024-01-01")
    moments = load.timescale(builtin=True).from_astropy(Time(rows.utc, format="jd", scale="utc"))
    tdb = np.asarray(moments.tdb)
    place, velocity = of_earth(de421, tdb)
    sites = np.empty_like(place), np.empty_like(velocity)
    for number, (longitude, latitude, height) in enumerate(SITES):
        here = rows.site == number
        site = wgs84.latlon(latitude, longitude, elevation_m=height).at(moments[here])
        sites[0][:, here], sites[1][:, here] = site.position.km, site.velocity.km_per_s
    bodies = [
        (GM_sun.to_value(u.km**3 / u.s**2), of_body(de421, "sun", tdb)[0]),
        ((G * M_jup).to_value(u.km**3 / u.s**2), of_body(de421, "jupiter", tdb)[0]),
    ]
    distances = [(mass, np.linalg.norm(place - body, axis=0)) for mass, body in bodies]
    distances.append(
        (GM_earth.to_value(u.km**3 / u.s**2), np.linalg.norm(sites[0], axis=0)),
    )
    toward = rows.sky.cartesian.xyz.value
    theirs = C * wright_eastman_28(toward, velocity + sites[1], distances)
    ours = cf.velocity_barycentric(*rows.arguments)
    assert np.abs(ours - theirs).max() * 1e5 < 2.0


def test_date_from_de421(de421: Any) -> None:
    """Rømer's delay of the Earth's centre: 13 km, which epv00 is good to, are 0.04 ms of light."""
    rows = observations(9, 500, "1990-01-01", "2030-01-01")
    place, _ = of_earth(de421, rows.time.tdb.jd)
    toward = rows.sky.cartesian.xyz.value
    site = rows.location.get_gcrs_posvel(rows.time)[0].xyz.to_value(u.km)
    theirs = (rows.time.tdb + np.sum((place + site) * toward, axis=0) / C * u.s).jd
    ra, dec, utc, *sites = rows.arguments
    ours = cf.time_barycentric(utc, ra, dec, *sites)
    assert np.abs(ours - theirs).max() * 86.4e6 < 0.1


# Published values ---------------------------------------------------------------------------------

CALCULATED_BY_THE_AUTHORS = """
    -10335.933 -14198.476 -2237.600 -14198.476 -17425.465 -17131.709 2424.371 2130.615
    -17425.465 -19872.500 -24442.371 -11017.090 6978.062 11547.933 -1877.348 -19872.500
    -21430.082 -27669.143 -16917.085 2729.572 16476.496 13971.972 -2898.043 -21430.082
    -22028.513 -29301.923 -21481.130 -3147.448 14959.501 22232.912 14412.119 -3921.564
    -22028.513 -21641.015 -29373.051 -24205.905 -8557.341 10250.504 23417.230 24781.981
    13706.173 -4627.700 -21641.014 -20284.926 -28193.917 -22908.516 -6901.821 12336.458
    25804.516 27200.500 15871.214 -2882.247 -20284.926 -18020.929 -25752.966 -20585.820
    -4937.256 13870.589 27037.316 28402.066 17326.260 -1007.622 -18020.929 -14950.333
    -22223.743 -14402.949 3930.733 22037.682 29311.093 21490.301 3156.622 -14950.333
    -11210.538 -17449.599 -6697.541 12949.116 26696.040 24191.516 7321.504 -11210.538
    -6968.894 -11538.764 1886.517 19881.669 24451.540 11026.260 -6968.893 -2415.202
    -2121.446 17434.634 17140.879 -2415.202 2246.769 14207.645 2246.769 6808.408
"""
"""m/s, of the web calculator of Wright & Eastman, at JD 2457244.5 UTC from longitude -70.403°,
latitude -24.6252°, 2635 m; as astropy's package has them for its own tests
(coordinates/tests/data/barycorr_bvcs.dat), there with eight decimals"""


def test_values_of_the_methods_authors() -> None:
    """Within 1 cm/s, what the authors give for their method and astropy allows there as well: their
    calculator has a JPL ephemeris, and Earth-rotation data of its day."""
    places = [
        (ra % 360, dec)
        for dec in np.linspace(-85, 85, 15)
        for ra in np.linspace(-180, 180 - 1e-6, round(10 * np.cos(np.radians(dec))))
    ]
    theirs = np.array(CALCULATED_BY_THE_AUTHORS.split(), dtype=float) / 1000
    ra, dec = np.array(places).T
    ours = cf.velocity_barycentric(ra, dec, 2_457_244.5, -70.403, -24.6252, 2635.0)
    assert np.abs(ours - theirs).max() * 1e5 < 1.0


def test_motion_of_the_earth_as_sofa_documents_it() -> None:
    """SOFA's own test of epv00 (t_sofa_c.c, which pyerfa carries): from the barycentre, au and
    au/day, at MJD 53411.52501161 TDB."""
    place = np.array([-0.771_410_444_049_111_2, 0.559_841_206_182_417_1, 0.242_599_627_772_245_2])
    velocity = np.array(
        [-0.010_918_742_681_168_2, -0.012_465_254_617_328_6, -0.005_404_773_180_966]
    )
    found = earth.motion(53_411.525_011_61 - (earth.EPOCH - 2_400_000.5))
    # au: IAU 2012 resolution B2
    assert found[0:3] == pytest.approx((velocity * 149_597_870.7 / 86_400).tolist(), rel=1e-12)
    assert found[3:6] == pytest.approx((place * 149_597_870.7 / C).tolist(), rel=1e-12)


def test_motion_of_the_earth_by_stumpffs_series() -> None:
    """Stumpff 1980, A&AS 41, 1: a worked example that his subroutine's translations carry, km/s for
    the equinox of 2000 at JD 2449398.5 (from memory). He gives 42 cm/s as his largest error."""
    theirs = (-17.080_83, -22.804_71, -9.886_258)
    ours = earth.motion(2_449_398.5 - earth.EPOCH)[0:3]
    assert ours == pytest.approx(theirs, abs=0.000_42)


# Leap seconds -------------------------------------------------------------------------------------


def tdb_minus_utc(utc: str) -> float:
    """Seconds, as the mean of the dates of two targets opposite each other, whose delays cancel."""
    site = (10.0, 46.0, 3100.0)
    both = [cf.time_barycentric(utc, *place, *site) for place in ((75.0, 20.0), (255.0, -20.0))]
    return (sum(both) / 2 - cf.time_julian(utc)) * 86_400  # type: ignore[no-any-return]


@pytest.mark.parametrize(
    ("utc", "tai_minus_utc"),
    [
        # the IERS's Leap_Second.dat; before 1972 the USNO's tai-utc.dat (from memory)
        ("1967-01-01", 4.313_170 + (39_491 - 39_126) * 0.002_592),
        ("1972-01-01", 10),
        ("1972-07-01", 11),
        ("1999-01-01", 32),
        ("2005-12-30T23:59:59", 32),
        ("2006-01-01", 33),
        ("2016-12-31", 36),
        # half of the leap second has passed in the fraction of the day
        ("2016-12-31T12:00", 36.5),
        ("2017-01-01", 37),
        ("2026-12-24T03:30", 37),
    ],
)
def test_leap_seconds_come_through(utc: str, tai_minus_utc: float) -> None:
    """TDB is within 2 ms of TT = TAI + 32.184 s; a Julian date holds 0.04 ms."""
    assert tdb_minus_utc(utc) == pytest.approx(32.184 + tai_minus_utc, abs=0.002)


def test_a_leap_second_lasts_a_second() -> None:
    """Of 2016 December 31: from 23:59:59 to 0h it is 2 s."""
    place, site = (75.0, 20.0), (10.0, 46.0, 3100.0)
    before, during, after = (
        cf.time_barycentric(utc, *place, *site)
        for utc in ("2016-12-31T23:59:59", "2016-12-31T23:59:60", "2017-01-01T00:00:00")
    )
    # a second of light's delay changes by up to 1e-4 s
    assert (during - before) * 86_400 == pytest.approx(1, abs=3e-4)
    assert (after - during) * 86_400 == pytest.approx(1, abs=3e-4)


# No network ---------------------------------------------------------------------------------------

WITHOUT_A_NETWORK = """
import socket

def refused(*arguments, **named):
    raise AssertionError("a socket was asked for")

class Refused(socket.socket):
    __init__ = refused

socket.socket = Refused
socket.create_connection = socket.getaddrinfo = refused
try:
    socket.socket()
except AssertionError:
    pass
else:
    raise SystemExit("sockets are not blocked")

from cellfuncs import CATALOGUE, provenance
from cellfuncs.physics import earth

for year in (1965, 2025, 2040, 2090):
    for name in ("VELOCITY_BARYCENTRIC", "VELOCITY_HELIOCENTRIC", "ALTITUDE", "ANGLE_HOUR"):
        print(CATALOGUE[name](101.287, -16.716, f"{year}-12-24T03:30", -70.4, -24.6, 2600.0))
    utc = [f"{year}-12-{day:02}T03:30" for day in range(1, 31)]
    print(*CATALOGUE["TIME_BARYCENTRIC"](utc, 101.287, -16.716, -70.4, -24.6, 2600.0))
    print(CATALOGUE["TIME_SIDEREAL"](utc[0], -70.4))
print(provenance("ephemeris"), provenance("earth-orientation"))
"""


def test_no_socket_is_ever_asked_for() -> None:
    """In an interpreter of its own, with nothing kept from other tests."""
    done = subprocess.run(
        [sys.executable, "-c", WITHOUT_A_NETWORK], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    numbers = [float(each) for line in done.stdout.splitlines()[:-1] for each in line.split()]
    assert len(numbers) == 4 * (4 + 30 + 1)
    assert np.isfinite(numbers).all()
