"""Distances, times and the expansion against astropy, closed forms and published tables.

The closed forms are those of universes simple enough to integrate by hand; each test names the
paper. Values said to be from memory were typed without the paper at hand.
"""

from dataclasses import dataclass
from math import acos, acosh, asinh, cos, cosh, inf, pi, sqrt
from typing import Any

import astropy.cosmology
import numpy as np
import pytest
from astropy import units as u
from numpy.typing import NDArray
from scipy.integrate import quad

import cellfuncs
from cellfuncs import (
    age_at_redshift,
    age_of_universe,
    cosmology_value,
    deceleration,
    distance_angular,
    distance_comoving,
    distance_light_travel,
    distance_luminosity,
    distance_modulus,
    distance_transverse,
    expansion_fate,
    expansion_rate,
    scale_transverse,
    time_hubble,
    time_lookback,
    volume_comoving,
)

Floats = NDArray[np.float64]

NEARBY = np.geomspace(1e-4, 20, 60)
FAR = np.geomspace(20, 1100, 25)
RANGES = pytest.mark.parametrize(
    ("z", "rel"), [(NEARBY, 1e-10), (FAR, 1e-8)], ids=["z up to 20", "z up to 1100"]
)

C = 299_792.458
"""km/s, exact: SI, 9th edition, 2019"""

MPC = 149_597_870.7 * 648_000 / pi * 1e6
"""km: IAU 2012 resolution B2 and IAU 2015 resolution B2"""

GYR = 365.25 * 86_400 * 1e9
"""s: 1e9 Julian years"""


# --------------------------------------------------------------------------- against astropy


@dataclass(frozen=True)
class Pair:
    """One universe, as our argument and as astropy's object."""

    ours: Any
    astropys: Any


OWN: dict[str, dict[str, Any]] = {
    "open": {"H0": 70.0, "Om0": 0.3, "Ode0": 0.6},
    "closed": {"H0": 65.0, "Om0": 0.4, "Ode0": 0.8, "Tcmb0": 2.7255, "Neff": 3.046}
    | {"m_nu": [0.0, 0.0, 0.06]},
    "nearly flat": {"H0": 72.0, "Om0": 0.28, "Ode0": 0.72, "w0": -0.9, "wa": 0.3}
    | {"Tcmb0": 2.725, "Neff": 3.04},
    "heavy neutrinos": {"H0": 68.0, "Om0": 0.3, "Ode0": 0.65, "w0": -1.1, "wa": -0.4}
    | {"Tcmb0": 2.7255, "Neff": 3.046, "m_nu": [0.1, 0.2, 0.3]},
    "four neutrinos": {"H0": 73.0, "Om0": 0.25, "Ode0": 0.70, "w0": -0.8, "wa": 0.1}
    | {"Tcmb0": 2.7255, "Neff": 4.2, "m_nu": [0.0, 0.05, 0.05, 1.0]},
}


def in_astropy(own: dict[str, Any]) -> Any:
    given = {"w0": -1.0, "wa": 0.0, "Tcmb0": 0.0, "Neff": 3.04, "m_nu": 0.0} | own
    return astropy.cosmology.w0waCDM(**(given | {"m_nu": u.Quantity(given["m_nu"], u.eV)}))


PAIRS = {
    **{
        name: Pair(name, getattr(astropy.cosmology, name))
        for name in ("Planck18", "Planck15", "Planck13", "WMAP9", "WMAP7", "WMAP5")
    },
    **{name: Pair(own, in_astropy(own)) for name, own in OWN.items()},
}
EVERY_PAIR = pytest.mark.parametrize("pair", PAIRS.values(), ids=PAIRS)


@EVERY_PAIR
@RANGES
@pytest.mark.parametrize(
    ("function", "method", "unit"),
    [
        (distance_comoving, "comoving_distance", u.Mpc),
        (distance_transverse, "comoving_transverse_distance", u.Mpc),
        (distance_luminosity, "luminosity_distance", u.Mpc),
        (distance_angular, "angular_diameter_distance", u.Mpc),
        (distance_light_travel, "lookback_distance", u.Mpc),
        (distance_modulus, "distmod", u.mag),
        (scale_transverse, "kpc_proper_per_arcmin", u.kpc / u.arcsec),
        (time_lookback, "lookback_time", u.Gyr),
        (expansion_rate, "H", u.km / u.s / u.Mpc),
    ],
    ids=lambda value: value.name if isinstance(value, cellfuncs.Function) else "",
)
def test_astropy_gives_the_same(
    function: Any, method: str, unit: Any, z: Floats, rel: float, pair: Pair
) -> None:
    theirs = getattr(pair.astropys, method)(z).to_value(unit)
    np.testing.assert_allclose(function(z, pair.ours), theirs, rtol=rel)


@EVERY_PAIR
@RANGES
def test_astropys_volume_is_the_same_as_far_as_it_has_digits(
    z: Floats, rel: float, pair: Pair
) -> None:
    """astropy takes Hogg's eq. 29 as printed: a difference of nearly equal numbers.

    The two are of the order of s = √|Ok|·D/D_H and differ by 2s³/3, so that a rounding of either
    is 3/(2s²) times as large in the difference. tests/physics/test_expansion.py holds the volume
    to mpmath without that allowance.
    """
    theirs = pair.astropys.comoving_volume(z).to_value(u.Mpc**3)
    curvature = abs(pair.astropys.Ok0)
    allowed = np.full(z.shape, rel)
    if curvature:
        s = sqrt(curvature) * (pair.astropys.comoving_distance(z) / pair.astropys.hubble_distance)
        allowed += 4 * np.finfo(float).eps * 3 / (2 * s.to_value(u.one) ** 2)
    ours = volume_comoving(z, cosmology=pair.ours)
    assert (np.abs(ours / theirs - 1) < allowed).all()


def age_by_astropys_integrand(universe: Any, z: float) -> float:
    """Integrate astropy's own integrand over x = ln(1+z'), Gyr, to about 1e-13 relative.

    In dt = dz'/((1+z')E) = dx/E nothing is left for an absolute tolerance to hide: the integrand
    falls off exponentially and is cut where it is below 1e-20 of its first value.
    """
    start = np.log1p(z)
    pieces = [
        quad(
            lambda x: universe.lookback_time_integrand(np.expm1(x)) * np.exp(x),
            start + left,
            start + left + 1.0,
            epsabs=0.0,
            epsrel=1e-13,
        )[0]
        for left in range(32)
    ]
    return float(universe.hubble_time.to_value(u.Gyr) * sum(reversed(pieces)))


@EVERY_PAIR
@pytest.mark.parametrize(
    ("z", "rel"),
    [*((z, 1e-10) for z in (0.0, 1e-4, 0.03, 0.5, 2.0, 7.0, 20.0)), (150.0, 1e-8), (1100.0, 1e-8)],
)
def test_ages_are_the_integral_of_astropys_integrand(z: float, rel: float, pair: Pair) -> None:
    assert age_at_redshift(z, pair.ours) == pytest.approx(
        age_by_astropys_integrand(pair.astropys, z), rel=rel
    )


@EVERY_PAIR
def test_astropys_age_is_the_same_within_the_error_of_its_quadrature(pair: Pair) -> None:
    """astropy's `age` is scipy's `quad` from z to infinity at its default absolute tolerance,
    1.49e-8 Hubble times. That is all that it promises, and at z = 1100, where the age itself is
    3e-5 Hubble times, it is far more than 1e-8 relative."""
    hubble_time = pair.astropys.hubble_time.to_value(u.Gyr)
    for z in (0.0, *NEARBY[::6], *FAR[::6]):
        error = quad(pair.astropys.lookback_time_integrand, z, inf)[1]
        assert error < 1.49e-8
        theirs = pair.astropys.age(z).to_value(u.Gyr)
        assert abs(age_at_redshift(z, pair.ours) - theirs) < hubble_time * error + 1e-10 * theirs


@EVERY_PAIR
def test_densities_are_astropys(pair: Pair) -> None:
    for key in ("Om0", "Ode0", "Ogamma0", "Onu0", "Ok0"):
        theirs = getattr(pair.astropys, key)
        assert cosmology_value(key, pair.ours) == pytest.approx(theirs, rel=1e-12, abs=1e-15)
    assert cosmology_value("H0", pair.ours) == pair.astropys.H0.value
    assert time_hubble(pair.ours) == pytest.approx(
        pair.astropys.hubble_time.to_value(u.Gyr), rel=1e-14
    )


# --------------------------------------------------------------------------- closed forms

H0 = 70.0
HUBBLE_MPC = C / H0
HUBBLE_GYR = MPC / H0 / GYR

EINSTEIN_DE_SITTER = {"H0": H0, "Om0": 1.0, "Ode0": 0.0}
EMPTY = {"H0": H0, "Om0": 0.0, "Ode0": 0.0}
DE_SITTER = {"H0": H0, "Om0": 0.0, "Ode0": 1.0}
REDSHIFTS = np.array([1e-4, 0.01, 0.3, 1.0, 3.0, 8.0, 30.0, 1000.0])


def test_einstein_de_sitter_distances() -> None:
    """Einstein & de Sitter 1932, PNAS 18, 213; Hogg 1999, figs. 1 to 3, the (1, 0) curves.

    D_L = 2c/H0·(1+z − √(1+z)), written here so that a small z loses no digits.
    """
    root = np.sqrt(1 + REDSHIFTS)
    comoving = 2 * HUBBLE_MPC * REDSHIFTS / (root * (1 + root))
    ours = EINSTEIN_DE_SITTER
    np.testing.assert_allclose(distance_comoving(REDSHIFTS, ours), comoving, rtol=1e-12)
    np.testing.assert_allclose(
        distance_luminosity(REDSHIFTS, ours), comoving * (1 + REDSHIFTS), rtol=1e-12
    )
    np.testing.assert_allclose(
        distance_angular(REDSHIFTS, ours), comoving / (1 + REDSHIFTS), rtol=1e-12
    )
    np.testing.assert_allclose(
        volume_comoving(REDSHIFTS, cosmology=ours), 4 * pi / 3 * comoving**3, rtol=1e-12
    )


def test_einstein_de_sitter_times() -> None:
    """Its age is 2/(3H0), and (1+z)^1.5 times less at z; q = 1/2 for ever."""
    ours = EINSTEIN_DE_SITTER
    age = 2 / 3 * HUBBLE_GYR
    assert age_of_universe(ours) == pytest.approx(age, rel=1e-12)
    np.testing.assert_allclose(
        age_at_redshift(REDSHIFTS, ours), age / (1 + REDSHIFTS) ** 1.5, rtol=1e-11
    )
    np.testing.assert_allclose(
        expansion_rate(REDSHIFTS, ours), H0 * (1 + REDSHIFTS) ** 1.5, rtol=1e-13
    )
    np.testing.assert_allclose(deceleration(REDSHIFTS, ours), 0.5, rtol=1e-12)


def test_an_object_looks_smallest_at_z_of_five_quarters_in_einstein_de_sitter() -> None:
    """Hoyle 1959 (IAU Symp. 9); Hogg 1999, fig. 2: there D_A = 8/27 of the Hubble distance."""
    ours = EINSTEIN_DE_SITTER
    z = np.linspace(1.2, 1.3, 1001)
    assert z[np.argmax(distance_angular(z, ours))] == pytest.approx(1.25, abs=2e-4)
    assert distance_angular(1.25, ours) == pytest.approx(8 / 27 * HUBBLE_MPC, rel=1e-12)


def test_empty_universe() -> None:
    """Milne 1935: D_L = c/H0·z(1+z/2), the comoving distance c/H0·ln(1+z), the age 1/H0."""
    z = REDSHIFTS
    np.testing.assert_allclose(distance_comoving(z, EMPTY), HUBBLE_MPC * np.log1p(z), rtol=1e-12)
    luminosity = HUBBLE_MPC * z * (1 + z / 2)
    np.testing.assert_allclose(distance_luminosity(z, EMPTY), luminosity, rtol=1e-12)
    np.testing.assert_allclose(distance_angular(z, EMPTY), luminosity / (1 + z) ** 2, rtol=1e-12)
    np.testing.assert_allclose(age_at_redshift(z, EMPTY), HUBBLE_GYR / (1 + z), rtol=1e-11)
    np.testing.assert_allclose(time_lookback(z, EMPTY), HUBBLE_GYR * z / (1 + z), rtol=1e-12)
    np.testing.assert_allclose(deceleration(z, EMPTY), 0.0, atol=1e-14)


def test_de_sitter_universe() -> None:
    """de Sitter 1917: D_L = c/H0·z(1+z), q = −1, and light under way for ln(1+z)/H0."""
    z = REDSHIFTS
    np.testing.assert_allclose(distance_comoving(z, DE_SITTER), HUBBLE_MPC * z, rtol=1e-12)
    np.testing.assert_allclose(
        distance_luminosity(z, DE_SITTER), HUBBLE_MPC * z * (1 + z), rtol=1e-12
    )
    np.testing.assert_allclose(time_lookback(z, DE_SITTER), HUBBLE_GYR * np.log1p(z), rtol=1e-12)
    np.testing.assert_allclose(deceleration(z, DE_SITTER), -1.0, rtol=1e-14)


def test_de_sitter_universe_had_no_beginning() -> None:
    """It grows as exp(H0·t), so it has no age: an infinite one is not a number in a cell."""
    with pytest.raises(cellfuncs.DomainError):
        age_of_universe(DE_SITTER)
    with pytest.raises(cellfuncs.DomainError):
        age_at_redshift(1.0, DE_SITTER)
    assert np.isnan(age_at_redshift(np.array([0.0, 1.0]), DE_SITTER)).all()


@pytest.mark.parametrize("w", [-0.9, -0.7, -0.5, -0.2, 0.0, 0.3])
def test_age_of_a_universe_of_dark_energy_alone(w: float) -> None:
    """a ∝ t^(2/(3(1+w))), so that the age is 2/(3(1+w)H0): Peebles & Ratra 2003, Reviews of
    Modern Physics 75, 559, sec. III."""
    ours = {"H0": H0, "Om0": 0.0, "Ode0": 1.0, "w0": w}
    assert age_of_universe(ours) == pytest.approx(2 / 3 / (1 + w) * HUBBLE_GYR, rel=1e-10)


@pytest.mark.parametrize("matter", [0.1, 0.3, 0.9, 1.5, 3.0])
def test_mattig_distances_of_matter_alone(matter: float) -> None:
    """Mattig 1958, Astronomische Nachrichten 284, 109: open and closed universes without Λ.

    D_L = 2c/(H0·Om²)·(Om·z + (Om−2)(√(1+Om·z)−1)), its differences taken apart for a small z.
    """
    z = REDSHIFTS
    root = np.sqrt(1 + matter * z)
    # (Om·z + (Om−2)(√(1+Om·z)−1))/Om² = z·(√(1+Om·z) + Om − 1)/(Om·(1 + √(1+Om·z)))
    luminosity = 2 * HUBBLE_MPC * z * (root + matter - 1) / (matter * (1 + root))
    ours = {"H0": H0, "Om0": matter, "Ode0": 0.0}
    # (Om−1) cancels against the root of a far closed universe; 1e-11 leaves room for that
    np.testing.assert_allclose(distance_luminosity(z, ours), luminosity, rtol=1e-11)


@pytest.mark.parametrize("matter", [0.05, 0.3, 0.8])
def test_age_of_an_open_universe_of_matter(matter: float) -> None:
    """Peebles 1993, Principles of Physical Cosmology, eq. 13.10 (the number from memory)."""
    ours = {"H0": H0, "Om0": matter, "Ode0": 0.0}
    rest = 1 - matter
    age = 1 / rest - matter / 2 / rest**1.5 * acosh(2 / matter - 1)
    assert age_of_universe(ours) == pytest.approx(HUBBLE_GYR * age, rel=1e-11)


@pytest.mark.parametrize("matter", [1.2, 2.0, 5.0])
def test_age_of_a_closed_universe_of_matter(matter: float) -> None:
    """Peebles 1993, the same for Om > 1."""
    ours = {"H0": H0, "Om0": matter, "Ode0": 0.0}
    excess = matter - 1
    age = matter / 2 / excess**1.5 * acos(2 / matter - 1) - 1 / excess
    assert age_of_universe(ours) == pytest.approx(HUBBLE_GYR * age, rel=1e-11)


@pytest.mark.parametrize("matter", [0.05, 0.3, 0.7, 0.99])
def test_ages_of_flat_universes_with_a_cosmological_constant(matter: float) -> None:
    """Carroll, Press & Turner 1992, eq. 17 (the number from memory); Peebles 1993, eq. 13.20.

    t = 2/(3H0√ΩΛ)·asinh√(ΩΛ/Ωm/(1+z)³)
    """
    ours = {"H0": H0, "Om0": matter}
    rest = 1 - matter
    for z in (0.0, 0.5, 3.0, 20.0, 1000.0):
        age = 2 / 3 / sqrt(rest) * asinh(sqrt(rest / matter / (1 + z) ** 3))
        assert age_at_redshift(z, ours) == pytest.approx(HUBBLE_GYR * age, rel=1e-11)


def test_age_of_matter_and_radiation() -> None:
    """Flat, no Λ: t = 2/(3H0·Om²)·(√(Om a + Or)·(Om a − 2Or) + 2Or^1.5): Peebles 1993, sec. 6.

    √(Om a + Or)(Om a − 2Or) cancels in the radiation era, so the check stops at z = 1100.
    """
    ours = {"H0": H0, "Om0": 0.99, "Tcmb0": 20.0, "Neff": 0.0, "Ode0": 0.0}
    radiation = cosmology_value("Ogamma0", ours)
    matter = 1.0 - radiation
    ours["Om0"] = matter
    for z in (0.0, 1.0, 20.0, 1100.0):
        a = 1 / (1 + z)
        root = sqrt(matter * a + radiation)
        age = 2 / 3 / matter**2 * (root * (matter * a - 2 * radiation) + 2 * radiation**1.5)
        assert age_at_redshift(z, ours) == pytest.approx(HUBBLE_GYR * age, rel=1e-10)


@pytest.mark.parametrize("curvature", [0.5, -0.5])
def test_volumes_of_curved_space(curvature: float) -> None:
    """Hogg 1999, eq. 29, as printed there: from the transverse distance."""
    matter = 0.3 if curvature > 0 else 0.7
    ours = {"H0": H0, "Om0": matter, "Ode0": 1 - curvature - matter}
    z = np.array([0.3, 0.6, 1.0])
    across = distance_transverse(z, ours) / HUBBLE_MPC
    size = sqrt(abs(curvature))
    turn = np.arcsinh if curvature > 0 else np.arcsin
    volume = (
        4 * pi * HUBBLE_MPC**3 / (2 * curvature)
        * (across * np.sqrt(1 + curvature * across**2) - turn(size * across) / size)
    )  # fmt: skip
    np.testing.assert_allclose(volume_comoving(z, cosmology=ours), volume, rtol=1e-12)


def test_a_volume_over_part_of_the_sky() -> None:
    """The sky has 4π·(180/π)² = 41 252.96 square degrees (common practice, no source)."""
    whole = volume_comoving(0.1)
    assert volume_comoving(0.1, 41_252.961_249_419) == pytest.approx(whole, rel=1e-12)
    assert volume_comoving(0.1, 100.0) == pytest.approx(whole / 412.529_612_494_19, rel=1e-12)


def test_deceleration_today_is_half_the_matter_less_the_constant() -> None:
    """Carroll, Press & Turner 1992, eq. 18 (the number from memory): q0 = Om/2 − ΩΛ."""
    for matter, constant in [(0.3, 0.7), (0.3, 0.0), (1.2, 0.4), (0.0, -0.5)]:
        ours = {"H0": H0, "Om0": matter, "Ode0": constant}
        assert deceleration(0.0, ours) == pytest.approx(matter / 2 - constant, rel=1e-14)


# --------------------------------------------------------------------------- published tables

PUBLISHED_AGES = {
    # TT, TE, EE + lowE + lensing + BAO: Planck 2018 VI (A&A 641, A6), Table 2, last column
    "Planck18": (13.787, 0.020),
    # TT, TE, EE + lowP + lensing + ext: Planck 2015 XIII (A&A 594, A13), Table 4, last column
    "Planck15": (13.799, 0.021),
    # Planck + WP + highL + BAO: Planck 2013 XVI (A&A 571, A16), Table 5, 68 % limits
    "Planck13": (13.798, 0.037),
    # WMAP9 + eCMB + BAO + H0: Hinshaw et al. 2013 (ApJS 208, 19), Table 4, last column
    "WMAP9": (13.772, 0.059),
    # WMAP7 + BAO + H0, mean: Komatsu et al. 2011 (ApJS 192, 18), Table 1
    "WMAP7": (13.75, 0.11),
    # WMAP5 + BAO + SN, mean: Komatsu et al. 2009 (ApJS 180, 330), Table 1
    "WMAP5": (13.72, 0.12),
}
"""Gyr, with 68 % limits. The limits, and the means where a set is a maximum-likelihood one, are
from memory; the values that astropy keeps beside its sets agree."""


@pytest.mark.parametrize(("name", "published"), PUBLISHED_AGES.items())
def test_published_ages(name: str, published: tuple[float, float]) -> None:
    age, sigma = published
    ours = age_of_universe(name)
    # The papers' neutrinos and rounded parameters leave a tenth of the limits, not more.
    assert abs(ours - age) < 0.1 * sigma
    theirs = getattr(astropy.cosmology, name).meta["t0"].to_value(u.Gyr)
    assert abs(ours - theirs) < 0.1 * sigma


def test_planck_2018_table_2() -> None:
    """Planck 2018 VI, Table 2, last column, 68 % limits; from memory."""
    assert abs(cosmology_value("H0") - 67.66) < 0.42
    # Om there counts the massive neutrino, here Onu0 does; the massless ones are 4e-5.
    matter = cosmology_value("Om0") + cosmology_value("Onu0")
    assert matter == pytest.approx(0.3111, abs=0.0056 / 10)
    assert cosmology_value("Ode0") == pytest.approx(0.6889, abs=0.0056 / 10)


def test_the_sound_horizon_seen_at_recombination() -> None:
    """The same column: z* = 1089.80, r* = 144.57 ± 0.22 Mpc, 100θ* = 1.04119 ± 0.00029; so the
    transverse distance to the last scattering is r*/θ* = 13 885 Mpc. From memory."""
    distance = 144.57 / 1.041_19e-2
    # r* is printed to 0.01 Mpc and θ* to 1e-5: half a unit of each is 1 Mpc in the distance.
    assert distance_transverse(1089.80) == pytest.approx(distance, abs=0.5 + 0.7 + 0.3)


def test_matter_equals_radiation_at_the_published_redshift() -> None:
    """The same column: z_eq = 3387 ± 21, neutrinos massless there. From memory."""
    massless = {"H0": 67.66, "Om0": 0.309_66, "Tcmb0": 2.7255, "Neff": 3.046}
    radiation = cosmology_value("Ogamma0", massless) + cosmology_value("Onu0", massless)
    assert 0.309_66 / radiation - 1 == pytest.approx(3387, abs=21 / 10)


def test_light_of_the_microwave_background() -> None:
    """Ωγh² = 2.473e-5 at 2.7255 K: Particle Data Group, Astrophysical constants (from memory)."""
    ours = {"H0": 100.0, "Om0": 0.3, "Tcmb0": 2.7255}
    assert cosmology_value("Ogamma0", ours) == pytest.approx(2.473e-5, abs=0.0005e-5)


def test_massless_neutrinos_are_a_fixed_part_of_the_light() -> None:
    """Komatsu et al. 2009, ApJS 180, 330, sec. 2: Ων = 0.2271·Neff·Ωγ, four digits there."""
    ours = {"H0": 70.0, "Om0": 0.3, "Tcmb0": 2.725, "Neff": 3.04}
    ratio = cosmology_value("Onu0", ours) / cosmology_value("Ogamma0", ours) / 3.04
    assert ratio == pytest.approx(0.2271, abs=0.000_05)


def test_heavy_neutrinos_weigh_what_they_should() -> None:
    """Komatsu et al. 2011, text under eq. 26: Ωνh² = Σm/94 eV for heavy ones; two digits there."""
    ours = {"H0": 70.0, "Om0": 0.3, "Tcmb0": 2.725, "Neff": 3.04, "m_nu": [0.5, 0.5, 0.5]}
    assert cosmology_value("Onu0", ours) * 0.49 == pytest.approx(1.5 / 94, rel=0.02)


# --------------------------------------------------------------------------- how it all ends


def least_without_a_beginning(matter: float) -> float:
    """Carroll, Press & Turner 1992, eq. 12: from this ΩΛ on there was no big bang."""
    if matter == 0:
        return 1.0
    argument = (1 - matter) / matter
    if matter < 0.5:
        return 4 * matter * cosh(acosh(argument) / 3) ** 3
    return 4 * matter * cos(acos(argument) / 3) ** 3


def least_that_expands_for_ever(matter: float) -> float:
    """Carroll, Press & Turner 1992, eq. 11: below this ΩΛ the universe recollapses."""
    if matter <= 1:
        return 0.0
    return 4 * matter * cos(acos((1 - matter) / matter) / 3 + 4 * pi / 3) ** 3


MATTER = [0.01, 0.1, 0.3, 0.499, 0.5, 0.7, 1.0, 1.5, 2.5]
"""Both branches of each formula. The equations' numbers are from memory; Carroll 2001 (Living
Reviews in Relativity 4, 1) prints the formulas again."""


def fate_of(matter: float, constant: float) -> str:
    return str(expansion_fate({"H0": H0, "Om0": matter, "Ode0": constant}))


@pytest.mark.parametrize("matter", MATTER)
@pytest.mark.parametrize("step", [1e-3, 1e-2, 0.3])
def test_both_sides_of_no_big_bang(matter: float, step: float) -> None:
    edge = least_without_a_beginning(matter)
    assert fate_of(matter, edge * (1 + step)) == "no big bang"
    assert fate_of(matter, edge * (1 - step)) == "expands, accelerating"


@pytest.mark.parametrize("matter", MATTER)
@pytest.mark.parametrize("step", [1e-6, 1e-3, 0.1])
def test_both_sides_of_recollapse(matter: float, step: float) -> None:
    edge = least_that_expands_for_ever(matter)
    assert fate_of(matter, edge - step) == "recollapses"
    assert fate_of(matter, edge + step) == "expands, accelerating"


@pytest.mark.parametrize(
    ("cosmology", "fate"),
    [
        (EINSTEIN_DE_SITTER, "expands, coming to rest"),
        (EMPTY, "expands forever"),
        ({"H0": H0, "Om0": 0.3, "Ode0": 0.0}, "expands forever"),
        ({"H0": H0, "Om0": 1.01, "Ode0": 0.0}, "recollapses"),
        (DE_SITTER, "expands, accelerating"),
        ({"H0": H0, "Om0": 0.0, "Ode0": -0.1}, "recollapses"),
        ({"H0": H0, "Om0": 0.0, "Ode0": 1.1}, "no big bang"),
        *((name, "expands, accelerating") for name in PUBLISHED_AGES),
    ],
)
def test_known_endings(cosmology: Any, fate: str) -> None:
    """Felten & Isaacman 1986, Reviews of Modern Physics 58, 689: the classes of universes."""
    assert expansion_fate(cosmology) == fate


def test_a_universe_that_bounced_was_never_beyond_its_turning_point() -> None:
    """Carroll, Press & Turner 1992, under eq. 12: at the border it turned at
    z = 2cos(acos((1−Om)/Om)/3) − 1; with more Λ it turned later. No light has come from beyond,
    and there was no expansion rate, though E² as a formula is positive there again."""
    matter = 0.6
    turn = 2 * cos(acos((1 - matter) / matter) / 3) - 1
    ours = {"H0": H0, "Om0": matter, "Ode0": least_without_a_beginning(matter) * 1.001}
    for function in (distance_comoving, time_lookback, expansion_rate, deceleration):
        assert np.isfinite(function(np.array([0.0, turn * 0.9]), ours)).all()
        assert np.isnan(function(np.array([turn * 1.2, turn * 5.0]), ours)).all(), function
        with pytest.raises(cellfuncs.DomainError):
            function(turn * 1.2, ours)
