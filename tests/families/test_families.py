"""Spectrum, velocity and workbook functions against identities and worked values from outside."""

import re
from math import sqrt

import astropy.cosmology
import astropy.units as u
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import cellfuncs as cf
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import CellError, InputError, MissingInput

C = 299_792.458  # km/s, SI 2019

redshifts = st.floats(-0.99, 1100.0)
velocities = st.floats(-0.999 * C, 0.999 * C)
wavelengths = st.floats(100.0, 1e8)


def close(value: float, to: float, relative: float) -> bool:
    return bool(abs(value - to) <= relative * abs(to))


# Wavelengths and frequencies ----------------------------------------------------------------------


# Outside: 115.271 2018 GHz and 2.600 757 633 mm for CO 1-0 (Splatalogue and CDMS give the
# frequency; the wavelength is c/ν by hand), 1420.405 751 768 MHz and 21.106 114 054 cm for H I
# (values from memory).
@pytest.mark.parametrize(
    ("frequency", "wavelength"), [(115.271_201_8, 26_007_576.33), (1.420_405_751_768, 2110611405.4)]
)
def test_frequency_and_wavelength(frequency: float, wavelength: float) -> None:
    assert close(cf.wavelength_from_frequency(frequency), wavelength, 1e-9)
    assert close(cf.frequency_from_wavelength(wavelength), frequency, 1e-9)


@given(wavelengths)
def test_frequency_and_wavelength_as_astropy_has_them(wavelength: float) -> None:
    theirs = (wavelength * u.AA).to_value(u.GHz, equivalencies=u.spectral())
    assert close(cf.frequency_from_wavelength(wavelength), theirs, 1e-14)
    theirs = (wavelength * u.GHz).to_value(u.AA, equivalencies=u.spectral())
    assert close(cf.wavelength_from_frequency(wavelength), theirs, 1e-14)


@given(wavelengths, redshifts)
def test_observed_and_emitted_undo_each_other(rest: float, z: float) -> None:
    observed = cf.wavelength_observed(rest, z)
    assert close(observed, rest + rest * z, 1e-12)
    assert close(cf.wavelength_emitted(observed, z), rest, 1e-14)


# Outside: the redshift of 3C 273 from its Balmer lines, Schmidt 1963, Nature 197, 1040: z = 0.158,
# H beta seen at 5632 Å, H gamma at 5032 Å (his wavelengths are in air; to three places it is one).
@pytest.mark.parametrize(
    ("observed", "rest"), [(5632.0, 4861.3), (5032.0, 4340.5), (4753.0, 4101.7)]
)
def test_the_first_quasar(observed: float, rest: float) -> None:
    assert abs(cf.redshift_from_wavelength(observed, rest) - 0.158) < 0.002
    line = {4861.3: "H beta", 4340.5: "H gamma", 4101.7: "H delta"}[rest]
    assert abs(cf.redshift_from_line(observed, line, "air") - 0.158) < 0.002


@given(wavelengths, redshifts)
def test_redshift_from_wavelength_and_from_frequency(rest: float, z: float) -> None:
    seen = cf.wavelength_observed(rest, z)
    by_wavelength = cf.redshift_from_wavelength(seen, rest)
    by_frequency = cf.redshift_from_frequency(
        cf.frequency_from_wavelength(seen), cf.frequency_from_wavelength(rest)
    )
    assert abs(by_wavelength - z) <= 1e-14 * (1 + abs(z))
    assert abs(by_frequency - z) <= 1e-14 * (1 + abs(z))


# Outside: Ciddor 1996, Appl. Opt. 35, 1566, as the VALD conversion of Piskunov and the SDSS
# handbook print it: [O III] 5006.843 in air is 5008.240 in vacuum, H alpha 6562.80 is 6564.61.
@pytest.mark.parametrize(
    ("air", "vacuum"), [(5006.843, 5008.240), (4958.911, 4960.295), (6562.801, 6564.614)]
)
def test_air_and_vacuum(air: float, vacuum: float) -> None:
    assert abs(cf.wavelength_vacuum(air) - vacuum) < 2e-3
    assert abs(cf.wavelength_air(vacuum) - air) < 2e-3


@given(st.floats(2000.0, 1e7))
def test_air_and_vacuum_undo_each_other(vacuum: float) -> None:
    air = cf.wavelength_air(vacuum)
    assert air < vacuum
    assert close(cf.wavelength_vacuum(air), vacuum, 1e-12)


@given(st.floats(2000.1, 1e6), st.sampled_from(["H alpha", "[O III] 5007", "Ca II K"]))
def test_a_line_in_air_is_taken_to_vacuum_first(observed: float, line: str) -> None:
    vacuum = cf.wavelength_vacuum(observed)
    in_air = cf.redshift_from_line(observed, line, "air")
    assert abs(in_air - cf.redshift_from_line(vacuum, line)) <= 1e-13 * (1 + in_air)
    rest = cf.line_wavelength(line)
    assert abs(in_air - cf.redshift_from_wavelength(vacuum, rest)) <= 1e-13 * (1 + in_air)


# Outside: NIST Atomic Spectra Database (H alpha and [O III], vacuum); CODATA hydrogen hyperfine
# transition; the values in air are those every handbook prints.
@pytest.mark.parametrize(
    ("spelling", "vacuum", "air"),
    [
        ("H alpha", 6564.6, 6562.8),
        ("[OIII]5007", 5008.24, 5006.84),
        ("Ca K", 3934.77, 3933.66),
        ("hbeta", 4862.7, 4861.3),
    ],
)
def test_line_wavelength(spelling: str, vacuum: float, air: float) -> None:
    assert abs(cf.line_wavelength(spelling) - vacuum) < 0.05
    assert abs(cf.line_wavelength(spelling, "air") - air) < 0.05
    assert cf.line_wavelength(spelling, "AIR ") == cf.wavelength_air(cf.line_wavelength(spelling))


def test_lines_short_of_2000_angstrom_have_no_wavelength_in_air() -> None:
    with pytest.raises(cf.DomainError, match="2000"):
        cf.line_wavelength("Ly alpha", "air")


@pytest.mark.parametrize(
    ("arguments", "name"),
    [
        ((6564.7,), "H alpha"),
        ((6562.8, 0.0, "air"), "H alpha"),
        ((6890.0, 0.0497), "H alpha"),
        ((5008.3,), "[O III] 5007"),
        ((5632.0, 0.158, "air"), "H beta"),  # 3C 273, Schmidt 1963
    ],
)
def test_line_nearest(arguments: tuple[float, ...], name: str) -> None:
    assert cf.line_nearest(*arguments) == name


def test_line_nearest_finds_nothing_outside_its_window() -> None:
    assert cf.line_nearest(6560.0, 0.0, "vacuum", 5.0) == "H alpha"
    with pytest.raises(MissingInput, match=r"LINE_NEAREST.*H alpha") as refused:
        cf.line_nearest(6560.0, 0.0, "vacuum", 4.0)
    assert refused.value.shown == "#N/A"
    with pytest.raises(MissingInput):
        cf.line_nearest(1e9)


@given(st.sampled_from(["H alpha", "Ly alpha", "[O III] 5007", "Ca II K"]), st.floats(0.0, 7.0))
def test_line_nearest_names_the_line_that_was_redshifted(line: str, z: float) -> None:
    assert cf.line_nearest(cf.wavelength_observed(cf.line_wavelength(line), z), z) == line


# Redshifts ----------------------------------------------------------------------------------------


@given(redshifts, redshifts)
def test_combined_and_relative_redshifts_undo_each_other(z1: float, z2: float) -> None:
    both = cf.redshift_combined(z1, z2)
    assert abs((1 + both) - (1 + z1) * (1 + z2)) <= 1e-12 * (1 + z1) * (1 + z2)
    assert abs(cf.redshift_relative(both, z2) - z1) <= 1e-11 * (1 + abs(z1) + 1 / (1 + z2))
    assert cf.redshift_combined(z1, z2) == cf.redshift_combined(z2, z1)
    assert cf.redshift_relative(z1, z1) == 0.0


def test_small_redshifts_keep_their_digits() -> None:
    """1 m/s is z = 3.3e-9: (1+z1)(1+z2) − 1 as written would keep seven digits of it."""
    assert cf.redshift_combined(3e-12, 0.0) == 3e-12
    assert close(cf.velocity_from_redshift(3.3356e-15), 3.3356e-15 * C, 1e-13)
    assert close(cf.redshift_from_velocity(1e-9), 1e-9 / C, 1e-13)


@given(redshifts, redshifts)
def test_peculiar_velocity_is_the_relative_redshift_times_c(z: float, z_system: float) -> None:
    peculiar = cf.velocity_peculiar(z, z_system)
    theirs = C * ((1 + z) / (1 + z_system) - 1)
    assert abs(peculiar - theirs) <= 1e-11 * C * (1 + z + 1) / (1 + z_system)


# Velocities ---------------------------------------------------------------------------------------


# Outside: astropy's Doppler equivalencies (FITS WCS Paper III in its own words).
@pytest.mark.parametrize(
    ("convention", "equivalency"),
    [
        ("relativistic", u.doppler_relativistic),
        ("optical", u.doppler_optical),
        ("radio", u.doppler_radio),
    ],
)
@given(z=st.floats(-0.9, 20.0))
def test_velocity_conventions_are_those_of_astropy(convention: str, equivalency, z: float) -> None:  # type: ignore[no-untyped-def]
    rest = 5000.0 * u.AA
    theirs = (rest * (1 + z)).to_value(u.km / u.s, equivalencies=equivalency(rest))
    ours = cf.velocity_from_redshift(z, convention)
    assert abs(ours - theirs) <= 1e-9  # km/s: theirs is a difference of squares
    assert abs(cf.redshift_from_velocity(ours, convention) - z) <= 1e-12 * (1 + abs(z)) ** 2


# By hand: (1+z)² = 4 gives 3/5 c; z = 1 is c in the optical and c/2 in the radio convention.
def test_velocities_at_redshift_one() -> None:
    assert close(cf.velocity_from_redshift(1.0), 0.6 * C, 1e-15)
    assert cf.velocity_from_redshift(1.0, "optical") == C
    assert cf.velocity_from_redshift(1.0, "radio") == C / 2
    assert close(cf.doppler_factor(0.6 * C), 2.0, 1e-15)
    assert close(cf.doppler_factor(-0.6 * C), 0.5, 1e-15)


@given(velocities)
def test_conventions_agree_to_first_order_only(velocity: float) -> None:
    z = cf.redshift_from_velocity(velocity)
    assert close(1 + z, cf.doppler_factor(velocity), 1e-12)
    optical = cf.velocity_converted(velocity, "relativistic", "optical")
    radio = cf.velocity_converted(velocity, "relativistic", "radio")
    assert abs(optical - C * z) <= 1e-12 * (C + abs(C * z))
    assert radio <= velocity + 1e-9
    assert velocity <= optical + 1e-9
    back = cf.velocity_converted(optical, "optical", "relativistic")
    assert abs(back - velocity) <= 1e-12 * (C + abs(optical))


# By hand: half the speed of light twice is 4/5 of it.
def test_velocity_sum_by_hand() -> None:
    assert close(cf.velocity_sum(C / 2, C / 2), 0.8 * C, 1e-15)
    assert cf.velocity_sum(1234.5, 0.0) == 1234.5
    assert cf.velocity_sum(1234.5, -1234.5) == 0.0


@given(velocities, velocities)
def test_doppler_factors_multiply_where_velocities_are_summed(v1: float, v2: float) -> None:
    total = cf.velocity_sum(v1, v2)
    assert -C < total < C
    product = cf.doppler_factor(v1) * cf.doppler_factor(v2)
    # near c the factor hangs on the last digits of the velocity
    assert close(cf.doppler_factor(total), product, 1e-15 * (2 + product**2 + product**-2))


# Outside: Freedman et al. 2001, ApJ 553, 47: H0 = 72 km/s/Mpc. NGC 4889 in Coma at 100 Mpc by hand.
def test_hubble_law() -> None:
    assert cf.velocity_hubble(100.0, 72.0) == 7200.0
    assert cf.distance_hubble(7200.0, 72.0) == 100.0
    assert close(cf.velocity_hubble(100.0), astropy.cosmology.Planck18.H0.value * 100, 1e-15)


# Units --------------------------------------------------------------------------------------------

PAIRS = [
    ("nm", "Angstrom"),
    ("Angstrom", "um"),
    ("m", "lyr"),
    ("pc", "au"),
    ("Mpc", "lyr"),
    ("kpc", "km"),
    ("km.s-1", "m.s-1"),
    ("km s-1", "pc.yr-1"),
    ("km/s", "au.d-1"),
    ("km.s-1.Mpc-1", "s-1"),
    ("Gyr", "s"),
    ("h", "d"),
    ("deg", "rad"),
    ("arcsec", "mas"),
    ("arcmin", "deg"),
    ("deg2", "sr"),
    ("GHz", "Hz"),
    ("THz", "kHz"),
    ("Jy", "W.m-2.Hz-1"),
    ("mJy", "erg.s-1.cm-2.Hz-1"),
    ("erg", "J"),
    ("eV", "J"),
    ("keV", "erg"),
    ("K", "mK"),
    ("mag", "mmag"),
    ("%", "1"),
    ("erg/s/cm**2/Angstrom", "W m-2 um-1"),
    ("cm-1", "m-1"),
    ("Mpc3", "kpc3"),
    ("kpc.arcsec-1", "Mpc.rad-1"),
]


@pytest.mark.parametrize(("one", "other"), PAIRS)
def test_units_converted_as_astropy_converts(one: str, other: str) -> None:
    def theirs(text: str) -> u.UnitBase:
        plain = re.sub(r"(?<=[a-z])\.(?=[a-zA-Z])", " ", text)
        plain = re.sub(r"(?<=[0-9])\.(?=[a-zA-Z])", " ", plain)
        return u.Unit(plain)

    for value in (1.0, -3.25, 6.62607015e-34, 1.7e21):
        expected = (value * theirs(one)).to_value(theirs(other))
        assert close(cf.units_converted(value, one, other), expected, 1e-14)
        there_and_back = cf.units_converted(cf.units_converted(value, one, other), other, one)
        assert close(there_and_back, value, 1e-14)


def test_units_of_a_column() -> None:
    found = cf.units_converted([1.0, None, 3.0], "nm", "Angstrom")
    assert found[0] == 10.0
    assert np.isnan(found[1])
    assert found[2] == 30.0
    mixed = cf.units_converted([1.0, 2.0, 3.0], ["nm", "um", "m"], "nm")
    assert mixed.tolist() == [1.0, 2000.0, 3e9]


@pytest.mark.parametrize(
    ("one", "other", "words"),
    [("nm", "s", "different kinds"), ("nmm", "m", "near matches"), ("m", "Angstrm", "Angstrom")],
)
def test_units_that_cannot_be_converted(one: str, other: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as refused:
        cf.units_converted(1.0, one, other)
    assert "UNITS_CONVERTED" in str(refused.value)


# Cosmology ----------------------------------------------------------------------------------------


# Outside: astropy's realisations, read through its own interface.
@pytest.mark.parametrize("name", ["Planck18", "Planck15", "Planck13", "WMAP9", "WMAP7", "WMAP5"])
def test_cosmology_value_is_what_astropy_uses(name: str) -> None:
    theirs = getattr(astropy.cosmology, name)
    expected = {
        "H0": theirs.H0.value,
        "Om0": theirs.Om0,
        "Ode0": theirs.Ode0,
        "Ok0": 0.0,
        "Ogamma0": theirs.Ogamma0,
        "Onu0": theirs.Onu0,
        "w0": -1.0,
        "wa": 0.0,
        "Tcmb0": theirs.Tcmb0.value,
        "Neff": float(theirs.Neff),
        "m_nu": float(theirs.m_nu.sum().value),
    }
    for parameter, value in expected.items():
        assert cf.cosmology_value(parameter, name) == pytest.approx(value, rel=1e-10, abs=0)
        assert cf.cosmology_value(parameter.upper(), name.lower()) == cf.cosmology_value(
            parameter, name
        )


def test_cosmology_value_of_own_parameters() -> None:
    own = {"H0": 70, "Om0": 0.3, "Ode0": 0.6, "Tcmb0": 2.7255, "m_nu": "0, 0.01, 0.05"}
    theirs = astropy.cosmology.LambdaCDM(
        70, 0.3, 0.6, Tcmb0=2.7255, m_nu=[0, 0.01, 0.05] * u.eV, Neff=3.04
    )
    assert close(cf.cosmology_value("Ok0", own), theirs.Ok0, 1e-10)
    assert close(cf.cosmology_value("Onu0", own), theirs.Onu0, 1e-10)
    assert close(cf.cosmology_value("m_nu", own), 0.06, 1e-15)
    assert cf.cosmology_value("Ode0", own) == 0.6


# Reasons and provenance ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    "call",
    [
        ("DISTANCE_LUMINOSITY", 0.5),
        ("distance_luminosity", 0.5, "WMAP9"),
        ("LINE_NEAREST", 6564.7),
        ("AGE_OF_UNIVERSE",),
        ("REASON", "DISTANCE_LUMINOSITY", 0.5),
    ],
)
def test_reason_is_ok_where_there_is_a_result(call: tuple[object, ...]) -> None:
    assert cf.reason(*call) == "ok"


@pytest.mark.parametrize(
    "call",
    [
        ("DISTANCE_LUMINOSITY", -0.1),
        ("distance_luminosity ", None),
        ("DISTANCE_LUMINOSITY", "far"),
        ("DISTANCE_LUMINOSITY", 0.5, "Planck19"),
        ("REDSHIFT_FROM_LINE", 6892, "Hx"),
        ("LINE_NEAREST", 1e9),
        ("DISTANCE_LUMINOSITY", float("inf")),
    ],
)
def test_reason_is_the_sentence_of_the_exception(call: tuple[str, object]) -> None:
    name, *arguments = call
    with pytest.raises(CellError) as raised:
        cf.CATALOGUE[name.strip().upper()](*arguments)
    assert cf.reason(*call) == str(raised.value)
    assert cf.reason(*call) != "ok"


def test_reason_of_too_many_arguments_is_a_sentence_too() -> None:
    said = cf.reason("TIME_HUBBLE", "Planck18", 2.0)
    assert said.startswith("TIME_HUBBLE takes 1")


def test_reason_for_a_reason() -> None:
    assert cf.reason("REASON", "NO_SUCH_FUNCTION") != "ok"


def test_reason_for_an_unknown_function_names_the_near_ones() -> None:
    with pytest.raises(InputError, match="DISTANCE_LUMINOSITY"):
        cf.reason("DISTANCE_LUMINOSTY", 0.5)


def test_provenance() -> None:
    assert cf.provenance() == f"cellfuncs {cf.__version__}"
    assert cf.provenance("VERSION ") == cf.provenance()
    assert "CODATA 2018" in cf.provenance("constants")
    assert cf.provenance("cosmology").startswith("Planck18: ")
    assert "A&A 641, A6" in cf.provenance("cosmology")  # Planck Collaboration 2020
    for what in ("ephemeris", "earth-orientation"):
        assert cf.provenance(what)
    with pytest.raises(InputError, match="near matches: constants"):
        cf.provenance("constant")


def test_the_speed_of_light_is_that_of_the_si() -> None:
    assert LIGHT_SPEED == C
    assert close(cf.doppler_factor(C / 2), sqrt(3), 1e-15)
