"""Whatever is put in, what comes out is a good result or a sentence: FUNCTIONS.md, «Bad input».

The limits were typed by hand from FUNCTIONS.md; they are not read back from the catalogue.
"""

import math
import warnings
from collections.abc import Callable
from datetime import date, datetime
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

import cellfuncs as cf
from cellfuncs import CATALOGUE, CellError, DomainError, Function, InputError, MissingInput

C = 299_792.458
ALLOWED_ERRORS = (DomainError, InputError, MissingInput)

every_function = pytest.mark.parametrize("made", CATALOGUE.values(), ids=lambda made: made.name)
quick = settings(
    max_examples=30,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)

OBSERVED = (101.287, -16.716, 2_461_398.6458, -70.4, -24.6, 2600.0)

# A call of each function that works, typed by hand.
WORKS: dict[str, tuple[Any, ...]] = {
    "LINE_WAVELENGTH": ("H alpha", "air"),
    "LINE_NEAREST": (6890.0, 0.0497, "vacuum", 10.0),
    "WAVELENGTH_OBSERVED": (6564.61, 0.05),
    "WAVELENGTH_EMITTED": (6892.84, 0.05),
    "WAVELENGTH_VACUUM": (5006.84,),
    "WAVELENGTH_AIR": (5008.24,),
    "WAVELENGTH_FROM_FREQUENCY": (115.2712018,),
    "FREQUENCY_FROM_WAVELENGTH": (2.6e7,),
    "REDSHIFT_FROM_WAVELENGTH": (6892.84, 6564.61),
    "REDSHIFT_FROM_FREQUENCY": (109.78, 115.27),
    "REDSHIFT_FROM_LINE": (6892.84, "H alpha", "air"),
    "REDSHIFT_FROM_VELOCITY": (1500.0, "radio"),
    "REDSHIFT_COMBINED": (0.05, 0.001),
    "REDSHIFT_RELATIVE": (0.051, 0.05),
    "VELOCITY_FROM_REDSHIFT": (0.05, "optical"),
    "VELOCITY_CONVERTED": (1500.0, "radio", "optical"),
    "VELOCITY_SUM": (1.5e5, 2e5),
    "VELOCITY_PECULIAR": (0.051, 0.05),
    "VELOCITY_HUBBLE": (100.0, 70.0),
    "DOPPLER_FACTOR": (1.5e5,),
    "DISTANCE_HUBBLE": (7000.0, 70.0),
    "DISTANCE_COMOVING": (0.5, "WMAP9"),
    "DISTANCE_TRANSVERSE": (0.5, "WMAP9"),
    "DISTANCE_LUMINOSITY": (0.5, "WMAP9"),
    "DISTANCE_ANGULAR": (0.5, "WMAP9"),
    "DISTANCE_LIGHT_TRAVEL": (0.5, "WMAP9"),
    "DISTANCE_MODULUS": (0.5, "WMAP9"),
    "DISTANCE_FROM_MODULUS": (31.1,),
    "MODULUS_FROM_DISTANCE": (16.5,),
    "DISTANCE_FROM_PARALLAX": (768.07,),
    "REDSHIFT_FROM_DISTANCE": (500.0, "comoving", "WMAP9"),
    "SCALE_TRANSVERSE": (0.5, "WMAP9"),
    "VOLUME_COMOVING": (0.1, 100.0, "WMAP9"),
    "MAGNITUDE_ABSOLUTE": (17.5, 0.05, 0.12, 0.03, "WMAP9"),
    "AGE_AT_REDSHIFT": (2.0, "WMAP9"),
    "AGE_OF_UNIVERSE": ("WMAP9",),
    "TIME_LOOKBACK": (2.0, "WMAP9"),
    "TIME_HUBBLE": ("WMAP9",),
    "REDSHIFT_FROM_AGE": (3.3, "WMAP9"),
    "REDSHIFT_FROM_LOOKBACK": (10.0, "WMAP9"),
    "EXPANSION_RATE": (1.0, "WMAP9"),
    "DECELERATION": (0.0, "WMAP9"),
    "EXPANSION_FATE": ("WMAP9",),
    "UNITS_CONVERTED": (500.7, "nm", "Angstrom"),
    "COSMOLOGY_VALUE": ("H0", "WMAP9"),
    "MEAN_WEIGHTED": ([0.0501, None, 0.0503], [0.0002, 0.0001, 0.0001], "sigma"),
    "VELOCITY_DISPERSION": ([6900.0, 7150.0, 6420.0, "star", 7010.0], 0.02, "gapper", "sigma"),
    "HUBBLE_FIT": ([10.0, 20.0, 30.0], [710.0, 1380.0, 2150.0], None, "slope", False),
    "UNCERTAINTY": ("DISTANCE_LUMINOSITY", [0.5, "WMAP9"], [0.01, None]),
    "MEMBERSHIP": (7010.0, 6850.0, 290.0, 3.0),
    "REDSHIFT_SOLVED": ([6892.84, 5105.8, 5258.65], "vacuum", 0.0, 7.0, "z"),
    "VELOCITY_BARYCENTRIC": OBSERVED,
    "VELOCITY_HELIOCENTRIC": OBSERVED,
    "REDSHIFT_BARYCENTRIC": (0.0512, *OBSERVED),
    "VELOCITY_IN_FRAME": (1250.0, 187.706, 12.391, "barycentric", "cmb"),
    "TIME_JULIAN": (46_380.1458,),
    "TIME_BARYCENTRIC": (2_461_398.6458, 101.287, -16.716, -70.4, -24.6, 2600.0),
    "TIME_SIDEREAL": (2_461_398.6458, -70.4),
    "ANGLE_HOUR": OBSERVED,
    "ALTITUDE": OBSERVED,
    "AIRMASS": OBSERVED,
    "ANGLE_FROM_TEXT": ("06h45m08.9s", True),
    "REASON": ("DISTANCE_LUMINOSITY", 0.5),
    "PROVENANCE": ("constants",),
}

# What takes a range as one thing, by position: a range there makes no column of results.
WHOLE: dict[str, set[int]] = {
    "MEAN_WEIGHTED": {0, 1},
    "VELOCITY_DISPERSION": {0},
    "HUBBLE_FIT": {0, 1, 2},
    "UNCERTAINTY": {1, 2},
    "REDSHIFT_SOLVED": {0},
}


def test_every_function_has_a_call_here_that_works() -> None:
    assert set(WORKS) == set(CATALOGUE)
    for name, arguments in WORKS.items():
        assert good_scalar(CATALOGUE[name], CATALOGUE[name](*arguments))


def good_scalar(made: Function, result: Any) -> bool:
    if made.unit == "text" or (made.gives_text and isinstance(result, str)):
        return isinstance(result, str) and result.strip() != ""
    return type(result) is float and math.isfinite(result)


def good(made: Function, result: Any) -> bool:
    """Tell whether a result is a good scalar, or an array with NaN (None) where there is none."""
    if not isinstance(result, np.ndarray):
        return good_scalar(made, result)
    if made.gives_text:
        return all(each is None or good_scalar(made, each) for each in result.reshape(-1).tolist())
    return result.dtype == np.float64 and not bool(np.isinf(result).any())


# Anything at all ----------------------------------------------------------------------------------

scalars: st.SearchStrategy[Any] = st.one_of(
    st.floats(),
    st.sampled_from(
        [math.nan, math.inf, -math.inf, -0.0, 0.0, 5e-324, -5e-324, 1e-310, 1e308, -1e308, -1.0]
    ),
    st.integers(-(10**30), 10**30),
    st.sampled_from([10**400, -(10**400), 2**63, 2**64]),
    st.booleans(),
    st.none(),
    st.text(max_size=12),
    st.sampled_from(
        ["", " ", "\u00a0", "\t\n", "0.5", "1e3", "nan", "inf", "-1", "\x00", "x" * 999]
    ),
    st.sampled_from(["H alpha", "Planck18", "air", "radio", "km/s", "H0", "DISTANCE_LUMINOSITY"]),
    st.sampled_from(["𝟙", "²", "٣", "*", "=1+1"]),
    st.binary(max_size=4),
    st.complex_numbers(),
    st.datetimes(),
    st.dates(),
    st.decimals(allow_nan=False, allow_infinity=True),
    st.fractions(),
    st.sampled_from(
        [
            np.float64("nan"),
            np.float32(0.5),
            np.float64(-1.0),
            np.int8(-3),
            np.uint64(2**64 - 1),
            np.bool_(True),
            np.str_("H alpha"),
            np.datetime64("2031-03-14"),
            np.timedelta64(3, "s"),
            np.complex128(1j),
            np.ma.masked,
            Decimal("NaN"),
            Decimal("1e99999"),
            Fraction(10**400, 1),
            object(),
            Ellipsis,
            NotImplemented,
            int,
            {},
            {"H0": 70},
            {1: 2},
            {"z": 0.5},
            set(),
            lambda: 0.5,
        ]
    ),
)
arrays: st.SearchStrategy[Any] = st.one_of(
    st.lists(scalars, max_size=4),
    st.lists(scalars, max_size=3).map(tuple),
    st.lists(st.lists(scalars, max_size=3), max_size=3),
    st.lists(st.floats(), max_size=5).map(np.array),
    st.lists(st.floats(), min_size=4, max_size=4).map(lambda few: np.reshape(few, (2, 2))),
    st.lists(st.integers(-5, 10), max_size=5).map(lambda few: np.array(few, dtype=np.int64)),
    st.lists(st.one_of(st.none(), st.text(max_size=3), st.floats()), max_size=4).map(
        lambda few: np.array(few, dtype=object)
    ),
    st.lists(st.text(max_size=5), max_size=4).map(lambda few: np.array(few, dtype=str)),
    st.floats().map(np.array),
    st.sampled_from(
        [
            np.array([]),
            np.empty((0, 3)),
            np.ma.array([0.5, 0.6], mask=[True, False]),
            np.ma.array([1, 2], mask=[False, True]),
            np.array([True, False]),
            np.array([1j, 0.5]),
            np.array(["2031-03-14"], dtype="datetime64[D]"),
            np.array([(1, 2.0)], dtype=[("a", int), ("b", float)]),
            np.array([b"x"]),
            np.arange(24.0).reshape(2, 3, 4),
            np.array([[0.5, None], ["x", 1.0]], dtype=object),
            [["H0", 70], ["Om0", 0.3]],
            range(3),
            [[[[]]]],
            [[1, 2], [3]],
        ]
    ),
)
anything = st.one_of(scalars, arrays)


@every_function
@quick
@given(data=st.data())
def test_one_bad_argument(made: Function, data: st.DataObject) -> None:
    position = data.draw(st.integers(0, len(WORKS[made.name]) - 1))
    arguments = list(WORKS[made.name])
    arguments[position] = data.draw(anything)
    ends_well(made, arguments)


@every_function
@quick
@given(data=st.data())
def test_every_argument_bad(made: Function, data: st.DataObject) -> None:
    count = data.draw(st.integers(0, len(WORKS[made.name]) + 1))
    ends_well(made, data.draw(st.lists(anything, min_size=count, max_size=count)))


def ends_well(made: Function, arguments: list[Any]) -> None:
    result, error = outcome(made, arguments)
    if error is None:
        assert good(made, result)
    elif isinstance(error, TypeError):
        too_many = len(arguments) > len(made.arguments) and not made.variadic
        assert too_many, f"a TypeError that a caller cannot foresee: {error}"
        assert made.name in str(error)
    else:
        assert "\n" not in str(error)
        assert len(str(error)) < 2000
        assert error.shown in ("#NUM!", "#VALUE!", "#N/A")
        assert str(error).startswith(f"{made.name}: ")


def outcome(made: Function, arguments: list[Any]) -> tuple[Any, Any]:
    """Give the result, or the error that a caller has to foresee."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # a cell has no place to show one
        try:
            return made(*arguments), None
        except (*ALLOWED_ERRORS, TypeError) as error:
            return None, error


# What is wrong, and what it gives -----------------------------------------------------------------

Z_SPECTRAL = [-1.0, -1.5, -1e300]
Z_DISTANT = [-1e-9, -0.5, -1.0, -2.0, 1.1e6]
NOT_POSITIVE = [0.0, -1e-300, -5.0]
NEGATIVE = [-1e-9, -1.0, -1e300]
FASTER = [C, -C, C * (1 + 1e-12), 3e5, -1e300]
SHORT_OF_AIR = [0.0, -1.0, 1.0, 1215.67, 1990.0]

# name, position of the argument, its name, numbers refused, numbers taken
LIMITS: list[tuple[str, int, str, list[float], list[float]]] = [
    ("LINE_NEAREST", 0, "wavelength", NOT_POSITIVE, [6890.0]),
    ("LINE_NEAREST", 1, "z", Z_SPECTRAL, [0.0497]),
    ("LINE_NEAREST", 3, "window", [-1e-9, -1.0], [1e-3 + 2, 500.0]),
    ("WAVELENGTH_OBSERVED", 0, "rest", NOT_POSITIVE, [1e-300, 1e-9, 1e12]),
    ("WAVELENGTH_OBSERVED", 1, "z", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("WAVELENGTH_EMITTED", 0, "observed", NOT_POSITIVE, [1e-9, 1e12]),
    ("WAVELENGTH_EMITTED", 1, "z", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("WAVELENGTH_VACUUM", 0, "air", SHORT_OF_AIR, [2000.0, 2000.1, 1e9]),
    ("WAVELENGTH_AIR", 0, "vacuum", [*SHORT_OF_AIR, 1999.999999], [2000.0, 1e9]),
    ("WAVELENGTH_FROM_FREQUENCY", 0, "frequency", NOT_POSITIVE, [1e-9, 1e12]),
    ("FREQUENCY_FROM_WAVELENGTH", 0, "wavelength", NOT_POSITIVE, [1e-9, 1e12]),
    ("REDSHIFT_FROM_WAVELENGTH", 0, "observed", NOT_POSITIVE, [1e-9, 1e12]),
    ("REDSHIFT_FROM_WAVELENGTH", 1, "rest", NOT_POSITIVE, [1e-9, 1e12]),
    ("REDSHIFT_FROM_FREQUENCY", 0, "observed", NOT_POSITIVE, [1e-9, 1e12]),
    ("REDSHIFT_FROM_FREQUENCY", 1, "rest", NOT_POSITIVE, [1e-9, 1e12]),
    ("REDSHIFT_FROM_LINE", 0, "observed", SHORT_OF_AIR, [2000.0, 1e9]),
    ("REDSHIFT_COMBINED", 0, "z1", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("REDSHIFT_COMBINED", 1, "z2", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("REDSHIFT_RELATIVE", 0, "z", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("REDSHIFT_RELATIVE", 1, "z_reference", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("VELOCITY_FROM_REDSHIFT", 0, "z", Z_SPECTRAL, [-1 + 1e-12, 0.0, 1e9]),
    ("VELOCITY_SUM", 0, "v1", FASTER, [0.0, -299_792.0, 299_792.0]),
    ("VELOCITY_SUM", 1, "v2", FASTER, [0.0, -299_792.0, 299_792.0]),
    ("VELOCITY_PECULIAR", 0, "z", Z_SPECTRAL, [-0.01, 0.0, 1e9]),
    ("VELOCITY_PECULIAR", 1, "z_system", Z_SPECTRAL, [-0.01, 0.0, 1e9]),
    ("VELOCITY_HUBBLE", 0, "distance", NEGATIVE, [0.0, 1e4]),
    ("VELOCITY_HUBBLE", 1, "h0", NOT_POSITIVE, [1e-3, 500.0]),
    ("DOPPLER_FACTOR", 0, "velocity", FASTER, [0.0, -299_792.0, 299_792.0]),
    ("DISTANCE_HUBBLE", 0, "velocity", NEGATIVE, [0.0, 7000.0]),
    ("DISTANCE_HUBBLE", 1, "h0", NOT_POSITIVE, [1e-3, 500.0]),
    ("DISTANCE_COMOVING", 0, "z", Z_DISTANT, [0.0, -0.0, 1e-12, 1100.0, 1e5]),
    ("DISTANCE_TRANSVERSE", 0, "z", Z_DISTANT, [0.0, -0.0, 1e-12, 1100.0, 1e5]),
    ("DISTANCE_LUMINOSITY", 0, "z", Z_DISTANT, [0.0, -0.0, 1e-12, 1100.0, 1e5]),
    ("DISTANCE_ANGULAR", 0, "z", Z_DISTANT, [0.0, -0.0, 1e-12, 1100.0, 1e5]),
    ("DISTANCE_LIGHT_TRAVEL", 0, "z", Z_DISTANT, [0.0, -0.0, 1e-12, 1100.0, 1e5]),
    ("DISTANCE_MODULUS", 0, "z", [*Z_DISTANT, 0.0, -0.0], [1e-12, 1100.0, 1e5]),
    ("MODULUS_FROM_DISTANCE", 0, "distance", NOT_POSITIVE, [1e-9, 1e5]),
    ("DISTANCE_FROM_PARALLAX", 0, "parallax", NOT_POSITIVE, [1e-3, 768.07]),
    ("REDSHIFT_FROM_DISTANCE", 0, "distance", NEGATIVE, [0.0, 1e-6, 9000.0]),
    ("SCALE_TRANSVERSE", 0, "z", Z_DISTANT, [0.0, 1e-12, 1100.0, 1e5]),
    ("VOLUME_COMOVING", 0, "z", Z_DISTANT, [0.0, 1e-12, 1100.0, 1e5]),
    ("VOLUME_COMOVING", 1, "area", [*NOT_POSITIVE, 41_253.0, 5e4], [1e-6, 41_252.9]),
    ("MAGNITUDE_ABSOLUTE", 1, "z", [*Z_DISTANT, 0.0], [1e-12, 1100.0]),
    ("AGE_AT_REDSHIFT", 0, "z", Z_DISTANT, [0.0, 1100.0, 1e5]),
    ("TIME_LOOKBACK", 0, "z", Z_DISTANT, [0.0, 1100.0, 1e5]),
    # WMAP9: 13.772 Gyr (Hinshaw et al. 2013, ApJS 208, 19, table 4; 13.75 as astropy realises it)
    ("REDSHIFT_FROM_AGE", 0, "age", [*NOT_POSITIVE, 13.9, 1e300], [1e-3, 13.7]),
    ("REDSHIFT_FROM_LOOKBACK", 0, "time", [*NEGATIVE, 13.9, 1e300], [0.0, 13.7]),
    ("EXPANSION_RATE", 0, "z", Z_SPECTRAL, [0.0, 1100.0]),
    ("DECELERATION", 0, "z", Z_SPECTRAL, [0.0, 1100.0]),
    ("VELOCITY_DISPERSION", 1, "z_system", Z_SPECTRAL, [-0.001, 0.0, 7.0]),
    ("MEMBERSHIP", 2, "sigma", NOT_POSITIVE, [1e-300, 53.3, 53.4, 1e9]),
    ("MEMBERSHIP", 3, "times", NOT_POSITIVE, [1e-300, 0.5, 3.0, 1e9]),
    ("REDSHIFT_SOLVED", 2, "z_min", [*Z_SPECTRAL, 7.0, 8.0], [-0.9, 0.0, 0.04]),
    ("REDSHIFT_SOLVED", 3, "z_max", [*Z_SPECTRAL, 0.0, -0.5], [0.06, 7.0, 1e3]),
]
RA = ([-1e-9, -15.0, 360.000_001, 400.0], [0.0, 101.287, 360.0])
DEC = ([-90.000_001, 90.000_001, 1e300], [-89.9, 0.0, 90.0])
LONGITUDE = ([-180.000_001, -200.0, 360.000_001], [-180.0, 0.0, 289.6, 360.0])
LATITUDE = ([95.0, -90.000_001, 90.000_001], [-90.0, 0.0, 90.0])
HEIGHT = ([-500.001, 20_001.0, 2.6e6], [-430.0, 0.0, 5000.0])
# 1960 to 2099: a spreadsheet's serials, then Julian dates
UTC = (
    [-1.0, 0.0, 21_915.99, 73_051.0, 999_999.0, 2_436_934.49, 2_488_069.5, 20_261_224.0],
    [21_916.0, 73_050.99, 2_436_934.5, 2_488_069.49],
)
for name, first in [
    *((name, 0) for name in ("VELOCITY_BARYCENTRIC", "VELOCITY_HELIOCENTRIC")),
    *((name, 0) for name in ("ANGLE_HOUR", "ALTITUDE")),
    ("REDSHIFT_BARYCENTRIC", 1),
]:
    LIMITS += [
        (name, first, "ra", *RA),
        (name, first + 1, "dec", *DEC),
        (name, first + 2, "utc", *UTC),
        (name, first + 3, "longitude", *LONGITUDE),
        (name, first + 4, "latitude", *LATITUDE),
        (name, first + 5, "height", *HEIGHT),
    ]
LIMITS += [
    ("REDSHIFT_BARYCENTRIC", 0, "z", Z_SPECTRAL, [-0.001, 0.0, 7.0]),
    ("VELOCITY_IN_FRAME", 1, "ra", *RA),
    ("VELOCITY_IN_FRAME", 2, "dec", *DEC),
    ("TIME_JULIAN", 0, "utc", *UTC),
    ("TIME_BARYCENTRIC", 0, "utc", *UTC),
    ("TIME_BARYCENTRIC", 1, "ra", *RA),
    ("TIME_BARYCENTRIC", 2, "dec", *DEC),
    ("TIME_BARYCENTRIC", 3, "longitude", *LONGITUDE),
    ("TIME_BARYCENTRIC", 4, "latitude", *LATITUDE),
    ("TIME_BARYCENTRIC", 5, "height", *HEIGHT),
    ("TIME_SIDEREAL", 0, "utc", *UTC),
    ("TIME_SIDEREAL", 1, "longitude", *LONGITUDE),
    ("AIRMASS", 0, "ra", RA[0], [80.0, 101.287, 120.0]),
    ("AIRMASS", 1, "dec", DEC[0], [-90.0, 0.0, 30.0]),
    ("AIRMASS", 3, "longitude", LONGITUDE[0], [-70.4, 289.6, -100.0]),
    ("AIRMASS", 4, "latitude", LATITUDE[0], [-80.0, 0.0, 30.0]),
    ("AIRMASS", 5, "height", *HEIGHT),
]
every_limit = pytest.mark.parametrize(
    ("name", "position", "argument", "refused", "taken"),
    LIMITS,
    ids=[f"{name}-{argument}" for name, _, argument, _, _ in LIMITS],
)


def with_one(name: str, position: int, value: Any) -> list[Any]:
    arguments = list(WORKS[name])
    arguments[position] = value
    return arguments


@every_limit
def test_a_number_outside_the_domain(
    name: str, position: int, argument: str, refused: list[float], taken: list[float]
) -> None:
    made = CATALOGUE[name]
    for value in [*refused, math.inf, -math.inf]:
        with pytest.raises(DomainError) as raised:
            made(*with_one(name, position, value))
        message = str(raised.value)
        assert message.startswith(f"{name}: ")
        assert argument in message
        assert any(shown in message for shown in spellings(value)), message
        assert says_what_is_allowed(message)
        assert raised.value.shown == "#NUM!"


def spellings(value: float) -> list[str]:
    return [str(value), f"{value:.10g}", f"{value:g}", f"{value:.6f}"]


def says_what_is_allowed(message: str) -> bool:
    return any(
        words in message for words in ("must be", "below 2000 Å", "Gyr old", "no finite result")
    )


@every_limit
def test_a_number_inside_the_domain(
    name: str, position: int, argument: str, refused: list[float], taken: list[float]
) -> None:
    made = CATALOGUE[name]
    for value in taken:
        assert good_scalar(made, made(*with_one(name, position, value)))


@every_limit
def test_a_column_with_numbers_outside_the_domain(
    name: str, position: int, argument: str, refused: list[float], taken: list[float]
) -> None:
    made = CATALOGUE[name]
    empty = [] if made.arguments[position].optional else [None]  # left out: the default
    column: list[Any] = [taken[0], *refused, math.inf, -math.inf, math.nan, *empty, taken[-1]]
    found = made(*with_one(name, position, column))
    assert found.shape == (len(column),)
    there = [each is not None and each == each for each in found.tolist()]
    assert there == [True, *[False] * (len(column) - 2), True]
    assert same(found[0], made(*with_one(name, position, taken[0])))
    assert same(found[-1], made(*with_one(name, position, taken[-1])))


@pytest.mark.parametrize(
    ("convention", "refused", "taken"),
    [
        ("relativistic", FASTER, [0.0, 299_792.0, -299_792.0]),
        ("optical", [-C, -3e5], [0.0, -299_792.0, C, 1e7]),
        ("radio", [C, 3e5], [0.0, 299_792.0, -C, -1e7]),
    ],
)
def test_reach_of_the_velocity_conventions(
    convention: str, refused: list[float], taken: list[float]
) -> None:
    """z > -1 is what each must come to; radio velocities of ever larger z come near c."""
    for velocity in refused:
        for call in (
            lambda: cf.redshift_from_velocity(velocity, convention),  # noqa: B023
            lambda: cf.velocity_converted(velocity, convention, "optical"),  # noqa: B023
        ):
            with pytest.raises(DomainError, match=r"velocity.*km"):
                call()
        assert np.isnan(cf.redshift_from_velocity([velocity], convention)).all()
    for velocity in taken:
        assert cf.redshift_from_velocity(velocity, convention) > -1


NUMBER_ARGUMENTS = [
    (name, position)
    for name, arguments in WORKS.items()
    for position, value in enumerate(arguments)
    if isinstance(value, float) and name != "REASON"
]
WORD_ARGUMENTS = [
    (name, position)
    for name, arguments in WORKS.items()
    for position, value in enumerate(arguments)
    if isinstance(value, str) and name != "ANGLE_FROM_TEXT"
]


@pytest.mark.parametrize(("name", "position"), NUMBER_ARGUMENTS)
@pytest.mark.parametrize("text", ["far", "0.5", "1e3", "½", "#N/A", True, b"1", 1j])
def test_text_where_a_number_belongs(name: str, position: int, text: Any) -> None:
    made = CATALOGUE[name]
    with pytest.raises(InputError, match=f"^{name}: {made.arguments[position].name} is "):
        made(*with_one(name, position, text))
    with pytest.raises(InputError, match=f"^{name}: {made.arguments[position].name} is "):
        made(*with_one(name, position, [WORKS[name][position], None, text]))


@pytest.mark.parametrize(("name", "position"), WORD_ARGUMENTS)
def test_an_unknown_word_is_refused_with_what_is_near(name: str, position: int) -> None:
    made = CATALOGUE[name]
    word = WORKS[name][position]
    wrong = word[:-1] + "qq"
    for value in (wrong, [word, wrong]):
        if name == "REASON" and not isinstance(value, str):
            continue
        with pytest.raises(InputError) as raised:
            made(*with_one(name, position, value))
        message = str(raised.value)
        assert message.startswith(f"{name}: ")
        assert wrong in message
        assert "near matches" in message or "known:" in message or "spelt like" in message
    assert raised.value.shown == "#VALUE!"


@pytest.mark.parametrize(
    ("call", "near"),
    [
        (lambda: cf.line_wavelength("H alpa"), "H alpha"),
        (lambda: cf.line_wavelength("H alpha", "vacum"), "vacuum"),
        (lambda: cf.velocity_from_redshift(0.1, "optcal"), "optical"),
        (lambda: cf.distance_luminosity(0.1, "Planck19"), "Planck18"),
        (lambda: cf.distance_luminosity(0.1, {"H0": 70, "Omega0": 0.3}), "Om0"),
        (lambda: cf.redshift_from_distance(10.0, "luminous"), "luminosity"),
        (lambda: cf.units_converted(1.0, "Angstrm", "nm"), "Angstrom"),
        (lambda: cf.cosmology_value("Omega0"), "Om0"),
        (lambda: cf.reason("DISTANCE_LUMINOUS"), "DISTANCE_LUMINOSITY"),
        (lambda: cf.provenance("verson"), "version"),
    ],
)
def test_near_matches(call: Callable[[], Any], near: str) -> None:
    with pytest.raises(InputError, match=rf"near matches: .*{near}"):
        call()


@every_function
def test_an_empty_required_argument_is_missing(made: Function) -> None:
    for position, argument in enumerate(made.arguments):
        if argument.optional or position >= len(WORKS[made.name]) or made.name == "REASON":
            continue
        for empty in (None, math.nan, "", "   ", np.float64("nan"), np.ma.masked):
            with pytest.raises(MissingInput, match=f"^{made.name}: {argument.name} is empty"):
                made(*with_one(made.name, position, empty))
        with pytest.raises(MissingInput) as raised:
            made(*WORKS[made.name][:position])
        assert raised.value.shown == "#N/A"
        if position in WHOLE.get(made.name, ()):
            for nothing in ([None, ""], [[math.nan], [None]], np.full(3, np.nan)):
                with pytest.raises(MissingInput, match=f"^{made.name}: .* is empty"):
                    made(*with_one(made.name, position, nothing))
            continue
        column = made(*with_one(made.name, position, [None, WORKS[made.name][position]]))
        assert column[0] is None or column[0] != column[0]
        assert same(column[1], made(*WORKS[made.name]))


@pytest.mark.parametrize(("name", "position"), NUMBER_ARGUMENTS)
def test_masked_is_missing(name: str, position: int) -> None:
    made = CATALOGUE[name]
    value = WORKS[name][position]
    if made.arguments[position].optional:
        return
    column = np.ma.array([value, value, value], mask=[False, True, False])
    found = made(*with_one(name, position, column))
    assert not isinstance(found, np.ma.MaskedArray)
    assert [each is not None and each == each for each in found.tolist()] == [True, False, True]


# One row and a column are one thing ---------------------------------------------------------------


def same(one: Any, other: Any) -> bool:
    if isinstance(one, str) or isinstance(other, str):
        return bool(one == other)
    return bool(abs(one - other) <= 1e-12 * abs(other))


cells = st.one_of(
    st.floats(-2.0, 20.0),
    st.floats(1e-6, 1e6),
    st.floats(-4e5, 4e5),
    st.sampled_from([None, math.nan, math.inf, 0.0, -1.0, 1100.0, 2000.0, C]),
)


@every_function
@quick
@given(data=st.data())
def test_a_column_gives_what_its_rows_give(made: Function, data: st.DataObject) -> None:
    if made.name == "REASON":
        return
    positions = [
        position for position, value in enumerate(WORKS[made.name]) if isinstance(value, float)
    ]
    arguments: list[Any] = list(WORKS[made.name])
    columns = set()
    length = data.draw(st.integers(1, 5))
    for position in positions:
        if data.draw(st.booleans()):
            own = st.just(arguments[position])
            values = st.lists(st.one_of(cells, own), min_size=length, max_size=length)
            arguments[position] = data.draw(values)
            columns.add(position)
    words = [
        position
        for position, value in enumerate(WORKS[made.name])
        if isinstance(value, str) and value in ALTERNATIVES
    ]
    for position in words:
        if data.draw(st.booleans()):
            each = st.sampled_from([arguments[position], *ALTERNATIVES[arguments[position]]])
            arguments[position] = data.draw(st.lists(each, min_size=length, max_size=length))
            columns.add(position)
    if not columns:
        return
    found = made(*arguments)
    assert found.shape == (length,)
    for row in range(length):
        one = [value[row] if at in columns else value for at, value in enumerate(arguments)]
        here = found[row]
        alone, error = outcome(made, one)
        if error is not None:
            assert here is None or here != here, (one, here, str(error))
        else:
            assert here is not None, one
            assert close_enough(made, one, here, alone), (one, here, alone)


ALTERNATIVES = {
    "H alpha": ["[OIII]5007", "ca k"],
    "air": ["vacuum", " AIR"],
    "vacuum": ["air"],
    "radio": ["optical", "Relativistic"],
    "optical": ["radio"],
    "comoving": ["luminosity", "light-travel", "hubble"],
    "WMAP9": ["Planck18", "planck13"],
    "H0": ["Om0", "m_nu"],
    "gapper": ["standard", "Biweight"],
    "sigma": ["count"],
    "slope": ["intercept", "scatter"],
    "z": ["lines", "chance"],
    "DISTANCE_LUMINOSITY": ["distance_comoving", "AGE_AT_REDSHIFT"],
    "barycentric": ["lsrk", "LSRD", "galactocentric"],
    "cmb": ["local-group", " CMB "],
    "06h45m08.9s": ["6 45 9", "12:00", "101.29d"],
}


def close_enough(made: Function, row: list[Any], here: Any, alone: Any) -> bool:
    if isinstance(alone, str):
        return bool(here == alone)
    # A magnitude is a difference of two of some tens: near 0 its last digits are theirs.
    size = max([abs(alone), *(abs(each) for each in row if isinstance(each, float))])
    scale = size if made.unit in ("mag", "") else abs(alone)
    return bool(abs(here - alone) <= 1e-12 * scale)


# The cosmology ------------------------------------------------------------------------------------

MINE = {"H0": 70.0, "Om0": 0.3}
PLAIN = cf.distance_luminosity(0.5, MINE)


@pytest.mark.parametrize(
    "form",
    [
        {"h0": 70, "OM0": 0.3},
        {" H0 ": 70.0, "Om0": 0.3, "Ode0": None, "w0": ""},
        [["H0", 70.0], ["Om0", 0.3]],
        (("Om0", 0.3), ("H0", 70)),
        [("H0", 70.0), ("Om0", 0.3), (None, None), ("", "")],
        np.array([["H0", 70.0], ["Om0", 0.3]], dtype=object),
        {"H0": np.float64(70), "Om0": np.float32(0.3).item() * 0 + 0.3, "w0": -1, "wa": 0},
        {"H0": 70.0, "Om0": 0.3, "Tcmb0": 0.0, "Neff": 3.04, "m_nu": 0.0},
        {"H0": Decimal("70"), "Om0": Fraction(3, 10)},
    ],
)
def test_forms_of_ones_own_cosmology(form: Any) -> None:
    assert same(cf.distance_luminosity(0.5, form), PLAIN)
    column = cf.distance_luminosity([0.5, 0.5], form)
    assert same(column[0], PLAIN)
    assert same(column[1], PLAIN)


@pytest.mark.parametrize("name", ["Planck18", "planck18", " PLANCK18 ", np.str_("Planck18"), None])
def test_forms_of_a_published_name(name: Any) -> None:
    assert cf.distance_luminosity(0.5, name) == cf.distance_luminosity(0.5)


@pytest.mark.parametrize(
    "form", [0.06, [0.02, 0.02, 0.02], (0.02, 0.02, 0.02), "0.02, 0.02,0.02", np.full(3, 0.02)]
)
def test_forms_of_the_neutrino_masses(form: Any) -> None:
    """One mass is that of each kind (astropy's way); three are one each."""
    sum_of = 0.18 if isinstance(form, float) else 0.06
    mine = {**MINE, "Tcmb0": 2.7255, "m_nu": form}
    assert same(cf.cosmology_value("m_nu", mine), sum_of)
    assert same(cf.cosmology_value("m_nu", list(mine.items())), sum_of)


@pytest.mark.parametrize(
    ("wrong", "error", "words"),
    [
        ({"Om0": 0.3}, MissingInput, "H0"),
        ({"H0": None, "Om0": 0.3}, MissingInput, "H0"),
        ({"H0": math.nan, "Om0": 0.3}, MissingInput, "H0"),
        ({"H0": 70.0}, MissingInput, "Om0"),
        ({}, MissingInput, "H0"),
        ({"H0": -70.0, "Om0": 0.3}, DomainError, "H0 is -70"),
        ({"H0": 0.0, "Om0": 0.3}, DomainError, "H0 is 0"),
        ({"H0": math.inf, "Om0": 0.3}, DomainError, "H0 is inf"),
        ({"H0": 10**400, "Om0": 0.3}, DomainError, "H0"),
        ({"H0": 70.0, "Om0": -0.1}, DomainError, "Om0 is -0.1"),
        ({**MINE, "Tcmb0": -1.0}, DomainError, "Tcmb0 is -1"),
        ({**MINE, "Neff": -1.0}, DomainError, "Neff is -1"),
        ({**MINE, "m_nu": -0.1}, DomainError, "m_nu is -0.1"),
        ({"H0": "seventy", "Om0": 0.3}, InputError, "H0 is 'seventy'"),
        ({"H0": "70", "Om0": 0.3}, InputError, "H0 is '70'"),
        ({"H0": True, "Om0": 0.3}, InputError, "H0 is True"),
        ({"H0": [70.0], "Om0": 0.3}, InputError, "H0"),
        ({**MINE, "w": -1.0}, InputError, "'w' is not a parameter"),
        ({**MINE, "Omega_m": 0.3}, InputError, "Om0"),
        ({**MINE, "h0": 71.0}, InputError, "twice"),
        ({**MINE, "m_nu": [0.1, 0.2]}, InputError, "2 masses"),
        ({**MINE, "m_nu": "a, b"}, InputError, "m_nu is 'a, b'"),
        ([["H0", 70.0, 1.0], ["Om0", 0.3, 1.0]], InputError, "two columns"),
        ([[1.0, 70.0]], InputError, "1.0"),
        (5.0, InputError, "two columns"),
        (True, InputError, "two columns"),
        ("Planck", InputError, "near matches"),
    ],
)
def test_a_wrong_cosmology(wrong: Any, error: type[CellError], words: str) -> None:
    for call in (cf.distance_luminosity, cf.age_at_redshift, cf.expansion_rate):
        with pytest.raises(error, match=words) as raised:
            call(0.5, wrong)
        assert type(raised.value) is error
        assert str(raised.value).startswith(f"{call.name}: ")


@pytest.mark.parametrize(
    "wrong", [{"H0": -70.0, "Om0": 0.3}, {"Om0": 0.3}, [["H0", 0.0], ["Om0", 0.3]]]
)
def test_a_column_with_a_cosmology_that_gives_nothing(wrong: Any) -> None:
    assert np.isnan(cf.distance_luminosity([0.5, 1.0], wrong)).all()


def test_a_column_of_cosmologies_with_an_unknown_one() -> None:
    with pytest.raises(InputError, match="Planck19"):
        cf.distance_luminosity([0.5, 0.5], ["Planck18", "Planck19"])


@settings(max_examples=8, deadline=None, phases=[Phase.explicit, Phase.generate])
@given(
    h0=st.floats(1e-3, 1e5),
    om0=st.floats(0.0, 50.0),
    ode0=st.one_of(st.none(), st.floats(-20.0, 20.0)),
    w0=st.floats(-5.0, 3.0),
    wa=st.floats(-5.0, 5.0),
    tcmb0=st.one_of(st.just(0.0), st.floats(0.1, 100.0)),
    z=st.one_of(st.floats(0.0, 20.0), st.floats(0.0, 1e6)),
)
def test_any_universe_ends_well(  # type: ignore[no-untyped-def]
    h0, om0, ode0, w0, wa, tcmb0, z
) -> None:
    given_set = {"H0": h0, "Om0": om0, "Ode0": ode0, "w0": w0, "wa": wa, "Tcmb0": tcmb0}
    for made in CATALOGUE.values():
        if made.arguments[-1].name != "cosmology":
            continue
        if made.arguments[0].name == "z":
            ends_well(made, [z, *[None] * (len(made.arguments) - 2), given_set])
        elif made.name in ("AGE_OF_UNIVERSE", "EXPANSION_FATE", "TIME_HUBBLE"):
            ends_well(made, [given_set])
        elif made.name in ("REDSHIFT_FROM_AGE", "REDSHIFT_FROM_LOOKBACK"):
            ends_well(made, [z, given_set])


# Outside: ∫ dz/((1+z)E) diverges for E = 1 (de Sitter 1917): that universe has no age, though
# light from any z has been under way for ln(1+z) Hubble times.
def test_a_universe_without_a_beginning_has_no_age() -> None:
    de_sitter = {"H0": 70.0, "Om0": 0.0, "Ode0": 1.0, "Tcmb0": 0.0}
    assert cf.time_lookback(1.0, de_sitter) == pytest.approx(
        math.log(2) * cf.time_hubble(de_sitter), rel=1e-12
    )
    for call in (lambda: cf.age_of_universe(de_sitter), lambda: cf.age_at_redshift(1.0, de_sitter)):
        with pytest.raises(DomainError):
            call()


def test_a_date_is_not_a_number() -> None:
    for when in (datetime(2031, 3, 14), date(2031, 3, 14), np.datetime64("2031-03-14")):
        with pytest.raises(InputError, match="not a number"):
            cf.distance_luminosity(when)
        with pytest.raises(InputError, match="not a number"):
            cf.distance_luminosity([0.5, when])


def test_numbers_of_other_kinds_are_numbers() -> None:
    for half in (Decimal("0.5"), Fraction(1, 2), np.float32(0.5), np.longdouble(0.5)):
        assert cf.distance_luminosity(half) == cf.distance_luminosity(0.5)
    assert cf.distance_luminosity(2) == cf.distance_luminosity(2.0)
    with pytest.raises(DomainError, match="too large"):
        cf.distance_luminosity(10**400)
    assert np.isnan(cf.distance_luminosity([10**400, 0.5])[0])


NO_DIMENSIONS = {
    "none": np.array(None, dtype=object),
    "masked": np.ma.array(0.5, mask=True),
    "text": np.array("H alpha"),
    "number": np.array(0.5),
    "huge": np.array(10**400, dtype=object),
    "date": np.array("2031-03-14", dtype="datetime64[D]"),
}


@pytest.mark.parametrize("kind", NO_DIMENSIONS)
def test_an_array_without_dimensions_ends_well(kind: str) -> None:
    for made in CATALOGUE.values():
        for position in range(len(WORKS[made.name])):
            ends_well(made, with_one(made.name, position, NO_DIMENSIONS[kind]))


@pytest.mark.parametrize("kind", ["none", "masked"])
def test_an_empty_array_without_dimensions_is_missing(kind: str) -> None:
    with pytest.raises(MissingInput, match="z is empty"):
        cf.distance_luminosity(NO_DIMENSIONS[kind])


@pytest.mark.parametrize("kind", ["NaN", "sNaN"])
def test_decimals_that_are_no_number_end_well(kind: str) -> None:
    for made in CATALOGUE.values():
        for position in range(len(WORKS[made.name])):
            ends_well(made, with_one(made.name, position, Decimal(kind)))
            ends_well(made, with_one(made.name, position, [Decimal(kind)]))


def test_more_than_a_double_can_hold() -> None:
    huge = np.longdouble("1e4000")
    ends_well(CATALOGUE["DISTANCE_LUMINOSITY"], [huge])
    ends_well(CATALOGUE["DISTANCE_LUMINOSITY"], [np.array([huge, huge])])


@pytest.mark.parametrize("units", [("nm", "s"), ("nm", ["Angstrom", "s"]), (["nm", "nqq"], "m")])
def test_a_column_of_units_that_cannot_be_converted_is_refused(units: tuple[Any, Any]) -> None:
    with pytest.raises(InputError, match="UNITS_CONVERTED"):
        cf.units_converted([1.0, 2.0], *units)
