"""The moment of an observation: what a cell or a log holds, as UTC in two parts, and its TT.

The two parts are ERFA's quasi-Julian date: the Julian date of 0h of the UTC day, which ends in .5,
and the fraction of that day that has passed. A day with a leap second has 86 401 s, so that its
fraction runs a little slower (SOFA Time Scale and Calendar Tools, section 3.5). Before 1972 UTC ran
at rates of its own and jumped by parts of a second; ERFA's table has both, and so has this.
"""

import re
from calendar import isleap, month_name, monthrange
from collections.abc import Sequence
from datetime import date, datetime, time
from functools import cache
from math import floor
from typing import Any, Final, NamedTuple

import erfa
import numpy as np
from numpy.typing import NDArray

from cellfuncs.errors import CellError, DomainError, InputError, is_empty

FIRST_DAY: Final = 2436934.5
"""1960-01-01, the first day of UTC"""
END_DAY: Final = 2488069.5
"""2100-01-01, where the series for the Earth's motion ends (ERFA's epv00: 1900 to 2100)"""
SERIAL_DAY: Final = 2415018.5
"""1899-12-30, from which a spreadsheet's date-time counts the days"""
ORDINAL_DAY: Final = 1721424.5
"""The day before 0001-01-01, from which Python counts the days"""
UNIX_DAY: Final = 2440587.5
"""1970-01-01, from which numpy counts the days"""
LEAST_JULIAN: Final = 1_000_000.0
"""A number above it is a Julian date, one below a spreadsheet's date-time"""
DAY_SECONDS: Final = 86400.0
TT_MINUS_TAI: Final = 32.184

EXAMPLE: Final = "2024-03-01T22:14:30"
WHY: Final = (
    "before 1960 there was no UTC, and the tabulated motion of the Earth ends with the year 2099"
)

_TEXT: Final = re.compile(
    r"([0-9]{4})(-?)([0-9]{2})\2([0-9]{2})"
    r"(?:"
    r"(?:[Tt]| +)([0-9]{2})(?:(:?)([0-9]{2})(?:\6([0-9]{2}(?:[.,][0-9]+)?))?)?"
    r"(?: *(?:[Zz]|[Uu][Tt][Cc]|([+−-])([0-9]{2})(?::?([0-9]{2}))?))?"
    r"| *(?:[Zz]|[Uu][Tt][Cc])"
    r")?"
)
_YEAR_LAST: Final = re.compile(r"[0-9]{1,2}([./ -])[0-9]{1,2}\1[0-9]{2}(?:[0-9]{2})?(?![0-9]).*")
_YEAR_FIRST: Final = re.compile(r"([0-9]{4})([./ -])([0-9]{1,2})\2([0-9]{1,2})(?![0-9]).*")


class LeapSecond(NamedTuple):
    """The latest step of UTC that ERFA's table knows."""

    since: date
    """The first day after it"""
    tai_minus_utc: float
    """Seconds from then on"""


def last_leap_second() -> LeapSecond:
    """Return the latest entry of ERFA's table of leap seconds; no later one can be known here."""
    year, month, seconds = erfa.leap_seconds.get()[-1]
    return LeapSecond(date(int(year), int(month), 1), float(seconds))


def utc_parts(value: Any, name: str = "utc") -> tuple[float, float]:
    """Return a moment as the Julian date of 0h of its UTC day and the fraction of that day.

    value: ISO 8601 text (without a zone it is UTC), a spreadsheet's date-time in the 1900 system,
        a Julian date UTC above 1 000 000, a datetime (without a zone it is UTC), a date (its 0h),
        or a numpy.datetime64.
    name: what messages call the value.
    Raises InputError for what is no moment, DomainError for one outside 1960 to 2099.
    """
    if type(value) is float:
        return _of_number(value, name)
    if isinstance(value, str):
        return _of_text(value.replace("\u00a0", " ").strip(), name)
    if isinstance(value, datetime):
        return _of_datetime(value, name)
    if isinstance(value, date):
        return _of_clock(value.toordinal(), 0, 0.0, value, name)
    if isinstance(value, np.datetime64):
        day, fraction = _of_datetimes(np.array([value]))
        if day[0] != day[0]:
            raise _out_of_range(value, name)
        return float(day[0]), float(fraction[0])
    if isinstance(value, time):
        raise InputError(f"{name} is {_shown(value)}, a time of day; it needs its date: {EXAMPLE}")
    if isinstance(value, (bool, np.bool_, bytes, complex, np.complexfloating)):
        raise _no_moment(value, name)
    try:
        number = float(value)
    except OverflowError:
        raise DomainError(f"{name} is too large for a number") from None
    except (TypeError, ValueError, ArithmeticError):
        raise _no_moment(value, name) from None
    return _of_number(number, name)


def utc_columns(
    values: Any, name: str = "utc"
) -> tuple[NDArray[np.float64], NDArray[np.float64], CellError | None]:
    """Return many moments as `utc_parts` does one, NaN where there is none, in two arrays.

    The third is the first InputError met; what is empty or out of range is NaN without one.
    """
    array = values if isinstance(values, np.ndarray) else _as_array(values)
    if array.dtype.kind in "fiu":
        return *_of_numbers(array.astype(np.float64)), None
    if array.dtype.kind == "M":
        return *_of_datetimes(array), None
    wrong: CellError | None = None
    parts = []
    for value in array.reshape(-1).tolist():
        try:
            parts.append(utc_parts(value, name))
        except CellError as error:
            parts.append((np.nan, np.nan))
            if wrong is None and isinstance(error, InputError) and not is_empty(value):
                wrong = error
    days, fractions = np.array(parts, dtype=np.float64).reshape(-1, 2).T
    return days.reshape(array.shape), fractions.reshape(array.shape), wrong


def tt_minus_utc(day: Any, fraction: Any) -> Any:
    """Return TT minus UTC in seconds: of the Julian date TT and the quasi-Julian date UTC.

    day, fraction: as `utc_parts` gives them, floats or arrays that broadcast.
    """
    steps = _steps()
    if type(day) is float and type(fraction) is float:
        index = min(int(day - FIRST_DAY), steps.last)
        return steps.offset_list[index] + steps.gain_list[index] * fraction
    with np.errstate(invalid="ignore"):
        found = np.clip(np.nan_to_num(np.subtract(day, FIRST_DAY)), 0, steps.last).astype(np.intp)
        return np.where(
            np.isnan(day), np.nan, steps.offset[found] + np.multiply(steps.gain[found], fraction)
        )


def tt_parts(day: Any, fraction: Any) -> tuple[Any, Any]:
    """Return TT as a Julian date in two parts, of a UTC that `utc_parts` or `utc_columns` gave."""
    return day, fraction + tt_minus_utc(day, fraction) / DAY_SECONDS


def day_lengths() -> dict[float, float]:
    """Return the seconds of each UTC day that has not 86 400, by the Julian date of its 0h."""
    steps = _steps()
    unlike = np.flatnonzero(np.abs(steps.length - DAY_SECONDS) > 1e-6)
    return {
        FIRST_DAY + day: length
        for day, length in zip(unlike.tolist(), steps.length[unlike].tolist(), strict=True)
    }


class _Steps(NamedTuple):
    """One entry a day, from the first day of UTC to that after the last leap second."""

    last: int
    length: NDArray[np.float64]
    """Seconds of UTC in the day"""
    offset: NDArray[np.float64]
    """TT − UTC at 0h, s"""
    gain: NDArray[np.float64]
    """What is added to it by the end of the day, s"""
    length_list: list[float]
    offset_list: list[float]
    gain_list: list[float]


@cache
def _steps() -> _Steps:
    # the steps of eraUtctai, for every day at once; the raw ufunc, since the warning that a late
    # year is "dubious" says what `last_leap_second` says
    last = last_leap_second().since.toordinal() + ORDINAL_DAY - FIRST_DAY
    year, month, day, *_ = erfa.ufunc.jd2cal(FIRST_DAY, np.arange(last + 2))
    at_start = erfa.ufunc.dat(year, month, day, 0.0)[0]
    drift = 2 * (erfa.ufunc.dat(year, month, day, 0.5)[0] - at_start)[:-1]
    jump = at_start[1:] - (at_start[:-1] + drift)
    length = DAY_SECONDS + np.round(jump, 9)
    gain = length * (1 + drift / DAY_SECONDS) - DAY_SECONDS
    offset = TT_MINUS_TAI + at_start[:-1]
    return _Steps(int(last), length, offset, gain, length.tolist(), offset.tolist(), gain.tolist())


def _length(day: float) -> float:
    steps = _steps()
    return steps.length_list[min(int(day - FIRST_DAY), steps.last)]


def _lengths(day: NDArray[np.float64]) -> NDArray[np.float64]:
    steps = _steps()
    return steps.length[np.clip(day - FIRST_DAY, 0, steps.last).astype(np.intp)]


def _of_number(number: float, name: str) -> tuple[float, float]:
    if FIRST_DAY <= number < END_DAY:
        day = floor(number - 0.5) + 0.5
        return day, number - day
    if FIRST_DAY - SERIAL_DAY <= number < END_DAY - SERIAL_DAY:
        whole = floor(number)
        day = whole + SERIAL_DAY
        # a spreadsheet's day always has 86 400 s
        return day, (number - whole) * (DAY_SECONDS / _length(day))
    raise _out_of_range(number, name)


def _of_numbers(
    numbers: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    with np.errstate(invalid="ignore"):
        julian = numbers > LEAST_JULIAN
        whole = np.where(julian, np.floor(numbers - 0.5) + 0.5, np.floor(numbers))
        fraction = numbers - whole
        day = np.where(julian, whole, whole + SERIAL_DAY)
    day, fraction = _in_range(day, fraction)
    return day, np.where(julian, fraction, fraction * (DAY_SECONDS / _lengths(np.nan_to_num(day))))


def _of_datetimes(values: NDArray[Any]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    days = values.astype("datetime64[D]")
    nanoseconds = (values - days).astype("timedelta64[ns]").astype(np.float64)
    missing = np.isnat(values)
    day = np.where(missing, np.nan, days.astype(np.float64) + UNIX_DAY)
    day, seconds = _in_range(day, np.where(missing, np.nan, nanoseconds / 1e9))
    return day, seconds / _lengths(np.nan_to_num(day))


def _in_range(
    day: NDArray[np.float64], rest: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    with np.errstate(invalid="ignore"):
        good = (day >= FIRST_DAY) & (day < END_DAY)
    return np.where(good, day, np.nan), np.where(good, rest, np.nan)


def _of_datetime(value: datetime, name: str) -> tuple[float, float]:
    offset = value.utcoffset()
    moment = value
    if offset is not None:
        try:
            moment = value.replace(tzinfo=None) - offset
        except OverflowError:
            raise _out_of_range(value, name) from None
    seconds = moment.second + moment.microsecond / 1e6
    return _of_clock(moment.toordinal(), moment.hour * 60 + moment.minute, seconds, value, name)


def _of_text(text: str, name: str) -> tuple[float, float]:
    found = _TEXT.fullmatch(text)
    if found is None:
        raise _no_moment(text, name)
    year, _, month, day, hour, _, minute, second, zone, zone_hour, zone_minute = found.groups()
    try:
        ordinal = date(int(year), int(month), int(day)).toordinal()
    except ValueError:
        raise _no_date(int(year), int(month), int(day), text, name) from None
    if hour is None:
        return _of_clock(ordinal, 0, 0.0, text, name)
    minutes = int(minute or 0)
    seconds = float(second.replace(",", ".")) if second else 0.0
    if minutes > 59:
        raise InputError(f"{name} is {_shown(text)}; an hour has no minute {minutes}")
    if seconds >= 61:
        raise InputError(f"{name} is {_shown(text)}; a minute has no second {second}")
    minutes += 60 * int(hour)
    if minutes > 1440 or (minutes == 1440 and seconds):
        raise InputError(
            f"{name} is {_shown(text)}; a day has the hours 00 to 23 (24:00:00 is its end)"
        )
    if zone is not None:
        ahead = 60 * int(zone_hour) + int(zone_minute or 0)
        if zone != "+":
            ahead = -ahead
        if int(zone_minute or 0) > 59 or not -720 <= ahead <= 840:
            raise InputError(f"{name} is {_shown(text)}; zones go from -12:00 to +14:00")
        minutes -= ahead
    return _of_clock(ordinal, minutes, seconds, text, name)


def _of_clock(
    ordinal: int, minutes: int, seconds: float, value: Any, name: str
) -> tuple[float, float]:
    """Return the parts of a UTC calendar day and a clock; minutes may lie outside the day."""
    day = ordinal + minutes // 1440 + ORDINAL_DAY
    if not FIRST_DAY <= day < END_DAY:
        raise _out_of_range(value, name)
    minute = minutes % 1440
    passed = minute * 60 + seconds
    length = _length(day)
    if seconds >= 60 or passed > length:
        had = 60 + length - DAY_SECONDS if minute == 1439 else 60
        if minute != 1439 or passed >= length:
            raise InputError(
                f"{name} is {_shown(value)}; there was no such second: no leap second was added, "
                f"its minute had {had:g} s in UTC"
            )
    return day, passed / length


def _shown(value: Any) -> str:
    if isinstance(value, float):
        return f"{value:.12g}"
    if isinstance(value, (date, time, np.datetime64)):
        return str(value)
    text = " ".join(repr(value).split())
    return text if len(text) <= 60 else text[:57] + "..."


def _out_of_range(value: Any, name: str) -> CellError:
    if not isinstance(value, float):
        return DomainError(
            f"{name} is {_shown(value)}; it must lie from 1960-01-01 to 2099-12-31 UTC: {WHY}"
        )
    return DomainError(
        f"{name} is {_shown(value)}; a number must be a spreadsheet's date-time, "
        f"{FIRST_DAY - SERIAL_DAY:.0f} or more and below {END_DAY - SERIAL_DAY:.0f}, or a Julian "
        f"date, {FIRST_DAY} or more and below {END_DAY} (1960 to 2099: {WHY}); to a Modified "
        "Julian Date add 2400000.5, and put a date like 20240301 as the text 2024-03-01"
    )


def _no_date(year: int, month: int, day: int, text: str, name: str) -> CellError:
    if not year:
        return _out_of_range(text, name)
    if not 1 <= month <= 12:
        words = f"there is no month {month:02}"
    elif month == 2 and day == 29 and not isleap(year):
        words = f"{year} is no leap year: its February has 28 days"
    else:
        words = f"{month_name[month]} {year} has {monthrange(year, month)[1]} days"
    return InputError(f"{name} is {_shown(text)}; {words}")


def _no_moment(value: Any, name: str) -> CellError:
    words = f"write it like {EXAMPLE}, with the zone after it where it is not UTC"
    if isinstance(value, str):
        swapped = _YEAR_FIRST.fullmatch(value)
        if swapped is not None:
            year, _, month, day = swapped.groups()
            words = f"write the date as {year}-{month:0>2}-{day:0>2}, the time as 22:14:30"
        elif _YEAR_LAST.fullmatch(value):
            words = (
                "which of its numbers is the day and which the month is ambiguous; write the year "
                "first, as in 2024-04-03 for 3 April 2024"
            )
        elif re.fullmatch(r"[0-9]+(?:[.,][0-9]*)?", value):
            words = f"a serial or a Julian date must be a number, not text; else {words}"
    return InputError(f"{name} is {_shown(value)}, not a date and time; {words}")


def _as_array(values: Sequence[Any]) -> NDArray[Any]:
    array = np.asarray(values)
    # numpy would turn a number beside a text into text
    return array if array.dtype.kind in "fiuM" else np.asarray(values, dtype=object)
