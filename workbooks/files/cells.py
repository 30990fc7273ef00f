"""What a cell may hold, and what cells and areas are called."""

import math
import re
from dataclasses import dataclass
from typing import NamedTuple

LAST_ROW = 1_048_576
LAST_COLUMN = 16_384
LONGEST_TEXT = 32_767


class LogbookError(ValueError):
    """A workbook that cannot be read or written; the message is the sentence a person reads."""


@dataclass(frozen=True, slots=True)
class ErrorValue:
    """An error that a cell shows in a number's place, such as #NUM!."""

    text: str

    def __post_init__(self) -> None:
        if not re.fullmatch(r"#[A-Z0-9/_]+[!?]?", self.text):
            raise ValueError(f"{self.text!r} is no error value such as #NUM!, #VALUE! or #N/A")

    def __str__(self) -> str:
        return self.text


Value = float | int | str | ErrorValue | None


def column_letters(column: int) -> str:
    """Return a column's letters: 1 is A, 28 is AB."""
    letters = ""
    while column:
        column, rest = divmod(column - 1, 26)
        letters = chr(65 + rest) + letters
    return letters


def column_number(letters: str) -> int:
    """Return a column's number: A is 1, AB is 28."""
    number = 0
    for letter in letters:
        number = number * 26 + ord(letter) - 64
    return number


def cell_name(row: int, column: int) -> str:
    """Return a cell's name: row 17, column 4 is D17."""
    return f"{column_letters(column)}{row}"


class Area(NamedTuple):
    """A rectangle of cells, both ends included."""

    first_row: int
    first_column: int
    last_row: int
    last_column: int

    @classmethod
    def parsed(cls, text: str) -> "Area | None":
        """Return the area that text such as B2:C9 or B2 names, None for anything else."""
        found = re.fullmatch(
            r"\$?([A-Z]{1,3})\$?([0-9]{1,7})(?::\$?([A-Z]{1,3})\$?([0-9]{1,7}))?", text
        )
        if not found:
            return None
        left, top, right, bottom = found.groups()
        return cls(int(top), column_number(left), int(bottom or top), column_number(right or left))

    def __str__(self) -> str:
        first = cell_name(self.first_row, self.first_column)
        last = cell_name(self.last_row, self.last_column)
        return first if first == last else f"{first}:{last}"


def check_value(value: Value, cell: str) -> None:
    """Raise LogbookError when a cell cannot hold `value`; the sentence names `cell`."""
    if value is None or isinstance(value, ErrorValue):
        return
    if isinstance(value, str):
        if len(value) > LONGEST_TEXT:
            raise LogbookError(
                f"{cell} was given a text of {len(value):,} characters, more than the "
                f"{LONGEST_TEXT:,} a cell holds"
            )
        try:
            value.encode()
        except UnicodeEncodeError:
            raise LogbookError(f"{cell} was given a text that is not valid Unicode") from None
        return
    try:
        finite = math.isfinite(value)
    except OverflowError:
        finite = False
    except TypeError:
        raise TypeError(f"{cell} was given {value!r}, not a number, text or ErrorValue") from None
    if not finite:
        raise LogbookError(f"{cell} was given {value}, which is no number a cell can hold")
