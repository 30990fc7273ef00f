"""Mistakes in what was typed: dates, texts, impossible values, the same row twice."""

from collections.abc import Iterator, Sequence
from datetime import date, time, timedelta
from typing import Any, Final

from cellfuncs import units
from cellfuncs.catalogue import shown
from workbooks.audit.examined import FEWEST, DateText, Examined
from workbooks.audit.findings import Spot
from workbooks.audit.header_words import (
    is_line_name,
    is_measured_wavelength,
    is_rest_wavelength,
    medium_named,
    medium_of_line,
    number_in,
    possible,
    words,
)
from workbooks.headings import Heading
from workbooks.matching import folded


def of_dates(sheet: Examined) -> Iterator[Spot]:
    """Yield the dates that stand where numbers or texts belong."""
    for heading in sheet.log.headings:
        kind = sheet.kinds[heading.number]
        if kind not in ("number", "text") or heading.is_trail:
            continue
        for row, value in sheet.cells(heading, date, time, timedelta, DateText):
            if not _is_duration(heading, value):
                sheet.told.add((row, heading.number))
                yield row, heading.number, "turned into a date", _as_typed(value, kind)


def _is_duration(heading: Heading, value: Any) -> bool:
    return isinstance(value, timedelta) and units.same_kind(heading.unit or "", "s")


_MONTHS: Final = "JAN FEB MAR APR MAY JUN JUL AUG SEP OCT NOV DEC".split()


def _as_typed(value: Any, kind: str) -> str:
    """Say what a date in a wrong place may have been when it was typed."""
    if isinstance(value, DateText):
        return (
            f"holds {shown(str(value))}, as spreadsheets write a date; perhaps one made a date "
            "of what was typed: set the cell to text or number before typing it again"
        )
    if not isinstance(value, date):
        return f"holds the time {value}; perhaps it was typed with a colon"
    shown_date = f"{value.day} {_MONTHS[value.month - 1].capitalize()} {value.year}"
    if kind == "number":
        guesses = f"{value.day}.{value.month} or {value.month}.{value.day}"
        if value.day == 1:
            guesses += f" or {value.month}.{value.year}"
    else:
        guesses = f"{_MONTHS[value.month - 1]}{value.day} or {value.day}-{value.month}"
        if value.day == 1:
            guesses += f" or {_MONTHS[value.month - 1]}-{value.year % 100:02d}"
    return (
        f"holds the date {shown_date}; perhaps {guesses} was typed and the spreadsheet made a date "
        "of it: set the cell to text or number first"
    )


def of_texts(sheet: Examined) -> Iterator[Spot]:
    """Yield the texts that stand where numbers belong."""
    for heading in sheet.log.headings:
        if sheet.kinds[heading.number] != "number":
            continue
        for row, value in sheet.cells(heading, str):
            if isinstance(value, DateText):
                continue
            number = number_in(value)
            place = (row, heading.number)
            if number is not None:
                sheet.told.add(place)
                yield (
                    *place,
                    "number as text",
                    f"{shown(value)} is text to the spreadsheet, which leaves it out of every "
                    f"sum; type {number}",
                )
            elif heading.column is not None and not _stands_for_nothing(sheet, heading, row):
                sheet.told.add(place)
                yield *place, "not a number", f"{shown(value)} stands where a number belongs"


def _stands_for_nothing(sheet: Examined, heading: Heading, row: int) -> bool:
    """Tell whether a formula gives words where it has no number to give."""
    return row in sheet.formulas.by_column.get(heading.number, {})


def of_rest_wavelengths(sheet: Examined) -> Iterator[Spot]:
    """Yield the rest wavelengths typed in one medium beside measurements in the other."""
    line = next((each for each in sheet.log.headings if is_line_name(each)), None)
    measured = next((each for each in sheet.log.headings if is_measured_wavelength(each)), None)
    if line is None or measured is None:
        return
    for heading in sheet.log.headings:
        if not (is_rest_wavelength(heading) and heading.unit):
            continue
        if heading.is_computed or sheet.has_formulas[heading.number]:
            continue
        if not units.same_kind(heading.unit, "Angstrom"):
            continue
        factor = units.factor(heading.unit, "Angstrom")
        for row, value in sheet.cells(heading, float):
            name = sheet.value(row, line.number)
            medium = medium_named(words(measured.text)) or sheet.row_medium(row)
            if not isinstance(name, str) or medium is None:
                continue
            rest = medium_of_line(name, value * factor)
            if rest is not None and rest != medium:
                yield (
                    row,
                    heading.number,
                    "media mixed",
                    f"{value:g} {heading.unit} is the wavelength of {name.strip()} in {rest}, "
                    f"but the measurement is in {medium}",
                )


def of_limits(sheet: Examined) -> Iterator[Spot]:
    """Yield the values outside what the recipe allows or nature does, and unknown words."""
    match = sheet.log.match
    if match is not None:
        for row, problems in sorted(sheet.problems.items()):
            for problem, sentence in problems:
                place = match.places.get(problem.column.key)
                if place is None or (row, place.number) in sheet.told:
                    continue
                if problem.kind == "limit":
                    yield row, place.number, "out of range", sentence
                elif problem.kind.startswith("not a ") and problem.kind != "not a number":
                    sheet.told.add((row, place.number))
                    yield row, place.number, "unknown word", sentence
    for heading in sheet.log.headings:
        if heading.column is not None or sheet.kinds[heading.number] != "number":
            continue
        bounds = possible(heading)
        if bounds is None:
            continue
        low, high, sentence = bounds
        for row, value in sheet.cells(heading, float):
            if not low <= value <= high:
                yield row, heading.number, "out of range", f"is {value:g}; {sentence}"


def of_repeated_rows(sheet: Examined) -> Iterator[Spot]:
    """Yield the rows in which all that was typed is what another row holds already."""
    typed = [
        heading
        for heading in sheet.log.headings
        if not heading.is_computed and not sheet.has_formulas[heading.number]
    ]
    if not typed:
        return
    seen: dict[tuple[Any, ...], int] = {}
    known: dict[str, str] = {}
    columns = [_comparable(sheet.log.values(heading.number), known) for heading in typed]
    for row, cells in zip(sheet.rows, zip(*columns, strict=True), strict=True):
        filled = len(cells) - cells.count(None)
        if filled < min(FEWEST, len(typed)) or filled < 2:
            continue
        first = seen.setdefault(cells, row)
        if first != row:
            number = next(
                heading.number for heading in typed if sheet.value(row, heading.number) is not None
            )
            yield row, number, "repeated row", f"row {row} holds what row {first} holds"


def _comparable(values: Sequence[Any], known: dict[str, str]) -> Iterator[Any]:
    """Yield values as they are compared; a text that is known is folded once."""
    for value in values:
        if type(value) is str:
            yield known.get(value) or known.setdefault(value, folded(value))
        else:
            yield value
