"""The constants, against the resolutions that define them and two reference libraries."""

from math import pi

import astropy.constants
import pytest
import scipy.constants
from astropy import units as u

from cellfuncs import constants as ours
from cellfuncs import (
    cosmology_value,
    frequency_from_wavelength,
    provenance,
    redshift_from_velocity,
    time_hubble,
    units_converted,
    velocity_from_redshift,
    wavelength_from_frequency,
)


def test_exact_constants_of_the_si() -> None:
    """BIPM, SI brochure, 9th edition (2019), sec. 2.2: exact by definition."""
    assert ours.LIGHT_SPEED * 1000 == 299_792_458
    assert ours.PLANCK == 6.626_070_15e-34
    assert ours.BOLTZMANN == 1.380_649e-23
    assert ours.ELECTRON_VOLT == 1.602_176_634e-19


def test_astronomical_unit_and_parsec() -> None:
    """IAU 2012 resolution B2: au = 149 597 870 700 m. IAU 2015 resolution B2, note 4:
    pc = 648 000/π au, 3.085 677 581 491 367 3e16 m (the digits from memory)."""
    assert pytest.approx(149_597_870_700, rel=1e-15) == ours.PARSEC * pi / 648_000
    assert pytest.approx(3.085_677_581_491_367_3e16, rel=1e-15) == ours.PARSEC
    assert pytest.approx(3.085_677_581_491_367_3e19, rel=1e-15) == ours.KM_PER_MPC


def test_julian_year_and_light_year() -> None:
    """IAU Style Manual (Wilkins 1989), sec. 5.15: the year of 365.25 days of 86 400 s; a
    light-year of it is 9 460 730 472 580 800 m exactly."""
    assert ours.JULIAN_YEAR == 31_557_600
    light_year = ours.LIGHT_SPEED * 1000 * ours.JULIAN_YEAR
    assert light_year == 9_460_730_472_580_800
    assert pytest.approx(light_year * 1e9 / (ours.PARSEC * 1e6), rel=1e-15) == (
        ours.MPC_PER_GIGA_LIGHT_YEAR
    )


def test_gravitation() -> None:
    """CODATA 2018 (Tiesinga et al. 2021, RMP 93, 025010): 6.674 30(15)e-11; 2022 keeps it."""
    assert ours.GRAVITATION == 6.674_30e-11


def test_stefan_boltzmann() -> None:
    """CODATA 2018: 5.670 374 419…e-8 W m⁻² K⁻⁴, exact but for the digits cut off."""
    assert pytest.approx(5.670_374_419e-8, rel=2e-10) == ours.STEFAN_BOLTZMANN


def test_the_sky() -> None:
    """206 264.806 247 arcsec a radian; 41 252.961 25 square degrees all round: Allen's
    Astrophysical Quantities, 4th edition, chapter 2 (digits from memory)."""
    assert pytest.approx(206_264.806_247_096_36, rel=1e-15) == ours.ARCSEC_PER_RADIAN
    assert pytest.approx(41_252.961_249_419_277, rel=1e-15) == ours.SQUARE_DEGREES_OF_SKY


def test_scipy_has_the_same() -> None:
    """scipy.constants holds CODATA (2022 from scipy 1.15 on)."""
    assert scipy.constants.c == ours.LIGHT_SPEED * 1000
    assert scipy.constants.G == ours.GRAVITATION
    assert scipy.constants.h == ours.PLANCK
    assert scipy.constants.k == ours.BOLTZMANN
    assert scipy.constants.e == ours.ELECTRON_VOLT
    assert pytest.approx(scipy.constants.sigma, rel=1e-9) == ours.STEFAN_BOLTZMANN
    assert pytest.approx(scipy.constants.parsec, rel=1e-15) == ours.PARSEC
    assert scipy.constants.Julian_year == ours.JULIAN_YEAR


def test_astropy_has_the_same() -> None:
    """astropy.constants: CODATA 2018 and the IAU resolutions of 2012 and 2015."""
    for name, value in [
        ("c", ours.LIGHT_SPEED * 1000),
        ("G", ours.GRAVITATION),
        ("h", ours.PLANCK),
        ("k_B", ours.BOLTZMANN),
        ("e", ours.ELECTRON_VOLT),
        ("sigma_sb", ours.STEFAN_BOLTZMANN),
        ("pc", ours.PARSEC),
    ]:
        assert getattr(astropy.constants, name).si.value == pytest.approx(value, rel=1e-12), name


def test_hubble_time_of_a_hundred() -> None:
    """1/H0 = 9.777 922 2 Gyr/h: Particle Data Group, Astrophysical constants. With the tropical
    year that is 9.778 13; the digits are those of the Julian year, from memory."""
    assert time_hubble({"H0": 100.0, "Om0": 0.3}) == pytest.approx(9.777_922_2, abs=5e-8)
    assert time_hubble({"H0": 100.0, "Om0": 0.3}) == pytest.approx(
        (1 / (100 * u.km / u.s / u.Mpc)).to_value(u.Gyr), rel=1e-14
    )


def test_the_functions_stand_on_these_constants() -> None:
    """The velocity of light, exact, seen through the functions that use it."""
    assert velocity_from_redshift(1.0, "optical") == 299_792.458
    assert redshift_from_velocity(299_792.458, "optical") == 1.0
    # one GHz is 299 792 458 nm
    assert wavelength_from_frequency(1.0) == pytest.approx(2_997_924_580, rel=1e-15)
    assert frequency_from_wavelength(2_997_924_580.0) == pytest.approx(1.0, rel=1e-15)
    assert units_converted(1.0, "lyr", "m") == pytest.approx(9_460_730_472_580_800, rel=1e-14)
    assert units_converted(1.0, "pc", "m") == pytest.approx(3.085_677_581_491_367_3e16, rel=1e-14)


def test_the_constants_edition_is_named() -> None:
    assert "CODATA 2018" in provenance("constants")


def test_critical_density_of_the_default() -> None:
    """Ωγ = 4σT⁴/c³ over the critical density 3H0²/8πG: with scipy's constants alone."""
    hubble = 67.66e3 / (scipy.constants.parsec * 1e6)
    critical = 3 * hubble**2 / (8 * pi * scipy.constants.G)
    light = 4 * scipy.constants.sigma * 2.7255**4 / scipy.constants.c**3
    assert cosmology_value("Ogamma0", "Planck18") == pytest.approx(light / critical, rel=1e-9)
