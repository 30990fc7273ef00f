"""The motion in each velocity frame against astropy's frames and published apices.

astropy's own frames hold a vector each; a velocity is compared as the part of that vector along the
line of sight, because a source at a finite distance would be turned by parallax as well.
"""

from collections.abc import Callable
from typing import Any

import astropy.coordinates as coord
import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates.builtin_frames.lsr import V_OFFSET_LSRD, V_OFFSET_LSRK
from numpy.typing import NDArray

import cellfuncs as cf
from cellfuncs import InputError

Floats = NDArray[np.float64]

FRAMES = ("barycentric", "lsrk", "lsrd", "galactocentric", "local-group", "cmb")
DRAW = np.random.default_rng(1)
RA = DRAW.uniform(0, 360, 2000)
DEC = np.degrees(np.arcsin(DRAW.uniform(-1, 1, 2000)))
TOWARD = coord.SkyCoord(RA, DEC, unit="deg").cartesian.xyz.value
MM_S = 1e-6  # km/s


def motion(frame: str) -> Floats:
    """The barycentre's velocity in a frame, read off velocities toward three places."""
    places = ((0.0, 0.0), (90.0, 0.0), (0.0, 90.0))
    return np.array([cf.velocity_in_frame(0.0, *place, "barycentric", frame) for place in places])


def apex(frame: str) -> coord.SkyCoord:
    x, y, z = motion(frame)
    return coord.SkyCoord(x, y, z, representation_type="cartesian")


def of_galactic(x: float, y: float, z: float) -> Any:
    """Components toward the centre, along the rotation and to the north, along the ICRS's axes."""
    place = coord.SkyCoord(x, y, z, frame="galactic", representation_type="cartesian")
    return place.icrs.cartesian.xyz.value


def galactocentric() -> Any:
    """What stands still in astropy's Galactocentric frame flies away with the opposite of ours."""
    with coord.galactocentric_frame_defaults.set("v4.0"):
        still = coord.Galactocentric(
            *([1.0, 2.0, 3.0] * u.kpc),
            *([0.0, 0.0, 0.0] * u.km / u.s),
        ).transform_to(coord.ICRS())
    return -still.velocity.d_xyz.to_value(u.km / u.s)


def toward(speed: float, longitude: float, latitude: float) -> Any:
    place = coord.SkyCoord(longitude, latitude, unit="deg", frame="galactic")
    return speed * place.icrs.cartesian.xyz.value


ASTROPY: dict[str, Callable[[], Any]] = {
    "barycentric": lambda: np.zeros(3),
    "lsrk": lambda: V_OFFSET_LSRK.d_xyz.to_value(u.km / u.s),
    "lsrd": lambda: V_OFFSET_LSRD.d_xyz.to_value(u.km / u.s),
    "galactocentric": galactocentric,
    # astropy has no such frame: the published apex, by its galactic coordinates
    "local-group": lambda: toward(316.0, 93.0, -4.0),
    "cmb": lambda: toward(369.82, 264.021, 48.253),
}


@pytest.mark.parametrize("frame", FRAMES)
def test_velocities_as_astropy_has_them(frame: str) -> None:
    theirs = ASTROPY[frame]() @ TOWARD
    for velocity in (0.0, 1250.0, -320.0):
        ours = cf.velocity_in_frame(velocity, RA, DEC, "barycentric", frame)
        assert np.abs(ours - (velocity + theirs)).max() < MM_S
        back = cf.velocity_in_frame(velocity, RA, DEC, frame, "barycentric")
        assert np.abs(back - (velocity - theirs)).max() < MM_S


@pytest.mark.parametrize("from_frame", FRAMES)
@pytest.mark.parametrize("to_frame", FRAMES)
def test_from_any_frame_to_any(from_frame: str, to_frame: str) -> None:
    theirs = (ASTROPY[to_frame]() - ASTROPY[from_frame]()) @ TOWARD
    ours = cf.velocity_in_frame(1250.0, RA, DEC, from_frame, to_frame)
    assert np.abs(ours - 1250.0 - theirs).max() < MM_S


def test_lsrk_from_its_definition() -> None:
    """20 km/s toward 18h, +30° for the equinox of 1900 (Gordon 1975, Methods of Experimental
    Physics 12C, 6.1.5): that place taken from FK4 at B1900 to the ICRS by astropy."""
    place = coord.SkyCoord(270.0, 30.0, unit="deg", frame=coord.FK4(equinox="B1900"))
    assert motion("lsrk") == pytest.approx(20 * place.icrs.cartesian.xyz.value, abs=MM_S)


@pytest.mark.parametrize(
    ("frame", "speed", "place", "within"),
    [
        # Greisen et al. 2006, A&A 446, 747, section on standards of rest (both from memory). The
        # FK4 turns slowly: 1900 for its place and 1950 for its epoch are 0.2" apart, and the terms
        # of elliptic aberration in it 0.3"; 0.5" of 20 km/s are 5 cm/s
        ("lsrk", 20.0, coord.SkyCoord("18h03m50.29s +30d00m16.8s"), 0.5),
        ("lsrd", 16.552_945, coord.SkyCoord(53.1301, 25.0169, unit="deg", frame="galactic"), 0.4),
        # Planck 2018 results I, A&A 641, A1, table 3 in equatorial coordinates (from memory)
        ("cmb", 369.82, coord.SkyCoord(167.942, -6.944, unit="deg"), 3.6),
    ],
)
def test_published_apices(frame: str, speed: float, place: coord.SkyCoord, within: float) -> None:
    """Within arcsec, for most within the last printed digit."""
    assert np.linalg.norm(motion(frame)) == pytest.approx(speed, abs=1e-5)
    assert apex(frame).separation(place).to_value(u.arcsec) < within


def test_the_local_groups_apex_by_hand() -> None:
    """Karachentsev & Makarov 1996: (-16.5, 314.8, -22.0) km/s along the galactic axes is what
    316 km/s toward l 93°, b -4° comes to by hand."""
    assert motion("local-group") == pytest.approx(of_galactic(-16.498, 314.798, -22.043), abs=1e-2)


def test_the_sun_around_the_galaxy() -> None:
    """Drimmel & Poggio 2018: 12.9 km/s inward, 245.6 along the rotation, 7.78 to the north; so the
    motion goes toward l 87°, b 2°, and a star there comes nearer by some 246 km/s."""
    x, y, z = of_galactic(*(12.9, 245.6, 7.78))
    # the Galaxy's axes are turned against those of galactic longitude and latitude by 0.15°
    assert motion("galactocentric") == pytest.approx([x, y, z], abs=0.8)
    ahead = coord.SkyCoord(87.0, 1.8, unit="deg", frame="galactic").icrs
    there = cf.velocity_in_frame(0.0, ahead.ra.deg, ahead.dec.deg, "barycentric", "galactocentric")
    assert there == pytest.approx(246.1, abs=0.1)


def test_the_andromeda_galaxy() -> None:
    """van der Marel et al. 2012, ApJ 753, 8: it comes at -301 km/s as seen from the Sun, at -109.3
    from the Galaxy's centre, where the Sun moves by (11.1, 239 + 12.24, 7.25) km/s (from memory);
    our later vector differs from theirs by this much along the line of sight."""
    andromeda = coord.SkyCoord(10.6847, 41.269, unit="deg")
    later = np.subtract((12.9, 245.6, 7.78), (11.1, 251.24, 7.25))
    expected = -109.3 + later @ andromeda.galactic.cartesian.xyz.value
    found = cf.velocity_in_frame(-301.0, 10.6847, 41.269, "barycentric", "galactocentric")
    assert found == pytest.approx(expected, abs=0.5)


@pytest.mark.parametrize("word", ["LSRK", " lsrk ", "Lsrk"])
def test_a_frame_in_any_case(word: str) -> None:
    plain = cf.velocity_in_frame(10.0, 83.6, 22.0, "barycentric", "lsrk")
    assert cf.velocity_in_frame(10.0, 83.6, 22.0, "Barycentric", word) == plain


@pytest.mark.parametrize(
    ("word", "near"), [("lsr", "lsrk"), ("local group", "local-group"), ("helio", "known|near")]
)
def test_an_unknown_frame_names_the_near_ones(word: str, near: str) -> None:
    with pytest.raises(InputError, match=rf"to_frame is '{word}'.*{near}"):
        cf.velocity_in_frame(10.0, 83.6, 22.0, "barycentric", word)
    with pytest.raises(InputError, match=rf"from_frame is '{word}'.*{near}"):
        cf.velocity_in_frame([10.0], 83.6, 22.0, [word], "cmb")


def test_a_column_of_frames() -> None:
    found = cf.velocity_in_frame(1250.0, 187.706, 12.391, "barycentric", list(FRAMES))
    alone = [
        cf.velocity_in_frame(1250.0, 187.706, 12.391, "barycentric", frame) for frame in FRAMES
    ]
    assert found == pytest.approx(alone, rel=1e-15)
    assert found[0] == 1250.0
