"""Velocities against FITS Paper III, its worked example, astropy and special relativity."""

from itertools import permutations
from math import sqrt
from typing import Any

import numpy as np
import pytest
from astropy import units as u
from numpy.typing import NDArray

from cellfuncs import (
    DomainError,
    doppler_factor,
    frequency_from_wavelength,
    redshift_combined,
    redshift_from_frequency,
    redshift_from_velocity,
    redshift_from_wavelength,
    redshift_relative,
    velocity_converted,
    velocity_from_redshift,
    velocity_peculiar,
    velocity_sum,
    wavelength_from_frequency,
    wavelength_observed,
)

Floats = NDArray[np.float64]

C = 299_792.458
"""km/s"""

CONVENTIONS = ("relativistic", "optical", "radio")

# ----------------------------------------------- Greisen et al. 2006, A&A 446, 747: Paper III

BARYCENTRIC_FREQUENCY = 1.378_471_216_43
HYDROGEN = 1.420_405_752
"""GHz: CRVAL3F and RESTFRQ of the example header in section 10"""

EXAMPLE = {
    "optical": 9_120.000_00,  # CRVAL3Z
    "radio": 8_850.750_904_19,  # CRVAL3R
    "relativistic": 8_981.342_298_11,  # CRVAL3V
}
"""km/s. The numbers are from memory; the public test data of several packages have the same."""


@pytest.mark.parametrize(("convention", "velocity"), EXAMPLE.items())
def test_the_worked_example_of_paper_iii(convention: str, velocity: float) -> None:
    z = redshift_from_frequency(BARYCENTRIC_FREQUENCY, HYDROGEN)
    # The header's velocities were made from 9120 km/s, its frequency is rounded to 10 Hz in 1e9:
    # 5e-12 of c, 2e-6 km/s, is what that leaves.
    assert velocity_from_redshift(z, convention) == pytest.approx(velocity, abs=2e-6)
    back = redshift_from_velocity(velocity, convention)
    assert HYDROGEN / (1 + back) == pytest.approx(BARYCENTRIC_FREQUENCY, abs=1e-11)


@pytest.mark.parametrize(("start", "end"), [*permutations(EXAMPLE, 2)])
def test_the_worked_example_from_one_convention_to_another(start: str, end: str) -> None:
    assert velocity_converted(EXAMPLE[start], start, end) == pytest.approx(EXAMPLE[end], abs=2e-6)


def test_the_wavelength_of_the_worked_example() -> None:
    """CRVAL3W of the same header: 0.217 481 841 062 m."""
    wavelength = wavelength_from_frequency(BARYCENTRIC_FREQUENCY)
    assert wavelength == pytest.approx(0.217_481_841_062e10, rel=5e-12)
    assert frequency_from_wavelength(wavelength) == pytest.approx(BARYCENTRIC_FREQUENCY, rel=1e-15)


FREQUENCY_RATIO = np.array([1e-3, 0.1, 0.5, 0.9, 0.999, 1.0, 1.001, 1.2, 3.0, 50.0])
"""ν/ν0, blueshifts included"""


def test_definitions_of_paper_iii() -> None:
    """Table 3 there: radio c(ν0−ν)/ν0, optical c(λ−λ0)/λ0, relativistic c(ν0²−ν²)/(ν0²+ν²)."""
    z = redshift_from_frequency(FREQUENCY_RATIO * HYDROGEN, HYDROGEN)
    square = FREQUENCY_RATIO**2
    for convention, expected in [
        ("radio", C * (1 - FREQUENCY_RATIO)),
        ("optical", C * (1 / FREQUENCY_RATIO - 1)),
        ("relativistic", C * (1 - square) / (1 + square)),
    ]:
        velocity = velocity_from_redshift(z, convention)
        np.testing.assert_allclose(velocity, expected, rtol=1e-12, atol=1e-9)


def test_inverse_definitions_of_paper_iii() -> None:
    """Table 3 there: ν = ν0(1 − V/c), λ = λ0(1 + Z/c), ν = ν0√((c−v)/(c+v))."""
    velocity = np.array([-250_000.0, -3_000.0, -1.0, 0.0, 1e-3, 30.0, 1_500.0, 20_000.0, 290_000.0])
    for convention, ratio in [
        ("radio", 1 - velocity / C),
        ("optical", 1 / (1 + velocity / C)),
        ("relativistic", np.sqrt((C - velocity) / (C + velocity))),
    ]:
        z = redshift_from_velocity(velocity, convention)
        np.testing.assert_allclose(1 / (1 + z), ratio, rtol=1e-14)


# ------------------------------------------------------------------------------- astropy

EQUIVALENCE = {
    "optical": u.doppler_optical,
    "radio": u.doppler_radio,
    "relativistic": u.doppler_relativistic,
}
REST = 6_564.614


@pytest.mark.parametrize("convention", CONVENTIONS)
def test_astropys_equivalencies(convention: str) -> None:
    observed = REST * np.geomspace(0.02, 50, 41)
    theirs = (observed * u.AA).to_value(u.km / u.s, EQUIVALENCE[convention](REST * u.AA))
    ours = velocity_from_redshift(redshift_from_wavelength(observed, REST), convention)
    np.testing.assert_allclose(ours, theirs, rtol=1e-12, atol=1e-9)


@pytest.mark.parametrize("convention", CONVENTIONS)
def test_astropys_equivalencies_backward(convention: str) -> None:
    velocity = np.array([-200_000.0, -300.0, 0.0, 12.0, 1_500.0, 40_000.0, 280_000.0])
    theirs = (velocity * u.km / u.s).to_value(u.AA, EQUIVALENCE[convention](REST * u.AA))
    ours = wavelength_observed(REST, redshift_from_velocity(velocity, convention))
    np.testing.assert_allclose(ours, theirs, rtol=1e-13)


@pytest.mark.parametrize(("start", "end"), [*permutations(CONVENTIONS, 2)])
def test_astropy_converts_conventions_alike(start: str, end: str) -> None:
    velocity = np.array([-100_000.0, -300.0, 12.0, 1_500.0, 40_000.0, 280_000.0])
    wavelength = (velocity * u.km / u.s).to(u.AA, EQUIVALENCE[start](REST * u.AA))
    theirs = wavelength.to_value(u.km / u.s, EQUIVALENCE[end](REST * u.AA))
    np.testing.assert_allclose(velocity_converted(velocity, start, end), theirs, rtol=1e-10)


def test_astropys_doppler_redshift() -> None:
    velocity = np.array([-299_000.0, -5_000.0, -1.0, 1.0, 300.0, 150_000.0, 299_000.0])
    theirs = (velocity * u.km / u.s).to_value(u.one, u.doppler_redshift())
    np.testing.assert_allclose(doppler_factor(velocity), 1 + theirs, rtol=1e-12)
    z = redshift_from_velocity(velocity)
    np.testing.assert_allclose(z, theirs, rtol=1e-10)
    np.testing.assert_allclose(doppler_factor(velocity), 1 + z, rtol=1e-13)


# ------------------------------------------------------------------------ special relativity


@pytest.mark.parametrize(
    ("beta", "factor"), [(0.6, 2.0), (-0.6, 0.5), (0.8, 3.0), (0.0, 1.0), (15 / 17, 4.0)]
)
def test_doppler_factors_that_come_out_even(beta: float, factor: float) -> None:
    """Bondi 1964, Relativity and Common Sense: the k factor; k = 2 is three fifths of c."""
    assert doppler_factor(beta * C) == pytest.approx(factor, rel=1e-14)
    assert velocity_from_redshift(factor - 1) == pytest.approx(beta * C, rel=1e-14, abs=1e-12)


def test_doppler_factors_multiply_where_velocities_add() -> None:
    """Einstein 1905, sec. 5 and 7: k is a homomorphism, k(v1 ⊕ v2) = k(v1)·k(v2)."""
    v1, v2 = np.meshgrid([-250_000.0, -1_000.0, 0.0, 30.0, 200_000.0], [-29.8, 0.0, 100_000.0])
    together = velocity_sum(v1, v2)
    np.testing.assert_allclose(
        doppler_factor(together), doppler_factor(v1) * doppler_factor(v2), rtol=1e-12
    )
    combined = redshift_combined(redshift_from_velocity(v1), redshift_from_velocity(v2))
    np.testing.assert_allclose(velocity_from_redshift(combined), together, rtol=1e-12, atol=1e-10)


def test_a_half_and_a_half_of_light_speed_are_four_fifths() -> None:
    """Einstein 1905, sec. 5: (v+w)/(1+vw/V²)."""
    assert velocity_sum(0.5 * C, 0.5 * C) == pytest.approx(0.8 * C, rel=1e-15)
    assert velocity_sum(0.9 * C, 0.9 * C) == pytest.approx(1.8 / 1.81 * C, rel=1e-15)
    assert velocity_sum(123.0, -123.0) == 0


def test_the_sum_of_velocities_is_a_group() -> None:
    v = [-299_000.0, -20_000.0, 7.0, 150_000.0]
    for a in v:
        for b in v:
            assert velocity_sum(a, b) == velocity_sum(b, a)
            assert velocity_sum(velocity_sum(a, b), -b) == pytest.approx(a, rel=1e-9)
            assert abs(velocity_sum(a, b)) < C


# -------------------------------------------------------------------------------- redshifts


def test_a_redshift_of_six_is_96_percent_of_light_speed() -> None:
    """(49−1)/(49+1): common practice, no source."""
    assert velocity_from_redshift(6.0) == pytest.approx(0.96 * C, rel=1e-14)


def test_conventions_agree_at_small_redshift_and_order_beyond() -> None:
    """Paper III: to first order the three agree; radio lies lowest, optical highest."""
    for z in (1e-6, 1e-4, 0.01, 0.3, 2.0):
        radio, relativistic, optical = (
            velocity_from_redshift(z, each) for each in ("radio", "relativistic", "optical")
        )
        assert radio < relativistic < optical
        assert optical - radio == pytest.approx(C * z * z / (1 + z), rel=1e-9, abs=1e-10)
        assert relativistic == pytest.approx((radio + optical) / 2, rel=z * z)


def test_a_tiny_redshift_keeps_its_digits() -> None:
    """cz is the first order of every convention; z = 1e-12 leaves 1e-12 of it."""
    for convention in CONVENTIONS:
        assert velocity_from_redshift(1e-12, convention) == pytest.approx(C * 1e-12, rel=1e-11)
        assert redshift_from_velocity(C * 1e-12, convention) == pytest.approx(1e-12, rel=1e-11)


def test_a_galaxy_in_a_cluster() -> None:
    """Danese, De Zotti & di Tullio 1980: (z − z̄)c/(1 + z̄); 1+z multiply (Davis & Scrimgeour 2014,
    MNRAS 442, 1117): a member 1000 km/s behind the middle of a cluster at z = 0.1."""
    z = (1 + 0.1) * (1 + 1_000 / C) - 1
    assert velocity_peculiar(z, 0.1) == pytest.approx(1_000, rel=1e-12)
    assert redshift_relative(z, 0.1) * C == pytest.approx(1_000, rel=1e-12)
    assert redshift_combined(0.1, 1_000 / C) == pytest.approx(z, rel=1e-14)
    # adding the redshifts instead is wrong by z̄·v
    assert pytest.approx(z * C - 0.1 * 1_000, rel=1e-12) == (0.1 + 1_000 / C) * C


@pytest.mark.parametrize(
    ("convention", "beyond"),
    [("relativistic", C), ("relativistic", -C), ("optical", -C), ("radio", C)],
)
def test_beyond_a_conventions_reach(convention: str, beyond: float) -> None:
    """1+z is positive: an optical velocity is above −c, a radio one below c, a real one between."""
    with pytest.raises(DomainError):
        redshift_from_velocity(beyond, convention)
    inside = np.nextafter(beyond, 0.0) * (1 - 1e-9)
    z = redshift_from_velocity(np.array([beyond, inside, 0.0]), convention)
    assert np.isnan(z).tolist() == [True, False, False]


def test_the_default_is_the_relativistic_velocity() -> None:
    """FUNCTIONS.md; √3 − 1 is half of light speed."""
    assert velocity_from_redshift(sqrt(3) - 1) == pytest.approx(C / 2, rel=1e-14)


@pytest.mark.parametrize("convention", CONVENTIONS)
def test_columns_are_what_single_calls_are(convention: Any) -> None:
    z = np.array([-0.99, -0.3, -1e-9, 0.0, 1e-6, 0.1, 4.0, 1e3])
    column = velocity_from_redshift(z, convention)
    single = [velocity_from_redshift(float(each), convention) for each in z]
    np.testing.assert_allclose(column, single, rtol=1e-15)
