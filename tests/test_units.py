"""Units by name: the spellings of two standards and of habit, and what is refused.

Outside: the spellings of IVOA VOUnits 1.0 (section 2) and of the FITS standard 4.0 (section 4.3);
the factors are definitions of the SI and of the IAU.
"""

from math import isclose, pi

import pytest

from cellfuncs.errors import InputError
from cellfuncs.symbols import NotTraceable, name
from cellfuncs.units import COMMON, converted, factor, same_kind, unit_of


# "Å", "um" beside "µm" and "km/s" are common practice; the rest are VOUnit or FITS spellings.
@pytest.mark.parametrize(
    ("spelling", "base", "size"),
    [
        ("nm", "m", 1e-9),
        ("Angstrom", "m", 1e-10),
        ("angstrom", "m", 1e-10),
        ("Å", "m", 1e-10),
        ("\u212b", "m", 1e-10),
        ("um", "m", 1e-6),
        ("\u00b5m", "m", 1e-6),
        ("\u03bcm", "m", 1e-6),
        ("km/s", "m.s-1", 1e3),
        ("km s-1", "m.s-1", 1e3),
        ("km.s-1", "m.s-1", 1e3),
        ("km s**-1", "m.s-1", 1e3),
        ("km.s**-1", "m.s-1", 1e3),
        ("km s^-1", "m.s-1", 1e3),
        (" km/s ", "m.s-1", 1e3),
        ("mag", "mag", 1.0),
        ("deg", "rad", pi / 180),
        ("arcsec", "deg", 1 / 3600),
        ("mas", "arcsec", 1e-3),
        ("au", "m", 149_597_870_700.0),  # IAU 2012 resolution B2
        ("AU", "m", 149_597_870_700.0),
        ("pc", "au", 648_000 / pi),  # IAU 2015 resolution B2
        ("Mpc", "pc", 1e6),
        ("lyr", "m", 299_792_458 * 365.25 * 86_400),
        ("yr", "d", 365.25),
        ("Gyr", "yr", 1e9),
        ("GHz", "Hz", 1e9),
        ("%", "", 0.01),
        ("", "1", 1.0),
        ("1", "", 1.0),
        ("-", "", 1.0),
        ("  ", "", 1.0),
        ("10**3 m", "km", 1.0),
        ("km.s-1.Mpc-1", "km/s/Mpc", 1.0),
        ("kpc.arcsec-1", "kpc/arcsec", 1.0),
        ("erg.s-1.cm-2.Angstrom-1", "erg/s/cm2/Angstrom", 1.0),
        ("Jy", "W.m-2.Hz-1", 1e-26),
        ("deg2", "arcmin2", 3600.0),
        ("eV", "J", 1.602176634e-19),
    ],
)
def test_spellings_and_sizes(spelling: str, base: str, size: float) -> None:
    assert isclose(factor(spelling, base), size, rel_tol=1e-14)
    assert isclose(factor(base, spelling), 1 / size, rel_tol=1e-14)


@pytest.mark.parametrize("spelling", COMMON)
def test_every_unit_that_is_offered_as_near_match_can_be_read(spelling: str) -> None:
    assert factor(spelling, spelling) == 1.0


@pytest.mark.parametrize(
    ("one", "other", "exact"),
    [("nm", "Angstrom", 10.0), ("Angstrom", "nm", 0.1), ("um", "nm", 1000.0), ("h", "s", 3600.0)],
)
def test_a_power_of_ten_is_that_power_exactly(one: str, other: str, exact: float) -> None:
    assert factor(one, other) == exact


@pytest.mark.parametrize(
    ("wrong", "near"),
    [
        ("Angstrm", "Angstrom"),
        ("kms-1", "km.s-1"),
        ("parsec/", "arcsec"),
        ("km/", "km"),
        ("GHzz", "GHz"),
        ("arcsecs", "arcsec"),
    ],
)
def test_an_unknown_unit_is_refused_with_near_matches(wrong: str, near: str) -> None:
    with pytest.raises(InputError) as refused:
        unit_of(wrong)
    message = str(refused.value)
    assert repr(wrong) in message
    assert near in message.partition("near matches")[2]


@pytest.mark.parametrize("wrong", ["???", "7", "nan", "m m m m/", "(", "km..s", "m**", "{}", "__"])
def test_no_text_makes_anything_but_an_input_error(wrong: str) -> None:
    with pytest.raises(InputError):
        factor(wrong, "m")


@pytest.mark.parametrize(
    ("one", "other"),
    [("nm", "s"), ("Angstrom", "GHz"), ("km/s", "Mpc"), ("mag", "Jy"), ("", "m"), ("deg", "h")],
)
def test_units_of_different_kinds_are_refused(one: str, other: str) -> None:
    with pytest.raises(InputError, match="different kinds") as refused:
        factor(one, other)
    assert repr(one) in str(refused.value)
    assert repr(other) in str(refused.value)
    assert not same_kind(one, other)


def test_units_of_one_kind() -> None:
    assert same_kind("nm", "lyr")
    assert same_kind("km.s-1", "au/yr")
    assert not same_kind("nm", "no unit")


def test_converted() -> None:
    assert converted(500.7, "nm", "Angstrom") == 5007.0
    assert converted(1.0, "deg", "arcmin") == 60.0
    with pytest.raises(NotTraceable):
        converted(1.0, name("A1"), "m")
