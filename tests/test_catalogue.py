"""The catalogue is what FUNCTIONS.md promises: names, arguments, units, defaults, calls.

The table below was typed from FUNCTIONS.md by hand, one row a function. `=` gives a default.
"""

import re
from collections.abc import Callable
from math import isfinite, pi
from typing import Any

import astropy.units as u
import numpy as np
import pytest
from examples import call_in

import cellfuncs
from cellfuncs import CATALOGUE, Function, InputError
from cellfuncs.catalogue import Choice, Number, families, find, function

PLANCK_H0 = 67.66  # Planck Collaboration 2020, A&A 641, A6, table 2, last column
SKY = 4 * pi * (180 / pi) ** 2  # square degrees

CONTRACT = """
spectrum
LINE_WAVELENGTH            line medium=vacuum                            Angstrom
LINE_NEAREST               wavelength z=0 medium=vacuum window=10        text
WAVELENGTH_OBSERVED        rest z                                        as_rest
WAVELENGTH_EMITTED         observed z                                    as_observed
WAVELENGTH_VACUUM          air                                           Angstrom
WAVELENGTH_AIR             vacuum                                        Angstrom
WAVELENGTH_FROM_FREQUENCY  frequency                                     Angstrom
FREQUENCY_FROM_WAVELENGTH  wavelength                                    GHz
REDSHIFT_FROM_WAVELENGTH   observed rest                                 1
REDSHIFT_FROM_FREQUENCY    observed rest                                 1
REDSHIFT_FROM_LINE         observed line medium=vacuum                   1
REDSHIFT_FROM_VELOCITY     velocity convention=relativistic              1
REDSHIFT_COMBINED          z1 z2                                         1
REDSHIFT_RELATIVE          z z_reference                                 1
REDSHIFT_SOLVED            wavelengths medium=vacuum z_min=0 z_max=7 part=z  as_part
velocity
VELOCITY_FROM_REDSHIFT     z convention=relativistic                     km.s-1
VELOCITY_CONVERTED         velocity from_convention to_convention        km.s-1
VELOCITY_SUM               v1 v2                                         km.s-1
VELOCITY_PECULIAR          z z_system                                    km.s-1
VELOCITY_HUBBLE            distance h0=67.66                             km.s-1
DOPPLER_FACTOR             velocity                                      1
distance
DISTANCE_HUBBLE            velocity h0=67.66                             Mpc
DISTANCE_COMOVING          z cosmology=Planck18                          Mpc
DISTANCE_TRANSVERSE        z cosmology=Planck18                          Mpc
DISTANCE_LUMINOSITY        z cosmology=Planck18                          Mpc
DISTANCE_ANGULAR           z cosmology=Planck18                          Mpc
DISTANCE_LIGHT_TRAVEL      z cosmology=Planck18                          Mpc
DISTANCE_MODULUS           z cosmology=Planck18                          mag
DISTANCE_FROM_MODULUS      modulus                                       Mpc
MODULUS_FROM_DISTANCE      distance                                      mag
DISTANCE_FROM_PARALLAX     parallax                                      pc
REDSHIFT_FROM_DISTANCE     distance kind=luminosity cosmology=Planck18   1
SCALE_TRANSVERSE           z cosmology=Planck18                          kpc.arcsec-1
VOLUME_COMOVING            z area=SKY cosmology=Planck18                 Mpc3
MAGNITUDE_ABSOLUTE         magnitude z extinction=0 k_correction=0 cosmology=Planck18  mag
age
AGE_AT_REDSHIFT            z cosmology=Planck18                          Gyr
AGE_OF_UNIVERSE            cosmology=Planck18                            Gyr
TIME_LOOKBACK              z cosmology=Planck18                          Gyr
TIME_HUBBLE                cosmology=Planck18                            Gyr
REDSHIFT_FROM_AGE          age cosmology=Planck18                        1
REDSHIFT_FROM_LOOKBACK     time cosmology=Planck18                       1
EXPANSION_RATE             z cosmology=Planck18                          km.s-1.Mpc-1
DECELERATION               z cosmology=Planck18                          1
EXPANSION_FATE             cosmology=Planck18                            text
sample
MEAN_WEIGHTED              values sigmas part=mean                       as_part
VELOCITY_DISPERSION        velocities z_system=0 method=biweight part=sigma  as_part
HUBBLE_FIT                 distances velocities sigmas=None part=slope through_origin=True  as_part
UNCERTAINTY                function arguments sigmas                     as_function
MEMBERSHIP                 value center sigma times=3                    1
sky
VELOCITY_BARYCENTRIC       ra dec utc longitude latitude height          km.s-1
VELOCITY_HELIOCENTRIC      ra dec utc longitude latitude height          km.s-1
REDSHIFT_BARYCENTRIC       z ra dec utc longitude latitude height        1
VELOCITY_IN_FRAME          velocity ra dec from_frame to_frame           km.s-1
TIME_JULIAN                utc                                           d
TIME_BARYCENTRIC           utc ra dec longitude latitude height          d
TIME_SIDEREAL              utc longitude                                 h
ANGLE_HOUR                 ra dec utc longitude latitude height          h
ALTITUDE                   ra dec utc longitude latitude height          deg
AIRMASS                    ra dec utc longitude latitude height          1
ANGLE_FROM_TEXT            text as_hours=False                           deg
workbook
UNITS_CONVERTED            value from_unit to_unit                       as_to_unit
COSMOLOGY_VALUE            parameter cosmology=Planck18                  as_parameter
REASON                     function arguments                            text
PROVENANCE                 what=version                                  text
"""

# The unit in which each argument is a number; what is not here is a pure number or text.
UNITS = {
    "wavelength": "Angstrom",
    "air": "Angstrom",
    "vacuum": "Angstrom",
    "window": "Angstrom",
    "observed": "Angstrom",
    "frequency": "GHz",
    "velocity": "km.s-1",
    "v1": "km.s-1",
    "v2": "km.s-1",
    "h0": "km.s-1.Mpc-1",
    "distance": "Mpc",
    "parallax": "mas",
    "area": "deg2",
    "modulus": "mag",
    "magnitude": "mag",
    "extinction": "mag",
    "k_correction": "mag",
    "age": "Gyr",
    "time": "Gyr",
    "ra": "deg",
    "dec": "deg",
    "longitude": "deg",
    "latitude": "deg",
    "height": "m",
}


def promised() -> dict[str, tuple[str, list[str], str]]:
    """Give name -> family, arguments as typed, unit."""
    found = {}
    family = ""
    for line in CONTRACT.split("\n"):
        match line.split():
            case [word]:
                family = word
            case [name, *arguments, unit]:
                found[name] = (family, arguments, unit)
    return found


PROMISED = promised()


def same_unit(written: str, promised: str) -> bool:
    """Tell whether a unit is the one promised, however spelt, and spelt as a VOUnit."""
    one = u.Unit(written, format="vounit")
    return (
        bool(one.to(u.Unit(promised, format="vounit")) == 1.0) if promised != "1" else not written
    )


every_function = pytest.mark.parametrize("made", CATALOGUE.values(), ids=lambda made: made.name)


def test_names_are_those_promised_in_their_families() -> None:
    assert set(CATALOGUE) == set(PROMISED)
    grouped = {family: [made.name for made in group] for family, group in families().items()}
    expected: dict[str, list[str]] = {}
    for name, (family, _, _) in PROMISED.items():
        expected.setdefault(family, []).append(name)
    assert {family: set(names) for family, names in grouped.items()} == {
        family: set(names) for family, names in expected.items()
    }


@every_function
def test_arguments_are_those_promised(made: Function) -> None:
    _, arguments, unit = PROMISED[made.name]
    assert [argument.name for argument in made.arguments] == [
        argument.partition("=")[0] for argument in arguments
    ]
    for argument, typed in zip(made.arguments, arguments, strict=True):
        _, equals, default = typed.partition("=")
        assert argument.optional == bool(equals), argument.name
        if equals and isinstance(argument, Number):
            assert argument.default == pytest.approx(
                SKY if default == "SKY" else float(default), rel=1e-15, abs=0
            )
        elif equals:
            assert str(argument.default) == default
    if unit == "text" or unit.startswith("as_"):
        assert made.unit == unit.replace("_", " ", 1)
    else:
        assert same_unit(made.unit, unit)


@every_function
def test_argument_units_are_those_promised(made: Function) -> None:
    for argument in made.arguments:
        if not isinstance(argument, Number) or argument.like:
            continue
        assert same_unit(argument.unit, UNITS.get(argument.name, "1")), argument.name


def test_what_shares_a_unit_is_marked_as_such() -> None:
    """`rest` and `observed` may be in any unit, one and the same."""
    for name in ("REDSHIFT_FROM_WAVELENGTH", "REDSHIFT_FROM_FREQUENCY"):
        groups = {argument.like for argument in CATALOGUE[name].arguments}  # type: ignore[attr-defined]
        assert len(groups) == 1
        assert groups != {""}


@every_function
def test_help_says_what_where_from_and_how(made: Function) -> None:
    assert made.summary.endswith(".")
    assert made.summary[0].isupper()
    assert len(made.summary) <= 100
    assert made.source
    assert made.examples
    text = made.__doc__ or ""
    assert made.summary in text
    assert made.source in text
    for argument in made.arguments:
        (line,) = re.findall(rf"^    {argument.name}: .*$", text, re.MULTILINE)
        unit = getattr(argument, "unit", "")
        assert not unit or f"[{unit}]" in line
        assert argument.meaning in line
        assert ("left out: " in line) == argument.optional


@every_function
def test_a_source_is_a_publication_or_says_that_it_is_ours(made: Function) -> None:
    ours = (
        *("the line table", "this reference", "this project", "the sets as astropy"),
        "common practice, no source",
    )
    assert re.search(r"\b(19|20)\d\d\b", made.source) or made.source.startswith(ours)


@pytest.mark.parametrize(
    ("made", "example"),
    [(made, example) for made in CATALOGUE.values() for example in made.examples],
    ids=lambda each: each if isinstance(each, str) else "",
)
def test_every_example_evaluates(made: Function, example: str) -> None:
    name, arguments = call_in(example)
    assert name == made.name
    found = made(*arguments)
    if made.unit == "text" or (made.gives_text and isinstance(found, str)):
        assert isinstance(found, str)
        assert found
    else:
        assert type(found) is float
        assert isfinite(found)


@every_function
def test_every_function_can_be_imported_by_its_name_in_lower_case(made: Function) -> None:
    namespace: dict[str, Any] = {}
    exec(f"from cellfuncs import {made.name.lower()} as it", namespace)
    assert namespace["it"] is made
    assert made.name.lower() in cellfuncs.__all__
    assert made.__name__ == made.name.lower()  # type: ignore[attr-defined]


def test_find_reads_a_name_in_any_case_and_names_the_near_ones() -> None:
    assert find(" distance_luminosity ") is CATALOGUE["DISTANCE_LUMINOSITY"]
    with pytest.raises(InputError, match=r"near matches: .*DISTANCE_LUMINOSITY"):
        find("DISTANCE_LUMINOSTY")


def test_defaults_are_what_leaving_out_means() -> None:
    assert cellfuncs.distance_luminosity(0.5) == cellfuncs.distance_luminosity(0.5, "Planck18")
    for empty in (None, "", "  "):
        assert cellfuncs.distance_luminosity(0.5, empty) == cellfuncs.distance_luminosity(0.5)
        assert cellfuncs.velocity_hubble(10.0, empty) == PLANCK_H0 * 10
        assert cellfuncs.velocity_from_redshift(1.0, empty) == pytest.approx(
            0.6 * 299_792.458, rel=1e-15
        )
    whole = cellfuncs.volume_comoving(0.1)
    assert cellfuncs.volume_comoving(0.1, SKY) == pytest.approx(whole, rel=1e-15)
    assert cellfuncs.volume_comoving(0.1, SKY / 2) == pytest.approx(whole / 2, rel=1e-14)
    assert cellfuncs.magnitude_absolute(17.5, 0.05, None, 0.03) == pytest.approx(
        cellfuncs.magnitude_absolute(17.5, 0.05, 0.0, 0.0) - 0.03, rel=1e-15
    )


def test_keywords() -> None:
    assert cellfuncs.magnitude_absolute(
        z=0.05, magnitude=17.5, k_correction=0.03, cosmology="WMAP9"
    ) == cellfuncs.magnitude_absolute(17.5, 0.05, 0.0, 0.03, "WMAP9")
    assert cellfuncs.age_of_universe(cosmology="WMAP7") == cellfuncs.age_of_universe("WMAP7")


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: cellfuncs.distance_luminosity(0.5, "WMAP9", 3), r"DISTANCE_LUMINOSITY.*2.*3"),
        (lambda: cellfuncs.distance_luminosity(0.5, z=0.5), "z twice"),
        (lambda: cellfuncs.distance_luminosity(0.5, cosmolgy="WMAP9"), "cosmology"),
    ],
)
def test_a_call_with_wrong_arguments_is_a_type_error(call: Callable[[], Any], words: str) -> None:
    with pytest.raises(TypeError, match=words):
        call()


# Columns ------------------------------------------------------------------------------------------


def test_a_row_and_a_column_make_a_table() -> None:
    z = np.array([[0.01], [0.1], [1.0]])
    z_system = np.array([0.0, 0.05, 0.2, 0.5])
    table = cellfuncs.velocity_peculiar(z, z_system)
    assert table.shape == (3, 4)
    for row in range(3):
        for column in range(4):
            assert table[row, column] == cellfuncs.velocity_peculiar(
                float(z[row, 0]), float(z_system[column])
            )


def test_columns_that_do_not_fit_are_refused() -> None:
    with pytest.raises(InputError, match=r"VELOCITY_PECULIAR.*fit"):
        cellfuncs.velocity_peculiar([0.1, 0.2, 0.3], [0.1, 0.2])


@pytest.mark.parametrize("of", [list, tuple, np.array], ids=["list", "tuple", "array"])
def test_columns_of_words(of: Callable[[list[Any]], Any]) -> None:
    observed = of([6892.84, 5257.2, 5104.5, 4131.0])
    found = cellfuncs.redshift_from_line(
        observed, of(["H alpha", "[OIII]5007", "hbeta", "Ca K"]), of(["vacuum", "air", "AIR", ""])
    )
    one_by_one = [
        cellfuncs.redshift_from_line(6892.84, "H alpha"),
        cellfuncs.redshift_from_line(5257.2, "[OIII]5007", "air"),
        cellfuncs.redshift_from_line(5104.5, "H beta", "air"),
        cellfuncs.redshift_from_line(4131.0, "Ca II K"),
    ]
    assert found == pytest.approx(one_by_one, rel=1e-13, abs=0)
    velocities = cellfuncs.velocity_from_redshift(0.1, of(["radio", "optical", "relativistic"]))
    assert velocities == pytest.approx(
        [299_792.458 * 0.1 / 1.1, 29_979.2458, 299_792.458 * 0.21 / 2.21], rel=1e-14
    )


def test_a_column_of_cosmologies() -> None:
    found = cellfuncs.distance_luminosity([0.5, 0.5, 1.0], ["Planck18", "wmap9", None])
    assert found == pytest.approx(
        [
            cellfuncs.distance_luminosity(0.5),
            cellfuncs.distance_luminosity(0.5, "WMAP9"),
            cellfuncs.distance_luminosity(1.0),
        ],
        rel=1e-13,
    )


def test_a_text_result_of_a_column_is_a_column_of_texts() -> None:
    found = cellfuncs.line_nearest([6564.7, 1e7, 5008.3])
    assert found.dtype == object
    assert found.tolist() == ["H alpha", None, "[O III] 5007"]


def test_an_array_without_dimensions_is_one_number() -> None:
    found = cellfuncs.distance_luminosity(np.array(0.5))
    assert type(found) is float
    assert found == cellfuncs.distance_luminosity(0.5)
    assert cellfuncs.line_wavelength(np.array("H alpha")) == cellfuncs.line_wavelength("H alpha")


@pytest.mark.parametrize("shape", [(0,), (0, 3), (1,), (1, 1), (2, 3, 4)])
def test_shapes_stay(shape: tuple[int, ...]) -> None:
    assert cellfuncs.distance_luminosity(np.full(shape, 0.5)).shape == shape


def test_the_input_is_not_changed() -> None:
    z = np.array([0.5, -1.0, np.nan])
    cellfuncs.distance_luminosity(z)
    assert z[:2].tolist() == [0.5, -1.0]


@pytest.mark.parametrize("kind", ["int8", "uint16", "int64", "float32", "float64", ">f8"])
def test_numbers_of_any_width(kind: str) -> None:
    z = np.array([1, 2, 3], dtype=kind)
    assert cellfuncs.distance_luminosity(z) == pytest.approx(
        [cellfuncs.distance_luminosity(each) for each in (1.0, 2.0, 3.0)], rel=1e-13
    )


# The decorator ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "arguments",
    [{}, {"z": Number(meaning="z")}, {"a": Number(meaning="z"), "z": Number(meaning="z")}],
)
def test_a_definition_whose_arguments_differ_is_refused(arguments: dict[str, Number]) -> None:
    with pytest.raises(TypeError, match="differ"):

        @function(unit="", source="2031", **arguments)
        def differing(z: Any, a: Any) -> Any:
            """Not on the catalogue."""

    assert "DIFFERING" not in CATALOGUE


def test_a_default_that_is_not_allowed_is_refused() -> None:
    with pytest.raises(ValueError, match="word"):

        @function(unit="", source="2031", word=Choice(meaning="word", choices=("one", "two")))
        def misled(word: Any = "three") -> Any:
            """Not on the catalogue."""

    assert "MISLED" not in CATALOGUE
