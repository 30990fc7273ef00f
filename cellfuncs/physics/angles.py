"""Angles as people write them: one decimal, or hours or degrees with minutes and seconds."""

import re
from datetime import date, time, timedelta
from math import isfinite
from typing import Any, Final

import numpy as np

from cellfuncs.errors import DomainError, InputError

HOUR: Final = 15.0
"""Degrees in an hour"""
MOST: Final = 360.0

_HOURS: Final = "h|ʰ"
_DEGREES: Final = "deg|d|ᵈ|°|º|˚"
_MINUTES: Final = "min|m|ᵐ|['′’´]"
_SECONDS: Final = "sec|s|ˢ|''|′′|’’|´´|[\"″”]"
_NUMBER: Final = "[0-9]+(?:[.,][0-9]*)?"
_BETWEEN: Final = r"\s*:\s*|\s+"

_TEXT: Final = re.compile(
    rf"(?P<sign>[+−–-]?)\s*(?P<first>{_NUMBER})"
    rf"(?:\s*(?P<hours>{_HOURS})\s*|\s*(?P<degrees>{_DEGREES})\s*|(?:{_BETWEEN})(?=[0-9])|\Z)"
    rf"(?:(?P<second>{_NUMBER})(?:\s*(?P<minutes>{_MINUTES})\s*|(?:{_BETWEEN})(?=[0-9])|\Z)"
    rf"(?:(?P<third>{_NUMBER})\s*(?P<seconds>{_SECONDS})?)?)?"
)
# 12ʰ34ᵐ56ˢ.7, as catalogues print it
_MARK_BEFORE_DECIMALS: Final = re.compile(
    rf"(?P<mark>{_HOURS}|{_DEGREES}|{_SECONDS}|{_MINUTES})(?P<decimals>[.,][0-9]+)"
)
_HEMISPHERE: Final = re.compile(r"(?P<body>.*\S)\s*(?P<letter>[NSEW])", re.DOTALL)
_OPEN_SECONDS: Final = re.compile(r"[^0-9]*[0-9]+\s*[hHdD].*[mM]\s*[0-9.,]+", re.DOTALL)

GOOD: Final = "write it like 12:34:56.7, 12h34m56.7s or -12d34m56s"
TURNED: Final = (
    "the spreadsheet turned it into a time of day; format the cell as text and type it again"
)


def degrees(value: Any, as_hours: bool, name: str = "text") -> float:
    """Return an angle in degrees from any common writing of it.

    value: text in one, two or three fields (hours or degrees, minutes, seconds), of which the last
        may have decimals; or a number, which is in degrees.
    as_hours: what two or three fields are that carry no mark. A mark h, d or ° says it itself, and
        a letter N, S, E or W at the end says degrees.
    name: what messages call the value.
    Raises InputError for what is no angle, or a single number with neither mark nor unit where
    hours are expected; DomainError outside 0 ≤ hours < 24 or -360 ≤ degrees ≤ 360.
    """
    if isinstance(value, str):
        return _of_text(value.strip(), as_hours, name)
    if isinstance(value, (date, time, timedelta, np.datetime64, np.timedelta64)):
        raise InputError(f"{name} is {value}, not an angle; {TURNED}")
    if isinstance(value, (bool, np.bool_, bytes, complex, np.complexfloating)):
        raise _unreadable(value, name)
    try:
        number = float(value)
    except OverflowError:
        raise DomainError(f"{name} is too large for an angle") from None
    except (TypeError, ValueError, ArithmeticError):
        raise _unreadable(value, name) from None
    if as_hours:
        turned = f"; or {TURNED}" if 0 < number < 1 else ""
        raise _hours_or_degrees(f"{number:.10g}", name, turned)
    if not isfinite(number) or abs(number) > MOST:
        raise DomainError(f"{name} is {number:.10g}; it must be from -360 to 360 degrees")
    return number


def _of_text(text: str, as_hours: bool, name: str) -> float:
    body, south_or_west = text, None
    hemisphere = _HEMISPHERE.fullmatch(text)
    if hemisphere is not None:
        body, letter = hemisphere.group("body", "letter")
        if letter == "S" and _OPEN_SECONDS.fullmatch(body):
            if body[0] not in "+-−–" and "h" not in body.lower():
                raise InputError(
                    f"{name} is {_shown(text)}; its S may be seconds or South: write s, or 10s S"
                )
            body = text
        else:
            south_or_west = letter in "SW"
    found = _TEXT.fullmatch(_MARK_BEFORE_DECIMALS.sub(r"\g<decimals>\g<mark>", body.lower()))
    if found is None:
        raise _unreadable(text, name)
    sign, *fields = found.group("sign", "first", "second", "third")
    hours, in_degrees, minutes, seconds = found.group("hours", "degrees", "minutes", "seconds")
    numbers = [float(field.replace(",", ".")) for field in fields if field is not None]
    if (
        (minutes and not (hours or in_degrees))
        or (seconds and not minutes)
        or any("." in field or "," in field for field in fields[: len(numbers) - 1])
    ):
        raise _unreadable(text, name)
    if any(number >= 60 for number in numbers[1:]):
        raise InputError(f"{name} is {_shown(text)}; minutes and seconds must be below 60")
    if south_or_west is not None and (sign or hours or (as_hours and not in_degrees)):
        raise InputError(
            f"{name} is {_shown(text)}; N, S, E or W at the end belong to degrees without a sign"
        )
    if as_hours and len(numbers) == 1 and not (hours or in_degrees):
        raise _hours_or_degrees(_shown(text), name)
    numbers += [0.0] * (3 - len(numbers))
    size = (numbers[0] * 3600 + numbers[1] * 60 + numbers[2]) / 3600
    negative = sign not in ("", "+")
    if hours or (as_hours and not in_degrees):
        if negative or size >= 24:
            raise DomainError(
                f"{name} is {_shown(text)}; hours must be 0 or more and below 24 "
                "(degrees carry a d or °)"
            )
        return size * HOUR
    if size > MOST:
        raise DomainError(f"{name} is {_shown(text)}; it must be from -360 to 360 degrees")
    return -size if negative or south_or_west else size


def _shown(value: Any) -> str:
    text = " ".join(repr(value).split())
    return text if len(text) <= 60 else text[:57] + "..."


def _unreadable(value: Any, name: str) -> InputError:
    return InputError(f"{name} is {_shown(value)}, not an angle; {GOOD}")


def _hours_or_degrees(shown: str, name: str, more: str = "") -> InputError:
    return InputError(
        f"{name} is {shown}, which may be hours or degrees; write it like 10.68h, 10.68d or "
        f"10:40:48{more}"
    )
