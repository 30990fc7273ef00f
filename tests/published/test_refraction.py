"""The index of air against Ciddor's printed table and against other published formulas.

The ten lines of a handbook in air and vacuum are in test_line_wavelengths.py.
"""

from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from cellfuncs import DomainError, wavelength_air, wavelength_vacuum

Floats = NDArray[np.float64]


def refractivity(vacuum: Floats) -> Floats:
    """(n − 1)·1e8 of our air at vacuum wavelengths in Å, read off the conversion itself."""
    air = wavelength_air(vacuum)
    return np.asarray((vacuum - air) / air * 1e8)


CIDDOR_TABLE_1 = [
    # °C, Pa, (n − 1)·1e8
    (20.0, 80_000.0, 21_458.0),
    (20.0, 100_000.0, 26_824.4),
    (20.0, 120_000.0, 32_191.6),
    (10.0, 100_000.0, 27_774.7),
    (30.0, 100_000.0, 25_937.2),
]
"""Ciddor 1996, Applied Optics 35, 1566, Table 1: dry air, 633 nm, 450 ppm of CO2. From memory; a
public repository that tests its own implementation has the same five numbers."""


def compressibility(celsius: float, pascal: float) -> float:
    """Dry air: Davis 1992, Metrologia 29, 67 (CIPM-81/91), eq. A1.5 without water."""
    per_kelvin = pascal / (celsius + 273.15)
    terms = 1.581_23e-6 - 2.9331e-8 * celsius + 1.1043e-10 * celsius**2
    return 1 - per_kelvin * terms + per_kelvin**2 * 1.83e-11


@pytest.mark.parametrize(("celsius", "pascal", "printed"), CIDDOR_TABLE_1)
def test_ciddors_table_1(celsius: float, pascal: float, printed: float) -> None:
    """n − 1 goes with the density p/(ZT), and ours is for 15 °C and 101 325 Pa."""
    standard = 101_325 / (compressibility(15, 101_325) * 288.15)
    density = pascal / (compressibility(celsius, pascal) * (celsius + 273.15))
    index = refractivity(np.array([6330.0]))[0]
    # the table is printed to 0.1
    assert index * density / standard == pytest.approx(printed, abs=0.15)


def edlen_1966(s: Floats) -> Floats:
    """Edlén 1966, Metrologia 2, 71: 15 °C, 760 Torr, 300 ppm of CO2; s in µm⁻², (n − 1)·1e8."""
    return 8342.13 + 2_406_030 / (130 - s) + 15_997 / (38.9 - s)


def peck_reeder_1972(s: Floats) -> Floats:
    """Peck & Reeder 1972, J. Opt. Soc. Am. 62, 958, eq. 3: 15 °C, 760 Torr, 330 ppm."""
    return 8060.51 + 2_480_990 / (132.274 - s) + 17_455.7 / (39.329_57 - s)


def birch_downs_1994(s: Floats) -> Floats:
    """Birch & Downs 1994, Metrologia 31, 315: 15 °C, 101 325 Pa, 450 ppm."""
    return 8342.54 + 2_406_147 / (130 - s) + 15_998 / (38.9 - s)


CARBON_DIOXIDE = 0.54e-6
"""Relative change of n − 1 for a ppm of CO2 in place of air: Edlén 1966, eq. 17"""


@pytest.mark.parametrize(
    ("formula", "ppm"), [(birch_downs_1994, 450), (peck_reeder_1972, 330), (edlen_1966, 300)]
)
@pytest.mark.parametrize(
    ("shortest", "longest"), [(2300, 3500), (3500, 6500), (6500, 17_000)], ids=str
)
def test_other_published_formulas(formula: Any, ppm: float, shortest: int, longest: int) -> None:
    """Ciddor 1996 and Birch & Downs 1994 claim 1e-8 to 2e-8 for n, Edlén and Peck & Reeder no
    less; once the carbon dioxide is the same they agree within that, from 2300 Å to 1.7 µm."""
    vacuum = np.linspace(shortest, longest, 301)
    theirs = formula((1e4 / vacuum) ** 2) * (1 + CARBON_DIOXIDE * (450 - ppm))
    assert np.abs(refractivity(vacuum) - theirs).max() < 2.0


def test_birch_and_downs_in_the_visible() -> None:
    """The two equations that length metrology chooses between (Stone & Zimmerman, NIST, Index of
    Refraction of Air, sec. II); for standard air they part in the tenth digit only."""
    vacuum = np.linspace(3500, 6500, 301)
    theirs = birch_downs_1994((1e4 / vacuum) ** 2)
    assert np.abs(refractivity(vacuum) - theirs).max() < 0.3


def test_air_is_a_ten_thousandth_part_of_three_shorter() -> None:
    """Common practice, no source: 1.4 Å at 5000 Å, 1.8 Å at 6563 Å, 2.7 Å at 1 µm."""
    for vacuum, shift in [(5000.0, 1.4), (6564.6, 1.8), (10_000.0, 2.7)]:
        assert vacuum - wavelength_air(vacuum) == pytest.approx(shift, abs=0.05)


VACUUM = np.concatenate([np.linspace(2000, 3000, 201), np.geomspace(3000, 1e8, 201)])


def test_the_way_there_and_back() -> None:
    """FUNCTIONS.md: WAVELENGTH_VACUUM inverts WAVELENGTH_AIR to 1e-10 relative."""
    air = wavelength_air(VACUUM)
    assert (air < VACUUM).all()
    np.testing.assert_allclose(wavelength_vacuum(air), VACUUM, rtol=1e-10)
    np.testing.assert_allclose(wavelength_air(wavelength_vacuum(air)), air, rtol=1e-10)


def test_one_wavelength_is_converted_as_a_column_is() -> None:
    column = wavelength_air(VACUUM)
    assert [wavelength_air(float(each)) for each in VACUUM] == pytest.approx(column, rel=1e-15)
    back = wavelength_vacuum(column)
    assert [wavelength_vacuum(float(each)) for each in column] == pytest.approx(back, rel=1e-15)


def test_below_2000_angstrom_wavelengths_are_in_vacuum() -> None:
    """Common practice, no source: 2000 Å is where air wavelengths end in line lists."""
    for function in (wavelength_air, wavelength_vacuum):
        with pytest.raises(DomainError, match="2000"):
            function(1999.0)
        assert np.isnan(function(np.array([1999.0, 3000.0]))).tolist() == [True, False]
    assert wavelength_vacuum(wavelength_air(2000.0)) == pytest.approx(2000.0, rel=1e-12)
