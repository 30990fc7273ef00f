"""Angles in the writings that people use, against astropy and published positions."""

import random
from datetime import datetime, time, timedelta
from math import nan

import numpy as np
import pytest
from astropy import units
from astropy.coordinates import Angle
from hypothesis import given
from hypothesis import strategies as st

from cellfuncs.errors import DomainError, InputError
from cellfuncs.physics.angles import degrees


def test_published_positions() -> None:
    """The galactic pole of 1958 (Blaauw et al. 1960, MNRAS 121, 123): 12h 49m = 192.25 degrees,
    and ICRS of the Crab pulsar (Lobanov et al. 2011, A&A 533, A10; from memory)."""
    assert degrees("12h49m", False) == 192.25
    assert degrees("12 49 00", True) == 192.25
    assert degrees("05h34m31.97232s", True) == pytest.approx(83.633218, abs=1e-7)
    assert degrees("+22 00 52.069", False) == pytest.approx(22.014463611, abs=1e-8)


def test_as_astropy_reads_them() -> None:
    draw = random.Random(1)
    for _ in range(500):
        hour, degree = draw.randint(0, 23), draw.randint(0, 359)
        minute, second = draw.randint(0, 59), f"{draw.uniform(0, 59.4):.{draw.randint(0, 9)}f}"
        sign = draw.choice(["-", "+", ""])
        for text in (f"{hour:02}:{minute:02}:{second}", f"{hour} {minute} {second}"):
            expected = Angle(text, unit=units.hourangle).degree
            assert degrees(text, True) == pytest.approx(expected, rel=1e-15, abs=1e-14)
        text = f"{hour}h{minute:02}m{second}s"
        for as_hours in (True, False):
            expected = Angle(text).degree
            assert degrees(text, as_hours) == pytest.approx(expected, rel=1e-15, abs=1e-14)
        for text in (
            f"{sign}{degree:02}d{minute:02}m{second}s",
            f"{sign}{degree}°{minute}′{second}″",
        ):
            for as_hours in (True, False):
                expected = Angle(text).degree
                assert degrees(text, as_hours) == pytest.approx(expected, rel=1e-15, abs=1e-14)


@pytest.mark.parametrize(
    "same",
    [
        *("-12 34 56.7", "-12:34:56.7", "−12 34 56.7", "–12 34 56,7", "- 12 34 56.7"),
        *("-12d34m56.7s", "-12°34'56.7\"", "-12° 34′ 56.7″", "-12°34’56.7”", "-12°34′56.7′′"),
        *("-12°34'56.7''", "-12D34M56.7S", "-12ᵈ34ᵐ56.7ˢ", "-12deg 34min 56.7sec", "-12°34′56″.7"),
        *("12 34 56.7 S", "12 34 56.7 W", "12°34'56.7\"S", "12d34m56.7s S", "12:34:56.7W"),
        *("-12 : 34 : 56.7", "-12\u00a034\u200956.7", "-12 34.945", "-12:34,945", "-12°34.945'"),
        *(
            "-12.58241666666666667",
            "-12.58241666666666667°",
            "-12,58241666666666667d",
            -45296.7 / 3600,
        ),
    ],
)
def test_one_declination_in_many_writings(same: object) -> None:
    assert degrees(same, False) == pytest.approx(-(12 + 34 / 60 + 56.7 / 3600), rel=1e-15)


@pytest.mark.parametrize(
    "same",
    [
        *("12 34 56.7", "12:34:56.7", "12h34m56.7s", "12ʰ34ᵐ56.7ˢ", "12ʰ34ᵐ56ˢ.7", "12H34M56.7S"),
        *("12h 34m 56.7s", "12 h 34 m 56.7 s", "12h34m56.7", "12h34'56.7\"", "12h 34 56.7"),
        *("+12 34 56,7", "12 34.945", "12h34.945m", "12.5824166666666667h", "188.73625d"),
        "188°44'10.5\"",
    ],
)
def test_one_right_ascension_in_many_writings(same: str) -> None:
    assert degrees(same, True) == pytest.approx(15 * (12 + 34 / 60 + 56.7 / 3600), rel=1e-15)


def test_the_sign_of_zero_degrees_is_kept() -> None:
    assert degrees("-00 30 00", False) == -0.5
    assert degrees("-0°0'36\"", False) == -0.01
    assert degrees("00 30 S", False) == -0.5


@given(
    st.integers(-3600 * 360 * 1000, 3600 * 360 * 1000),
    st.sampled_from([" ", ":", "d °", "°'"]),
    st.sampled_from(".,"),
)
def test_round_trip(thousandths: int, marks: str, point: str) -> None:
    """What is written from a whole number of thousandths of a second is read back as it."""
    size, sign = abs(thousandths), "-" if thousandths < 0 else ""
    first, second = {"d °": ("d", "m"), "°'": ("°", "'")}.get(marks, (marks, marks))
    text = (
        f"{sign}{size // 3600000:02}{first}{size // 60000 % 60:02}{second}"
        f"{size // 1000 % 60:02}{point}{size % 1000:03}"
    )
    assert degrees(text, False) == pytest.approx(thousandths / 3600000, rel=1e-15)


@pytest.mark.parametrize("bare", ["10.68", "10,68", "-10", "10", 10.68, 10, np.float32(10.5), 0.23])
def test_a_single_number_for_hours_is_not_guessed_at(bare: object) -> None:
    with pytest.raises(InputError, match=r"may be hours or degrees.*10\.68h, 10\.68d or 10:40:48"):
        degrees(bare, True)


@pytest.mark.parametrize(
    "turned",
    [time(5, 35, 17), timedelta(hours=30), datetime(1900, 1, 1, 5, 35), np.timedelta64(5, "h")],
)
def test_a_time_of_day_that_a_spreadsheet_made_of_it(turned: object) -> None:
    for as_hours in (True, False):
        with pytest.raises(InputError, match=r"turned it into a time of day.*as text"):
            degrees(turned, as_hours)
    with pytest.raises(InputError, match="turned it into a time of day"):
        degrees(0.2328, True)


@pytest.mark.parametrize(
    ("text", "as_hours"),
    [
        *(
            ("24:00:00", True),
            ("24h", False),
            ("25 00 00", True),
            ("-1h", False),
            ("-00 30 00", True),
        ),
        *(("360.0001", False), ("-361 00 00", False), ("361d", True), ("1012", False)),
        *((360.5, False), (-361, False), (float("inf"), False), (10**400, False)),
    ],
)
def test_out_of_range(text: object, as_hours: bool) -> None:
    with pytest.raises(DomainError):
        degrees(text, as_hours)


@pytest.mark.parametrize(
    ("value", "result"),
    [("360 00 00", 360.0), ("-360", -360.0), ("23h59m", 359.75), (-360, -360.0), ("0h", 0.0)],
)
def test_the_limits_themselves(value: object, result: float) -> None:
    assert degrees(value, False) == result


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("12 60 00", "below 60"),
        ("12 00 60.0", "below 60"),
        ("12h 75m", "below 60"),
        ("70d24m10S", "seconds or South"),
        ("-70 24 W", "without a sign"),
        ("12h34m W", "belong to degrees"),
        *(
            (text, "not an angle.*12h34m56.7s")
            for text in (
                *("12.5 30 00", "12 34.5 56", "12,34,56", "12::34", "12:", "12:34:", ":12", "12m"),
                *("12 34m", "12 34 56s", "12 34s", "12h34s", "12 34 56 78", "12 -34 56", "1e2"),
                *(
                    "12h34d",
                    "12hh",
                    ".5",
                    "abc",
                    "12 34 56 x",
                    "--12",
                    "+-12",
                    "12°30''",
                    "70 24 NE",
                ),
                *("1/2", "12 1/2", "$12", "12%", "", "١٢ ٣٤", "12h34m56.7s7"),
            )
        ),
        *((value, "not an angle") for value in (True, None, b"12", [], 1j, np.False_)),
    ],
)
def test_what_is_no_angle(text: object, words: str) -> None:
    with pytest.raises(InputError, match=words) as raised:
        degrees(text, False, "dec")
    assert str(raised.value).startswith("dec is ")


def test_hemispheres_are_for_degrees() -> None:
    assert degrees("70d24m W", True) == -70.4
    with pytest.raises(InputError, match="belong to degrees"):
        degrees("70 24 W", True)


def test_not_a_number_is_never_an_angle() -> None:
    with pytest.raises(DomainError):
        degrees(nan, False)
