"""The linear law v = H0·d, and where it leaves the curve."""

from math import sqrt

import numpy as np
import pytest

from cellfuncs import (
    deceleration,
    distance_comoving,
    distance_hubble,
    distance_luminosity,
    expansion_rate,
    redshift_from_distance,
    time_hubble,
    units_converted,
    velocity_from_redshift,
    velocity_hubble,
)

C = 299_792.458
"""km/s"""

H0 = 67.66
"""km/s/Mpc: Planck 2018 VI, Table 2, last column"""


def test_a_hubble_constant_in_metres_per_second_and_light_year() -> None:
    """Common practice, no source: 22e-3 m/s per light-year is about 72 km/s/Mpc."""
    hubble = units_converted(22e-3, "m.s-1.lyr-1", "km.s-1.Mpc-1")
    assert hubble == pytest.approx(72, abs=0.5)
    # a parsec is 3.261 563 777 light-years (IAU 2015 B2 and the Julian year)
    assert hubble == pytest.approx(22 * 3.261_563_777, rel=1e-9)
    back = units_converted(hubble, "km.s-1.Mpc-1", "m.s-1.lyr-1")
    assert back == pytest.approx(22e-3, rel=1e-14)


def test_spellings_of_that_unit() -> None:
    """VOUnits 1.0 writes a product with a point, FITS with a point or a blank: one unit."""
    expected = units_converted(22e-3, "m.s-1.lyr-1", "km.s-1.Mpc-1")
    for spelling in ("m s-1 lyr-1", "m/s/lyr", "m.s**-1.lyr**-1"):
        converted = units_converted(22e-3, spelling, "km s-1 Mpc-1")
        assert converted == pytest.approx(expected, rel=1e-14)


def test_the_law_there_and_back() -> None:
    """Hubble 1929: v = H0·d. 70 km/s/Mpc makes 7000 km/s at 100 Mpc."""
    assert velocity_hubble(100.0, 70.0) == 7000
    assert distance_hubble(7000.0, 70.0) == 100
    assert velocity_hubble(100.0) == pytest.approx(100 * H0, rel=1e-15)
    assert distance_hubble(velocity_hubble(321.0)) == pytest.approx(321, rel=1e-15)
    assert redshift_from_distance(C / H0, "hubble") == pytest.approx(1, rel=1e-15)


def test_hubbles_own_numbers() -> None:
    """Hubble 1929, PNAS 15, 168: about 500 km/s/Mpc, 1000 km/s at 2 Mpc; 1/H0 is 2 Gyr then."""
    assert distance_hubble(1000.0, 500.0) == 2
    assert time_hubble({"H0": 500.0, "Om0": 0.3}) == pytest.approx(1.96, abs=0.005)


def linear(z: float) -> float:
    return float(distance_hubble(velocity_from_redshift(z, "optical")))


def test_the_law_is_the_beginning_of_every_curve() -> None:
    """Weinberg 1972, Gravitation and Cosmology, eq. 14.6.8: D_L = c/H0·(z + (1−q0)z²/2 + …)."""
    q0 = deceleration(0.0)
    for z in (1e-4, 1e-3, 5e-3):
        ratio = distance_luminosity(z) / linear(z)
        assert ratio == pytest.approx(1 + (1 - q0) * z / 2, abs=z * z)
        # the comoving distance's factor of z/2 is −(1+q0)
        ratio = distance_comoving(z) / linear(z)
        assert ratio == pytest.approx(1 - (1 + q0) * z / 2, abs=z * z)


def test_near_40_megaparsecs_the_law_is_good_to_a_percent() -> None:
    """Common practice, no source: below z ≈ 0.01 the linear law serves."""
    curves = [("luminosity", distance_luminosity), ("comoving", distance_comoving)]
    for megaparsecs in (5.0, 10.0, 20.0, 40.0):
        for kind, distance in curves:
            z = redshift_from_distance(megaparsecs, kind)
            assert distance(z) == pytest.approx(megaparsecs, rel=1e-9)
            assert linear(z) == pytest.approx(megaparsecs, rel=0.01)


def test_by_1000_megaparsecs_the_law_has_left_the_curve() -> None:
    """Common practice, no source: by about 1000 Mpc a straight line no longer serves.

    The linear law then gives a luminosity distance too small by more than a tenth, and the
    comoving one is off by some percent whichever velocity it is fed.
    """
    z = redshift_from_distance(1000.0, "luminosity")
    assert 0.18 < z < 0.22
    assert 0.80 < linear(z) / 1000 < 0.90
    z = redshift_from_distance(1000.0, "comoving")
    assert 0.22 < z < 0.26
    assert 1.03 < linear(z) / 1000 < 1.10
    relativistic = distance_hubble(velocity_from_redshift(z))
    assert 0.90 < relativistic / 1000 < 0.97


def test_the_law_leaves_the_curve_steadily() -> None:
    """The further out, the further off: from 10 to 3000 Mpc, by luminosity distance."""
    distances = np.geomspace(10, 3000, 40)
    z = redshift_from_distance(distances, "luminosity")
    off = 1 - distance_hubble(C * z) / distances
    assert (np.diff(off) > 0).all()
    assert off[0] < 0.003
    assert off[-1] > 0.2


def test_the_law_is_exact_for_proper_distance_today() -> None:
    """Hubble's law holds at any distance for recession today (Harrison 1993, ApJ 403, 28): the
    Hubble distance recedes at light speed."""
    assert velocity_hubble(C / H0) == pytest.approx(C, rel=1e-15)
    assert expansion_rate(0.0) == pytest.approx(H0, rel=1e-12)


@pytest.mark.parametrize("z", [0.1, 0.5])
def test_in_an_empty_universe_the_relativistic_velocity_gives_the_distance_of_rapidity(
    z: float,
) -> None:
    """Milne 1935: there D = c/H0·artanh(v/c) = c/H0·ln(1+z)."""
    empty = {"H0": 70.0, "Om0": 0.0, "Ode0": 0.0}
    beta = velocity_from_redshift(z) / C
    assert distance_comoving(z, empty) == pytest.approx(C / 70 * np.arctanh(beta), rel=1e-12)
    assert sqrt((1 + beta) / (1 - beta)) == pytest.approx(1 + z, rel=1e-14)
