"""Errors of results against derivatives by mpmath and against random draws.

The mpmath formulas are written here from the publications named, in 20 digits, and differentiated
by mpmath; nothing of them comes from the package. mpmath has no uncertainty of its own: a σ of 1 on
one argument gives the size of the derivative by it.
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import hypot
from typing import Any

import numpy as np
import pytest
from physics.test_expansion import Friedmann, mp, mpf

import cellfuncs as cf
from cellfuncs import CATALOGUE, Function, InputError
from cellfuncs.catalogue import CosmologySet, Number, Numeric, Truth, Word
from cellfuncs.physics import earth, frames
from cellfuncs.propagation import error_function

Real = Any
"""An mpf, which mpmath does not type"""

C = mpf("299792.458")
"""km/s, SI 2019"""

PLANCK = Friedmann("67.66", "0.30966", tcmb0="2.7255", neff="3.046", m_nu=("0", "0", "0.06"))
OPEN = Friedmann("70", "0.3", "0.6", "-0.9", "0.2", "2.7255")
CLOSED = Friedmann("72.5", "0.35", "0.72", "-1.1", "-0.3", "2.7")

# Written from the publications --------------------------------------------------------------------


def comoving(universe: Friedmann, z: Real) -> Real:
    """Hogg 1999, eq. 15, Mpc."""
    return universe.hubble_distance * mp.quad(
        lambda t: 1 / mp.sqrt(universe.squared(1 + t)), [0, z]
    )


def transverse(universe: Friedmann, z: Real) -> Real:
    """Hogg 1999, eq. 16, Mpc."""
    d, k = comoving(universe, z) / universe.hubble_distance, universe.curvature
    if k == 0:
        return universe.hubble_distance * d
    root = mp.sqrt(abs(k))
    return universe.hubble_distance * (mp.sinh if k > 0 else mp.sin)(root * d) / root


def lookback(universe: Friedmann, z: Real) -> Real:
    """Hogg 1999, eq. 30, Gyr."""
    return universe.hubble_time * mp.quad(
        lambda t: 1 / ((1 + t) * mp.sqrt(universe.squared(1 + t))), [0, z]
    )


def age(universe: Friedmann, z: Real) -> Real:
    """The same from z on: what a fixed age today leaves."""
    return mpf("13.8") - lookback(universe, z)


def luminosity(universe: Friedmann, z: Real) -> Real:
    """Hogg 1999, eq. 21."""
    return (1 + z) * transverse(universe, z)


def modulus(distance: Real) -> Real:
    """Hogg 1999, eq. 25, of Mpc."""
    return 5 * mp.log10(distance * 10**6 / 10)


def volume(universe: Friedmann, z: Real, area: Real) -> Real:
    """Hogg 1999, eq. 29, over an area in square degrees."""
    d, across, k = comoving(universe, z), transverse(universe, z), universe.curvature
    if k == 0:
        whole = 4 * mp.pi * d**3 / 3
    else:
        x, root = across / universe.hubble_distance, mp.sqrt(abs(k))
        arc = (mp.asinh if k > 0 else mp.asin)(root * x) / root
        whole = 2 * mp.pi * universe.hubble_distance**3 / k * (x * mp.sqrt(1 + k * x**2) - arc)
    return area / (4 * mp.pi * (180 / mp.pi) ** 2) * whole


def index(vacuum: Real) -> Real:
    """Ciddor 1996, eq. 1, of Angstrom."""
    wavenumber = (10_000 / vacuum) ** 2
    return 1 + (
        mpf("0.05792105") / (mpf("238.0185") - wavenumber)
        + mpf("0.00167917") / (mpf("57.362") - wavenumber)
    )


def vacuum_of(air: Real) -> Real:
    return mp.findroot(lambda vacuum: vacuum / index(vacuum) - air, air * mpf("1.0003"))


def velocity(z: Real, convention: str) -> Real:
    """Greisen et al. 2006, table 3."""
    if convention == "optical":
        return C * z
    if convention == "radio":
        return C * z / (1 + z)
    return C * ((1 + z) ** 2 - 1) / ((1 + z) ** 2 + 1)


def redshift(v: Real, convention: str) -> Real:
    if convention == "optical":
        return v / C
    if convention == "radio":
        return v / (C - v)
    return mp.sqrt((C + v) / (C - v)) - 1


def inverse(f: Callable[[Real], Real], value: Real, near: float) -> Real:
    return mp.findroot(lambda x: f(x) - value, near)


# NIST Atomic Spectra Database, vacuum, as the line table has it
H_ALPHA = mpf("6564.608")


@dataclass(frozen=True)
class Case:
    """A call and the same formula of its numbers alone; `only` of those to differentiate by."""

    name: str
    arguments: tuple[Any, ...]
    formula: Callable[..., Real]

    @property
    def numbers(self) -> list[int]:
        return [at for at, each in enumerate(self.arguments) if isinstance(each, float)]


def of_universes() -> list[Case]:
    cases = []
    for universe, zs in ((PLANCK, (0.003, 0.7, 6.5)), (OPEN, (0.05, 3.0)), (CLOSED, (0.4,))):
        own: Any = universe.as_argument
        for z in zs:
            functions: dict[str, Callable[[Real], Real]] = {
                "DISTANCE_COMOVING": lambda z, w=universe: comoving(w, z),
                "DISTANCE_TRANSVERSE": lambda z, w=universe: transverse(w, z),
                "DISTANCE_LUMINOSITY": lambda z, w=universe: luminosity(w, z),
                "DISTANCE_ANGULAR": lambda z, w=universe: transverse(w, z) / (1 + z),
                "DISTANCE_LIGHT_TRAVEL": lambda z, w=universe: (
                    lookback(w, z) * w.hubble_distance / w.hubble_time
                ),
                "DISTANCE_MODULUS": lambda z, w=universe: modulus(luminosity(w, z)),
                "SCALE_TRANSVERSE": lambda z, w=universe: (
                    transverse(w, z) / (1 + z) * 1000 * mp.pi / 648_000
                ),
                "AGE_AT_REDSHIFT": lambda z, w=universe: age(w, z),
                "TIME_LOOKBACK": lambda z, w=universe: lookback(w, z),
                "EXPANSION_RATE": lambda z, w=universe: mpf(w.h0) * mp.sqrt(w.squared(1 + z)),
                "DECELERATION": lambda z, w=universe: (
                    (1 + z) * mp.diff(w.squared, 1 + z) / (2 * w.squared(1 + z)) - 1
                ),
            }
            cases += [Case(name, (z, own), formula) for name, formula in functions.items()]
            cases.append(
                Case(
                    "MAGNITUDE_ABSOLUTE",
                    (17.5, z, 0.12, 0.03, own),
                    lambda m, z, a, k, w=universe: m - modulus(luminosity(w, z)) - a - k,
                )
            )
            cases.append(
                Case(
                    "VOLUME_COMOVING",
                    (z, 100.0, own),
                    lambda z, area, w=universe: volume(w, z, area),
                )
            )
            if z not in (0.4, 0.7):
                # an inverse is a search over quadratures
                continue
            for kind, forward in (
                ("comoving", comoving),
                ("luminosity", luminosity),
                (
                    "light-travel",
                    lambda w, z: lookback(w, z) * w.hubble_distance / w.hubble_time,
                ),
                ("hubble", lambda w, z: z * w.hubble_distance),
            ):
                cases.append(
                    Case(
                        "REDSHIFT_FROM_DISTANCE",
                        (float(forward(universe, mpf(z))), kind, own),
                        lambda d, w=universe, f=forward, near=z: inverse(
                            lambda x: f(w, x), d, near
                        ),
                    )
                )
            today = cf.age_of_universe(own)
            cases += [
                Case(
                    "REDSHIFT_FROM_LOOKBACK",
                    (float(lookback(universe, mpf(z))), own),
                    lambda t, w=universe, near=z: inverse(lambda x: lookback(w, x), t, near),
                ),
                Case(
                    "REDSHIFT_FROM_AGE",
                    (today - float(lookback(universe, mpf(z))), own),
                    lambda t, w=universe, near=z, now=today: inverse(
                        lambda x: lookback(w, x), mpf(now) - t, near
                    ),
                ),
            ]
    return cases


CASES = [
    *of_universes(),
    Case("WAVELENGTH_OBSERVED", (6564.61, 0.05), lambda rest, z: rest * (1 + z)),
    Case("WAVELENGTH_EMITTED", (6892.84, 0.05), lambda seen, z: seen / (1 + z)),
    Case("WAVELENGTH_VACUUM", (2100.0,), vacuum_of),
    Case("WAVELENGTH_VACUUM", (6562.8,), vacuum_of),
    Case("WAVELENGTH_AIR", (2001.0,), lambda vacuum: vacuum / index(vacuum)),
    Case("WAVELENGTH_AIR", (6564.61,), lambda vacuum: vacuum / index(vacuum)),
    Case("WAVELENGTH_FROM_FREQUENCY", (115.27,), lambda f: C * 10**4 / f),
    Case("FREQUENCY_FROM_WAVELENGTH", (2.6e7,), lambda wave: C * 10**4 / wave),
    Case("REDSHIFT_FROM_WAVELENGTH", (6892.84, 6564.61), lambda seen, rest: seen / rest - 1),
    Case("REDSHIFT_FROM_FREQUENCY", (109.78, 115.27), lambda seen, rest: rest / seen - 1),
    Case("REDSHIFT_FROM_LINE", (6892.84, "H alpha"), lambda seen: seen / H_ALPHA - 1),
    Case("REDSHIFT_FROM_LINE", (6890.9, "ha", "air"), lambda air: vacuum_of(air) / H_ALPHA - 1),
    Case("REDSHIFT_COMBINED", (0.05, 0.001), lambda z1, z2: (1 + z1) * (1 + z2) - 1),
    Case("REDSHIFT_RELATIVE", (0.051, 0.05), lambda z, z0: (1 + z) / (1 + z0) - 1),
    *(
        Case("VELOCITY_FROM_REDSHIFT", (z, word), lambda z, word=word: velocity(z, word))
        for z in (-0.3, 1e-5, 0.05, 6.0)
        for word in ("relativistic", "optical", "radio")
    ),
    *(
        Case("REDSHIFT_FROM_VELOCITY", (v, word), lambda v, word=word: redshift(v, word))
        for v in (-2.5e4, 1500.0, 2.2e5)
        for word in ("relativistic", "optical", "radio")
    ),
    *(
        Case(
            "VELOCITY_CONVERTED",
            (1.5e4, one, other),
            lambda v, one=one, other=other: velocity(redshift(v, one), other),
        )
        for one in ("relativistic", "optical", "radio")
        for other in ("relativistic", "optical", "radio")
    ),
    Case("VELOCITY_SUM", (1.5e5, 2e5), lambda v1, v2: (v1 + v2) / (1 + v1 * v2 / C**2)),
    Case("VELOCITY_PECULIAR", (0.051, 0.05), lambda z, z0: C * (z - z0) / (1 + z0)),
    Case("VELOCITY_HUBBLE", (100.0, 70.0), lambda d, h0: h0 * d),
    Case("DISTANCE_HUBBLE", (7000.0, 70.0), lambda v, h0: v / h0),
    Case("DOPPLER_FACTOR", (1.5e5,), lambda v: mp.sqrt((C + v) / (C - v))),
    Case("DISTANCE_FROM_MODULUS", (31.1,), lambda mu: 10 ** (mu / 5 + 1) / 10**6),
    Case("MODULUS_FROM_DISTANCE", (16.5,), modulus),
    Case("DISTANCE_FROM_PARALLAX", (768.07,), lambda p: 1000 / p),
    # a yes or no is flat on either side of the limit
    *(Case("MEMBERSHIP", (v, 6850.0, 290.0, 3.0), lambda *_: mpf(0)) for v in (7010.0, 9400.0)),
    Case("UNITS_CONVERTED", (500.7, "nm", "Angstrom"), lambda value: 10 * value),
]


def has_an_error(made: Function) -> bool:
    """Tell whether a function makes a number out of numbers, each in a cell of its own."""
    return (
        made.unit != "text"
        and any(isinstance(each, Numeric) for each in made.arguments)
        and all(isinstance(each, (Numeric, Word, Truth, CosmologySet)) for each in made.arguments)
    )


def test_there_is_a_case_for_every_function_that_has_an_error() -> None:
    wanted = {made.name for made in CATALOGUE.values() if has_an_error(made)}
    sky = {made.name for made in CATALOGUE.values() if made.family == "sky"}
    assert {case.name for case in CASES} == wanted - sky
    assert set(AT_MOMENT) == wanted & sky


@pytest.mark.parametrize("name", sorted({case.name for case in CASES}))
def test_derivatives_are_those_of_mpmath(name: str) -> None:
    for case in CASES:
        if case.name != name:
            continue
        slopes = []
        for at in case.numbers:
            values = [mpf(case.arguments[number]) for number in case.numbers]
            place = case.numbers.index(at)
            which = tuple(int(number == place) for number in range(len(values)))
            with mp.workdps(20):
                slope = mp.diff(case.formula, tuple(values), which)
            slopes.append(float(abs(slope)))
            sigmas = [1.0 if number == at else None for number in range(len(case.arguments))]
            found = cf.uncertainty(name, list(case.arguments), sigmas)
            assert found == pytest.approx(slopes[-1], rel=1e-9, abs=0), (case.arguments, at)
        # several at once: the root of the sum of squares
        sigmas = [float(at + 1) if at in case.numbers else "" for at in range(len(case.arguments))]
        together = hypot(
            *(slope * (at + 1) for slope, at in zip(slopes, case.numbers, strict=True))
        )
        assert cf.uncertainty(name, case.arguments, sigmas) == pytest.approx(together, rel=1e-9)


DRAWS = 200_000


@pytest.mark.parametrize("name", sorted({case.name for case in CASES}))
def test_errors_are_those_of_200_000_draws(name: str) -> None:
    """Within 1 %: the draws themselves are good to 0.16 %. Errors are small beside what bends."""
    rng = np.random.default_rng(200_000)
    case = max(
        (case for case in reversed(CASES) if case.name == name), key=lambda c: len(c.numbers)
    )
    arguments = list(case.arguments)
    sigmas: list[Any] = [None] * len(arguments)
    for at in case.numbers:
        sigmas[at] = 2e-3 * abs(case.arguments[at])
        arguments[at] = rng.normal(case.arguments[at], sigmas[at], DRAWS)
    drawn = CATALOGUE[name](*arguments)
    assert drawn.shape == (DRAWS,)
    found = cf.uncertainty(name, case.arguments, sigmas)
    assert found == pytest.approx(np.std(drawn), rel=0.01)


def test_a_spectrums_redshift_and_what_follows() -> None:
    """The chain of a night: a line to 0.5 Å, its redshift, a distance modulus; 200 000 draws."""
    rng = np.random.default_rng(5)
    seen = rng.normal(6892.84, 0.5, DRAWS)
    z, sigma = (
        cf.redshift_from_line(6892.84, "H alpha"),
        cf.uncertainty("REDSHIFT_FROM_LINE", [6892.84, "H alpha"], [0.5]),
    )
    drawn = cf.redshift_from_line(seen, "H alpha")
    assert sigma == pytest.approx(np.std(drawn), rel=0.01)
    modulus_error = cf.uncertainty("DISTANCE_MODULUS", z, sigma)
    assert modulus_error == pytest.approx(np.std(cf.distance_modulus(drawn)), rel=0.01)


# The sky ------------------------------------------------------------------------------------------

# The Earth at one moment: what ERFA gives, which tests/published/test_barycentric.py holds against
# JPL's DE421. What an observer makes of it is written here from the publications.
MOMENT = 2_461_398.6
SEEN = (101.287, -16.716, MOMENT, -70.4, -24.6, 2600.0)
EARTH = earth.at(MOMENT - earth.EPOCH)
SPIN = 2 * mp.pi * mpf("1.00273781191135448") / 86400
"""rad/s: Capitaine et al. 2000"""


def turned(axis: str, angle: Real, vector: list[Real]) -> list[Real]:
    """Return a vector in axes that are turned by an angle: Seidelmann 1992, 11.41."""
    x, y, z = vector
    c, s = mp.cos(angle), mp.sin(angle)
    if axis == "x":
        return [x, c * y + s * z, c * z - s * y]
    if axis == "y":
        return [c * x - s * z, y, s * x + c * z]
    return [c * x + s * y, c * y - s * x, z]


def to_earth(vector: list[Real]) -> list[Real]:
    """From the ICRS to the pole and the origin of the Earth's rotation: IERS 2010, eq. 5.6."""
    x, y = map(mpf, EARTH.pole)
    around, down = mp.atan2(y, x), mp.asin(mp.sqrt(x * x + y * y))
    return turned("z", -around, turned("y", down, turned("z", around, vector)))


def from_earth(vector: list[Real]) -> list[Real]:
    x, y = map(mpf, EARTH.pole)
    around, down = mp.atan2(y, x), mp.asin(mp.sqrt(x * x + y * y))
    return turned("z", -around, turned("y", -down, turned("z", around, vector)))


def place(longitude: Real, latitude: Real, height: Real) -> list[Real]:
    """The site in km on WGS84, turned with the Earth; the pole's wobble by IERS 2010, eq. 5.3."""
    a, f = mpf("6378.137"), 1 / mpf("298.257223563")
    e2 = f * (2 - f)
    lat, lon = mp.radians(latitude), mp.radians(longitude)
    n = a / mp.sqrt(1 - e2 * mp.sin(lat) ** 2)
    h = height / 1000
    site = [
        (n + h) * mp.cos(lat) * mp.cos(lon),
        (n + h) * mp.cos(lat) * mp.sin(lon),
        (n * (1 - e2) + h) * mp.sin(lat),
    ]
    xp, yp = map(mpf, EARTH.wobble)
    x, y, z = site
    site = [x - xp * z, y + yp * z, z + xp * x - yp * y]
    return turned("z", -mpf(earth.rotation(EARTH)), site)


def velocity_of(*site: Real) -> list[Real]:
    x, y, _ = place(*site)
    spin = from_earth([-SPIN * y, SPIN * x, mpf(0)])
    return [mpf(each) + own for each, own in zip(EARTH.velocity, spin, strict=True)]


def toward(ra: Real, dec: Real) -> list[Real]:
    ra, dec = mp.radians(ra), mp.radians(dec)
    return [mp.cos(dec) * mp.cos(ra), mp.cos(dec) * mp.sin(ra), mp.sin(dec)]


def along(one: list[Real], other: list[Real]) -> Real:
    return mp.fsum(a * b for a, b in zip(one, other, strict=True))


def barycentric(ra: Real, dec: Real, *site: Real) -> Real:
    """1 + v/c: Wright & Eastman 2014, eq. 28; nominal masses of IAU 2015 resolution B3."""
    beta = [each / C for each in velocity_of(*site)]
    distance = mp.sqrt(along(place(*site), place(*site)))
    potential = mpf(EARTH.sun_potential) + mpf("3.986004e5") / C**2 / distance + mpf(earth.JUPITER)
    return (1 + along(beta, toward(ra, dec))) / mp.sqrt(1 - along(beta, beta)) / (1 - potential)


def heliocentric(ra: Real, dec: Real, *site: Real) -> Real:
    beta = [mpf(each) / C for each in EARTH.sun_velocity]
    of_sun = (1 + along(beta, toward(ra, dec))) / mp.sqrt(1 - along(beta, beta))
    return barycentric(ra, dec, *site) / of_sun


def date(ra: Real, dec: Real, *site: Real) -> Real:
    """Days of light from the barycentre: Eastman et al. 2010, eq. 2."""
    own = from_earth(place(*site))
    whole = [mpf(each) + km / C for each, km in zip(EARTH.position, own, strict=True)]
    return along(whole, toward(ra, dec)) / 86400


def sky(ra: Real, dec: Real, longitude: Real, latitude: Real, height: Real) -> list[Real]:
    """South, east, up: Seidelmann 1992, 3.29, with the first order of aberration."""
    moving = velocity_of(longitude, latitude, height)
    seen = [n + v / C for n, v in zip(toward(ra, dec), moving, strict=True)]
    local = turned("z", mpf(earth.rotation(EARTH)) + mp.radians(longitude), to_earth(seen))
    return turned("y", mp.pi / 2 - mp.radians(latitude), local)


def altitude_of(*seen: Real) -> Real:
    south, east, up = sky(*seen)
    return mp.degrees(mp.atan2(up, mp.hypot(south, east)))


def hour_angle_of(ra: Real, dec: Real, longitude: Real, latitude: Real, height: Real) -> Real:
    local = turned("y", mp.radians(latitude) - mp.pi / 2, sky(ra, dec, longitude, latitude, height))
    return mp.degrees(mp.atan2(-local[1], local[0])) / 15


def airmass_of(*seen: Real) -> Real:
    """Pickering 2002, DIO 12, 20."""
    h = altitude_of(*seen)
    return 1 / mp.sin(mp.radians(h + 244 / (165 + 47 * h ** mpf("1.1"))))


def frame(v: Real, ra: Real, dec: Real) -> Real:
    motion = [mpf(each) for each in frames.frames()["cmb"].motion]
    return v + along(motion, toward(ra, dec))


AT_MOMENT: dict[str, tuple[tuple[Any, ...], Callable[..., Real]]] = {
    "VELOCITY_BARYCENTRIC": (SEEN, lambda *seen: C * (barycentric(*seen) - 1)),
    "VELOCITY_HELIOCENTRIC": (SEEN, lambda *seen: C * (heliocentric(*seen) - 1)),
    "REDSHIFT_BARYCENTRIC": (
        (0.0512, *SEEN),
        lambda z, *seen: (1 + z) * barycentric(*seen) - 1,
    ),
    "VELOCITY_IN_FRAME": ((1250.0, 187.706, 12.391, "barycentric", "cmb"), frame),
    "TIME_BARYCENTRIC": ((MOMENT, *SEEN[:2], *SEEN[3:]), date),
    "TIME_SIDEREAL": ((MOMENT, -70.4), lambda longitude: longitude / 15),
    "ANGLE_HOUR": (SEEN, hour_angle_of),
    "ALTITUDE": (SEEN, altitude_of),
    "AIRMASS": (SEEN, airmass_of),
    "TIME_JULIAN": ((MOMENT,), lambda: mpf(0)),
}
"""Calls, and the same with the moment's numbers put in, as functions of the other numbers"""


@pytest.mark.parametrize("name", AT_MOMENT)
def test_derivatives_of_the_sky_are_those_of_mpmath(name: str) -> None:
    arguments, formula = AT_MOMENT[name]
    made = CATALOGUE[name]
    numbers = [at for at, each in enumerate(made.arguments) if isinstance(each, Number)]
    values = tuple(mpf(arguments[at]) for at in numbers)
    for place_of, at in enumerate(numbers):
        which = tuple(int(number == place_of) for number in range(len(values)))
        with mp.workdps(25):
            slope = float(abs(mp.diff(formula, values, which)))
        # a σ small enough not to carry a date or an angle around
        sigmas = [1e-3 if number == at else None for number in range(len(arguments))]
        found = cf.uncertainty(name, list(arguments), sigmas) / 1e-3
        # what an east-west step does to the latitude's share is but a rounding error
        assert found == pytest.approx(slope, rel=1e-9, abs=1e-22), made.arguments[at].name


# By the moment there is no formula but the ephemeris: differences of eighth order of the function
# itself. Fornberg 1988, Math. Comp. 51, 699.
STENCIL = {1: 4 / 5, 2: -1 / 5, 3: 4 / 105, 4: -1 / 280}


@pytest.mark.parametrize("name", [name for name in AT_MOMENT if name != "VELOCITY_IN_FRAME"])
def test_the_slope_by_the_moment_is_that_of_differences(name: str) -> None:
    arguments, _ = AT_MOMENT[name]
    made = CATALOGUE[name]
    at = arguments.index(MOMENT)
    step = 0.01

    def moved(steps: int) -> float:
        return float(made(*arguments[:at], MOMENT + steps * step, *arguments[at + 1 :]))

    slope = sum(factor * (moved(n) - moved(-n)) for n, factor in STENCIL.items()) / step
    sigmas = [1e-4 if other == at else None for other in range(len(arguments))]
    found = cf.uncertainty(name, list(arguments), sigmas) / 1e-4
    # the ephemeris is smooth to 1e-10 km/s, a Julian date is known to 4.7e-10 days
    noise = (1e-10 + 5e-10 * abs(slope)) / step
    assert abs(found - abs(slope)) <= 1e-6 * abs(slope) + noise


# Refused ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("made", CATALOGUE.values(), ids=lambda made: made.name)
def test_what_has_no_error_says_so(made: Function) -> None:
    if has_an_error(made):
        assert error_function(made).syntax.startswith(f"{made.name}(")
        return
    with pytest.raises(InputError, match=made.name):
        error_function(made)
    said = cf.reason("UNCERTAINTY", made.name, 1.0, 1.0)
    assert said.startswith(f"UNCERTAINTY: {made.name} ")
    assert "nothing can be propagated" in said or "no uncertainty" in said
