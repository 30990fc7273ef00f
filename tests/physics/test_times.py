"""Moments read and taken to TT, against astropy, ERFA, the IERS and the standards' own examples."""

import random
from datetime import UTC, date, datetime, time, timedelta, timezone
from fractions import Fraction
from pathlib import Path

import erfa
import numpy as np
import pytest
from astropy.time import Time
from astropy_iers_data import IERS_LEAP_SECOND_FILE
from hypothesis import given
from hypothesis import strategies as st
from openpyxl.utils.datetime import to_excel

from cellfuncs.errors import DomainError, InputError
from cellfuncs.physics.times import (
    day_lengths,
    last_leap_second,
    tt_minus_utc,
    tt_parts,
    utc_columns,
    utc_parts,
)

pytestmark = pytest.mark.filterwarnings("ignore:ERFA function:erfa.ErfaWarning")

MICROSECOND = 1e-6 / 86400
IERS_LIST = [
    line.split()
    for line in Path(IERS_LEAP_SECOND_FILE).read_text().splitlines()
    if not line.startswith("#")
]
"""The IERS's Leap_Second.dat: MJD, day, month, year, TAI − UTC from then on"""
# the first line is where the present UTC begins, with no leap second before it
LEAP_DAYS = [
    date(int(year), int(month), int(day)) - timedelta(days=1)
    for _, day, month, year, _ in IERS_LIST[1:]
]


def seconds_between(one: tuple[float, float], other: tuple[float, float]) -> float:
    return ((one[0] - other[0]) + (one[1] - other[1])) * 86400


def random_moments(seed: int, count: int) -> list[datetime]:
    draw = random.Random(seed)
    start = datetime(1960, 1, 1, tzinfo=UTC)
    span = (datetime(2100, 1, 1, tzinfo=UTC) - start) // timedelta(microseconds=1)
    return [start + timedelta(microseconds=draw.randrange(span)) for _ in range(count)]


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        # RFC 3339, section 5.8
        ("1985-04-12T23:20:50.52Z", (2446167.5, (23 * 3600 + 20 * 60 + 50.52) / 86400)),
        ("1996-12-19T16:39:57-08:00", (2450437.5, (39 * 60 + 57) / 86400)),
        ("1990-12-31T23:59:60Z", (2448256.5, 86400 / 86401)),
        ("1990-12-31T15:59:60-08:00", (2448256.5, 86400 / 86401)),
        # Meeus, Astronomical Algorithms (1998), chapter 7; from memory
        ("2000-01-01 12:00", (2451544.5, 0.5)),
        ("1987-01-27", (2446822.5, 0.0)),
        ("1988-06-19T12", (2447331.5, 0.5)),
        # ERFA's and SOFA's own test of dtf2d; from memory: 2449534.49999
        ("1994-06-30T23:59:60.13599", (2449533.5, 0.99999)),
    ],
)
def test_published_examples(text: str, parts: tuple[float, float]) -> None:
    assert utc_parts(text)[0] == parts[0]
    assert utc_parts(text)[1] == pytest.approx(parts[1], rel=0, abs=1e-10)


def test_the_worked_example_of_the_sofa_cookbook() -> None:
    """SOFA Time Scale and Calendar Tools, section 2.4; from memory: TT 21:25:42.684."""
    tt = tt_parts(*utc_parts("2006-01-15T21:24:37.5"))
    assert seconds_between(tt, (2453750.5, (21 * 3600 + 25 * 60 + 42.684) / 86400)) == (
        pytest.approx(0, abs=1e-9)
    )


def test_text_as_astropy_reads_it() -> None:
    moments = random_moments(1, 2000)
    reference = Time([f"{each:%Y-%m-%dT%H:%M:%S.%f}" for each in moments], scale="utc")
    days, fractions, wrong = utc_columns([each.isoformat() for each in moments])
    assert wrong is None
    assert set(days % 1) == {0.5}
    assert np.max(np.abs((days - reference.jd1) + (fractions - reference.jd2))) * 86400 < 1e-9


def test_zones_as_the_standard_library_takes_them() -> None:
    draw = random.Random(2)
    for moment in random_moments(3, 500):
        zone = timezone(timedelta(minutes=15 * draw.randint(-48, 56)))
        local = moment.astimezone(zone)
        for text in (local.isoformat(), f"{local:%Y%m%dT%H%M%S.%f%z}", f"{local}"):
            assert utc_parts(text) == utc_parts(moment), text
        assert utc_parts(local) == utc_parts(moment)


@pytest.mark.parametrize(
    "same",
    [
        *("2024-03-01T22:00:00Z", "2024-03-01T22", "2024-03-01 22:00", "20240301T220000"),
        *(
            "20240301T22",
            "20240301 2200Z",
            "2024-03-01T220000",
            "2024-03-01t22:00z",
            "2024-03-01 22:00 UTC",
        ),
        *("2024-03-02T00:00+02:00", "2024-03-02T00:00+0200", "2024-03-02T00:00 +02"),
        *("2024-03-01T18:30−03:30", "  2024-03-01  22:00:00,000  ", "2024-03-01T22:00:00.0"),
        "2024-03-01\u00a022:00 \u00a0Z",
        *(datetime(2024, 3, 1, 22), datetime(2024, 3, 1, 22, tzinfo=UTC)),
        np.datetime64("2024-03-01T22:00"),
    ],
)
def test_one_moment_in_many_writings(same: object) -> None:
    assert utc_parts(same) == (2460370.5, 22 / 24)


def test_the_end_of_a_day_is_the_start_of_the_next() -> None:
    """ISO 8601-1:2019/Amd 1:2022 has 24:00:00 as the end of a calendar day."""
    assert utc_parts("2016-12-31T24:00:00") == utc_parts("2017-01-01") == (2457754.5, 0.0)


@pytest.mark.parametrize("day", LEAP_DAYS, ids=str)
def test_leap_seconds_of_the_iers(day: date) -> None:
    text = f"{day}T23:59:60.25"
    parts = utc_parts(text)
    reference = Time(text, scale="utc")
    assert seconds_between(parts, (reference.jd1, reference.jd2)) == pytest.approx(0, abs=1e-9)
    east = utc_parts(f"{day + timedelta(days=1)}T05:29:60.25+05:30")
    assert east == parts
    # the leap second lasts 1 s of TT
    before, after = (
        tt_parts(*utc_parts(each)) for each in (f"{day}T23:59:60", f"{day + timedelta(days=1)}")
    )
    assert seconds_between(after, before) == pytest.approx(1, abs=1e-9)


def test_no_other_day_has_a_leap_second() -> None:
    length = {date.fromordinal(int(day - 1721424.5)): each for day, each in day_lengths().items()}
    assert [day for day, each in length.items() if each == 86401.0] == LEAP_DAYS
    for year in range(1972, 2100):
        for day in (date(year, 6, 30), date(year, 12, 31)):
            if day not in LEAP_DAYS:
                with pytest.raises(InputError, match="no leap second"):
                    utc_parts(f"{day}T23:59:60")


def test_the_table_s_last_entry_is_the_iers_s() -> None:
    latest = last_leap_second()
    _, day, month, year, seconds = IERS_LIST[-1]
    assert latest.since == date(int(year), int(month), int(day))
    assert latest.tai_minus_utc == float(seconds)


def test_jumps_of_parts_of_a_second_before_1972() -> None:
    """UTC-TAI.history of the IERS; from memory: −0.05 s on 1961-08-01, +0.1 s on 1963-11-01."""
    assert utc_parts("1963-10-31T23:59:60.05")[0] == 2438333.5
    for missing in ("1961-07-31T23:59:59.97", "1963-10-31T23:59:60.15"):
        with pytest.raises(InputError):
            utc_parts(missing)


def around_steps() -> tuple[np.ndarray, np.ndarray]:
    moments = []
    for year, month, _ in erfa.leap_seconds.get():
        start = sum(erfa.cal2jd(int(year), int(month), 1))
        for day in (start - 1, start):
            moments += [(day, fraction) for fraction in (0.0, 0.3, 0.99999, 1 - 1e-12)]
    return np.array([each for each in moments if each[0] >= 2436934.5]).T


def test_tt_as_erfa_has_it() -> None:
    draw = np.random.default_rng(4)
    days = draw.integers(0, 51135, 2000) + 2436934.5
    near_steps = around_steps()
    days = np.concatenate([days, near_steps[0]])
    fractions = np.concatenate([draw.random(2000), near_steps[1]])
    reference = erfa.taitt(*erfa.utctai(days, fractions))
    first, second = tt_parts(days, fractions)
    assert np.max(np.abs((first - reference[0]) + (second - reference[1]))) < MICROSECOND
    one_by_one = [
        tt_minus_utc(*each) for each in zip(days.tolist(), fractions.tolist(), strict=True)
    ]
    assert np.array_equal(tt_minus_utc(days, fractions), one_by_one)
    astropy = Time(days, fractions, format="jd", scale="utc").tt
    assert np.max(np.abs((first - astropy.jd1) + (second - astropy.jd2))) < MICROSECOND


def test_a_julian_date_keeps_every_bit() -> None:
    draw = random.Random(5)
    for number in (draw.uniform(2436934.5, 2488069.4) for _ in range(1000)):
        day, fraction = utc_parts(number)
        assert Fraction(day) + Fraction(fraction) == Fraction(number)
        assert day % 1 == 0.5
        assert 0 <= fraction < 1


def test_serials_as_openpyxl_writes_them() -> None:
    moments = [each.replace(tzinfo=None) for each in random_moments(6, 1000)]
    # on the day of a leap second too, where a spreadsheet's own day has 86 400 s
    moments += [datetime.combine(day, time(18)) for day in LEAP_DAYS]
    for moment in moments:
        serial = to_excel(moment)
        # a serial of 2099 has 0.6 µs
        assert abs(seconds_between(utc_parts(serial), utc_parts(moment))) < 1e-6
        assert utc_parts(moment.date()) == utc_parts(int(to_excel(moment.date())))
    assert utc_parts(np.float64(45352.5)) == utc_parts(45352.5) == (2460370.5, 0.5)


@given(st.datetimes(datetime(1972, 1, 1), datetime(2099, 12, 31)))
def test_round_trip_through_text(moment: datetime) -> None:
    day, fraction = utc_parts(moment.isoformat())
    clock = timedelta(seconds=fraction * day_lengths().get(day, 86400))
    read = datetime.combine(date.fromordinal(int(day - 1721424.5)), time()) + clock
    assert abs(read - moment) <= timedelta(microseconds=1)
    assert utc_parts(moment) == utc_parts(moment.isoformat()) == utc_parts(f"{moment}")


@pytest.mark.parametrize(
    ("value", "words"),
    [
        ("2024-06-31", "June 2024 has 30 days"),
        ("2023-02-29", "2023 is no leap year"),
        ("2024-02-30T10:00", "February 2024 has 29 days"),
        ("2024-13-01", "no month 13"),
        ("2024-00-01", "no month 00"),
        ("2024-03-01T25:00", "00 to 23"),
        ("2024-03-01T24:00:01", "00 to 23"),
        ("2024-03-01T24:00:00.5", "00 to 23"),
        ("2024-03-01T22:60", "no minute 60"),
        ("2024-03-01T22:14:61", "no second 61"),
        ("2024-03-01T22:14:60", "no leap second"),
        ("2015-12-31T23:59:60", "no leap second"),
        ("2017-01-01T23:59:60+01:00", "no leap second"),
        ("2024-03-01T22:14+14:30", "-12:00 to \\+14:00"),
        ("03/04/2024", "ambiguous.*2024-04-03"),
        ("3.4.24 22:10", "ambiguous.*2024-04-03"),
        ("2024/3/4 22:10", "write the date as 2024-03-04"),
        ("2460370.5", "must be a number, not text"),
        ("2024-03-01T22:14:30.", "the time as 22:14:30"),
        ("2024-03-01 22.14", "the time as 22:14:30"),
        ("2024-03-01T22:1430", "the time as 22:14:30"),
        ("2024-0301", "like 2024-03-01T22:14:30"),
        ("last night", "'last night', not a date and time"),
        ("22:14", "not a date and time"),
        (time(22, 14), "needs its date"),
        (timedelta(days=45352), "not a date and time"),
        (True, "True, not a date and time"),
        (np.True_, "not a date and time"),
        (b"2024-03-01", "not a date and time"),
        (2460370.5 + 0j, "not a date and time"),
        (None, "None, not a date and time"),
        ([], "not a date and time"),
    ],
)
def test_what_is_no_moment(value: object, words: str) -> None:
    with pytest.raises(InputError, match=words) as raised:
        utc_parts(value, "exposure start")
    assert str(raised.value).startswith("exposure start is ")


OUT_OF_RANGE = [
    *("1959-12-31T23:59:59.999", "1960-01-01T00:30+02:00", "2100-01-01", "2099-12-31T23:30-01:00"),
    # RFC 3339, section 5.8
    "1937-01-01T12:00:27.87+00:20",
    *("0000-01-01", "9999-12-31", datetime(1, 1, 1, tzinfo=timezone(timedelta(hours=5)))),
    *(date(1959, 12, 31), datetime(2100, 1, 1), np.datetime64("1959-12-31"), np.datetime64("2100")),
]
NUMBERS_OUT_OF_RANGE = [
    *(0, 21915.99999, 73051.0, 999_999.0, 2436934.49, 2488069.5, 20240301, 1e300, -1.0),
    *(float("inf"), float("-inf")),
]


@pytest.mark.parametrize("value", OUT_OF_RANGE, ids=str)
def test_before_utc_and_after_the_tables(value: object) -> None:
    with pytest.raises(DomainError, match=r"1960-01-01 to 2099-12-31.*no UTC.*Earth"):
        utc_parts(value)


@pytest.mark.parametrize("value", NUMBERS_OUT_OF_RANGE)
def test_numbers_out_of_range(value: float) -> None:
    with pytest.raises(DomainError, match=r"21916.*73051.*2436934\.5.*add 2400000\.5"):
        utc_parts(value)


def test_a_number_too_large_for_a_float() -> None:
    with pytest.raises(DomainError):
        utc_parts(10**400)


@pytest.mark.parametrize(
    "first",
    [
        *("1960-01-01", "1959-12-31T23:30-02:00", 21916, 2436934.5, date(1960, 1, 1)),
        *("2099-12-31T23:59:59.999999", 73050.99999, 2488069.4999, np.datetime64("2099-12-31")),
    ],
)
def test_the_limits_themselves(first: object) -> None:
    day, fraction = utc_parts(first)
    assert day in (2436934.5, 2488068.5)
    assert 0 <= fraction < 1


def test_columns_hold_what_single_moments_do() -> None:
    draw = random.Random(7)
    serials = [draw.uniform(20000, 75000) for _ in range(300)]
    julian = [draw.uniform(2436000, 2489000) for _ in range(300)]
    leap_day = [42735.0, 42735.5, 42735.99, 2457753.75]
    numbers = [*serials, *julian, *leap_day, float("nan"), float("inf"), 0.0, 1e6]
    moments = [np.datetime64(each.replace(tzinfo=None)) for each in random_moments(8, 300)]
    moments += [np.datetime64("1950-01-01"), np.datetime64("NaT"), np.datetime64("2016-12-31T18")]
    for values, array in (
        (numbers, np.array(numbers)),
        (moments, np.array(moments)),
        (numbers + moments, np.array(numbers + moments, dtype=object)),
    ):
        days, fractions, wrong = utc_columns(array)
        assert wrong is None
        for value, day, fraction in zip(values, days.tolist(), fractions.tolist(), strict=True):
            if day == day:
                assert (day, fraction) == utc_parts(value)
            else:
                assert fraction != fraction
                with pytest.raises(DomainError):
                    utc_parts(value)


def test_a_column_with_empty_and_wrong_cells() -> None:
    column = np.array(
        [["2024-03-01", None], ["", float("nan")], ["1950-01-01", "2024-06-31"], ["x", 45352.5]],
        dtype=object,
    )
    days, fractions, wrong = utc_columns(column, "start")
    assert days.shape == fractions.shape == (4, 2)
    assert np.flatnonzero(days == days).tolist() == [0, 7]
    assert days[3, 1] == 2460370.5
    assert isinstance(wrong, InputError)
    assert "start is '2024-06-31'; June 2024 has 30 days" in str(wrong)


def test_columns_without_rows_and_of_other_kinds() -> None:
    for empty in (np.array([]), [], np.array([], dtype=object), np.array([], "datetime64[s]")):
        days, fractions, wrong = utc_columns(empty)
        assert days.shape == fractions.shape == (0,)
        assert wrong is None
    assert utc_columns(np.array([45352, 45353]))[0].tolist() == [2460370.5, 2460371.5]
    assert utc_columns(np.array(["2024-03-01"]))[0].tolist() == [2460370.5]
    assert isinstance(utc_columns([True])[2], InputError)
    assert tt_minus_utc(np.array([2460370.5, np.nan]), 0.5)[0] == pytest.approx(69.184)
    assert np.isnan(tt_minus_utc(np.array([2460370.5, np.nan]), 0.5)[1])
