"""The frames that a radial velocity may be given in, each by how the barycentre moves in it.

A velocity is taken from one to another by adding the difference of the two motions along the line
of sight. Galactic longitude is 0 toward the centre and 90° along the rotation.
"""

from dataclasses import dataclass
from functools import cache
from math import asin, cos, pi, sin
from typing import Any, Final, TypeAlias

import erfa
import numpy as np

Components: TypeAlias = tuple[float, float, float]

DEGREE: Final = pi / 180

GALACTIC_POLE: Final = (192.8594812, 27.1282512)
"""In FK5 at J2000: Liu, Zhu & Zhang 2011, A&A 526, A16, section 2 (from memory)"""
POLE_LONGITUDE: Final = 122.9319186
"""Galactic longitude of the celestial pole (the same)"""

GALACTIC_CENTRE: Final = (266.4051, -28.936175)
"""Sgr A* in the ICRS: Reid & Brunthaler 2004, ApJ 616, 872"""
CENTRE_DISTANCE: Final = 8122.0
"""pc: GRAVITY collaboration 2018, A&A 615, L15"""
CENTRE_ROLL: Final = 58.598_632
"""Degrees that the galactic plane is turned by there against the equator"""
ABOVE_PLANE: Final = 20.8
"""pc that the Sun is north of the plane: Bennett & Bovy 2019, MNRAS 482, 1417"""


@dataclass(frozen=True)
class Frame:
    """A frame, and how the solar system's barycentre moves in it."""

    motion: Components
    """Along the axes of the ICRS, km/s"""
    words: str
    source: str


def toward(longitude: float, latitude: float) -> Components:
    """Return the unit vector toward a place, degrees."""
    east, north = longitude * DEGREE, latitude * DEGREE
    return cos(north) * cos(east), cos(north) * sin(east), sin(north)


def of_galactic(components: Components) -> Components:
    """Return a vector along the ICRS's axes, of one along the galactic axes.

    From FK5 to the ICRS by the rotation of Mignard & Frœschlé 2000, A&A 354, 732.
    """
    pole = np.array(toward(*GALACTIC_POLE))
    # from the pole along the meridian of the celestial pole, and a quarter of a turn on
    ahead = np.array(toward(GALACTIC_POLE[0], GALACTIC_POLE[1] + 90.0))
    aside = np.cross(pole, ahead)
    turn = POLE_LONGITUDE * DEGREE
    first = cos(turn) * ahead - sin(turn) * aside
    second = sin(turn) * ahead + cos(turn) * aside
    axes = np.array((first, second, pole))
    to_icrs, _ = erfa.fk5hip()
    return _components(to_icrs @ (np.array(components) @ axes))


def toward_galactic(speed: float, longitude: float, latitude: float) -> Components:
    """Return a velocity toward a place in galactic coordinates."""
    x, y, z = toward(longitude, latitude)
    return of_galactic((speed * x, speed * y, speed * z))


def around_the_centre(components: Components) -> Components:
    """Return a vector along the ICRS's axes, of one along the Galaxy's at the Sun.

    The first axis is parallel to the plane, toward the centre; the last points to the north.
    """
    centre = np.array(toward(*GALACTIC_CENTRE))
    north = np.array(toward(GALACTIC_CENTRE[0], GALACTIC_CENTRE[1] + 90.0))
    east = np.cross(north, centre)
    roll = CENTRE_ROLL * DEGREE
    along = cos(roll) * east + sin(roll) * north
    up = cos(roll) * north - sin(roll) * east
    tilt = asin(ABOVE_PLANE / CENTRE_DISTANCE)
    axes = (cos(tilt) * centre + sin(tilt) * up, along, cos(tilt) * up - sin(tilt) * centre)
    return _components(np.array(components) @ np.array(axes))


def _components(vector: Any) -> Components:
    x, y, z = vector.tolist()
    return x, y, z


NAMES: Final = ("barycentric", "lsrk", "lsrd", "galactocentric", "local-group", "cmb")


@cache
def frames() -> dict[str, Frame]:
    """Return every frame by its name."""
    known = (
        Frame((0.0, 0.0, 0.0), "the solar system's barycentre", "the ICRS"),
        Frame(
            # as FK4 at B1900 is taken to the ICRS, which tests/published/ holds against astropy
            (0.289_997_068, -17.317_264_790, 10.001_411_995),
            "the nearby stars, 20 km/s toward 18h, +30° of 1900",
            "Gordon 1975, Methods of Experimental Physics 12C, 6.1.5",
        ),
        Frame(
            of_galactic((9.0, 12.0, 7.0)),
            "a circular orbit here, (9, 12, 7) km/s",
            "Delhaye 1965, Galactic Structure, p. 61",
        ),
        Frame(
            around_the_centre((12.9, 245.6, 7.78)),
            "the Galaxy's centre, (12.9, 245.6, 7.78) km/s",
            "Drimmel & Poggio 2018, RNAAS 2, 210; Reid & Brunthaler 2004; GRAVITY 2018",
        ),
        Frame(
            toward_galactic(316.0, 93.0, -4.0),
            "the Local Group's centre of mass, 316 km/s toward l 93°, b -4°",
            "Karachentsev & Makarov 1996, AJ 111, 794",
        ),
        Frame(
            toward_galactic(369.82, 264.021, 48.253),
            "the microwave background, 369.82 km/s toward l 264.021°, b 48.253°",
            "Planck 2018 results I, A&A 641, A1, table 3",
        ),
    )
    return dict(zip(NAMES, known, strict=True))
