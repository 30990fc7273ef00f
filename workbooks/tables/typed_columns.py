"""A log's columns taken out of the sheet, each of one type: numbers, truths, texts or times."""

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, time, timedelta
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.catalogue import shown
from workbooks.files.cells import ErrorValue, LogbookError
from workbooks.headings import Heading, Log
from workbooks.matching import Remark
from workbooks.tables.ascii_spelling import ascii_of

J2000: Final = datetime(2000, 1, 1, 12)
J2000_JD: Final = 2_451_545.0
"""The Julian date of that noon"""

LEAST_JULIAN_DATE: Final = 1_000_000.0
"""A number in a column of times is a Julian date from here on (the contract of the functions)"""

UTC_SCALE: Final = "UTC"

SAYS_UTC: Final = re.compile(r"(?i)\b(ut|utc|ut1)\b")

_KINDS: Final = {
    bool: "truth",
    float: "number",
    int: "number",
    ErrorValue: "error",
    datetime: "date",
    date: "date",
    timedelta: "duration",
}
"""What a cell holds, by its type; everything else is text"""

BLOCK: Final = 10_000
"""Rows that are spelt out at a time"""


@dataclass
class TypedColumn:
    """A column on its way out, with what is missing marked."""

    name: str
    label: str
    unit: str
    description: str
    ucd: str
    values: Any
    """An array of float64 or bool, or a list of texts, in which "" stands for what is missing"""
    missing: Any
    """An array of bool"""
    time_format: str = ""
    """"iso" or "jd" in a column of times"""
    time_scale: str = ""
    """UTC where the sheet or the recipe says so"""

    @property
    def is_text(self) -> bool:
        return isinstance(self.values, list)

    @property
    def is_truth(self) -> bool:
        return not self.is_text and self.values.dtype == bool

    @property
    def is_number(self) -> bool:
        return not self.is_text and not self.is_truth


@dataclass
class TypedTable:
    """A log's columns, and what is to be said of them."""

    columns: list[TypedColumn] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    problems: list[Remark] = field(default_factory=list)
    """Cells whose value could not go into their column"""


def typed(log: Log, dates: str) -> TypedTable:
    """Return a log's columns in the sheet's order.

    dates: "iso" for ISO 8601 text, "jd" for Julian dates
    Raises LogbookError for a log without a row of values.
    """
    return _Reader(log, dates).table()


@dataclass
class _Reader:
    log: Log
    dates: str

    def table(self) -> TypedTable:
        self.rows = self.log.rows_in_use
        if not self.rows:
            raise LogbookError(
                f"{self.log.sheet.path}: sheet {self.log.sheet.name!r} has headers, but no row of "
                "values under them"
            )
        self.found = TypedTable()
        self._names: set[str] = set()
        self._left_out_rows()
        self._uncalculated()
        self.found.columns = [self._column(heading) for heading in self.log.headings]
        return self.found

    def _left_out_rows(self) -> None:
        numbers = [heading.number for heading in self.log.headings if not heading.is_trail]
        for row in sorted(set(self.log.row_numbers) - set(self.rows)):
            texts = [self.log.value(row, number) for number in numbers]
            if any(text is not None for text in texts):
                first = next(shown(text) for text in texts if text is not None)
                self.found.notes.append(f"row {row} holds no measurement ({first}): left out")

    def _uncalculated(self) -> None:
        """Say where a formula's result was never stored: its cell looks like an empty one"""
        columns = self.log.sheet.formula_columns
        first = None
        for row in self.rows:
            for heading in self.log.headings:
                place = (row, heading.number)
                if heading.number in columns and self.log.sheet.has_formula(*place):
                    if self.log.value(*place) is not None:
                        return
                    first = first or place
        if first:
            self.found.problems.append(
                Remark(
                    self.log.cell(*first),
                    "this formula and all others of the sheet hold no results: fill the logbook "
                    "first, or save it in a spreadsheet program",
                )
            )

    def _column(self, heading: Heading) -> TypedColumn:
        cells = self.log.values(heading.number)
        kinds = _kinds(cells)
        wanted = kinds - {"error"}
        column = heading.column
        if column is not None and column.kind == "time":
            made = self._times(heading, cells)
        elif column is not None and column.is_number:
            made = self._numbers(heading, cells, kinds)
        elif column is not None:
            made = self._texts(heading, cells, kinds)
        elif wanted == {"date"}:
            made = self._times(heading, cells)
        elif wanted == {"truth"}:
            made = self._truths(heading, cells, kinds)
        elif wanted and wanted <= {"number", "duration"}:
            made = self._numbers(heading, cells, kinds)
        elif heading.unit and "number" in wanted:
            # a unit in the header says that what is no number slipped in
            made = self._numbers(heading, cells, kinds)
        else:
            made = self._texts(heading, cells, kinds)
        self._describe(made, heading)
        return made

    def _describe(self, made: TypedColumn, heading: Heading) -> None:
        column = heading.column
        made.name = self._name(column.key if column else heading.label)
        made.label = heading.label
        made.ucd = getattr(column, "ucd", "") if column else ""
        made.description = heading.text if heading.written_unit and not made.unit else heading.label
        if column is not None and column.note:
            made.description += f": {column.note}"
        if column is not None and column.formula:
            made.description += f" Formula: {column.formula}"
        if heading.written_unit and not heading.unit and made.is_number:
            self.found.notes.append(
                f"{self.log.cell(self.log.header_row, heading.number)}: "
                f"{heading.written_unit!r} cannot be written along as a unit"
            )

    def _name(self, text: str) -> str:
        """Return a name that every format takes: ASCII letters, digits and _, told apart by more
        than case."""
        name = re.sub(r"[^0-9a-zA-Z]+", "_", ascii_of(text)[0]).strip("_").lower() or "column"
        if name[0].isdigit():
            name = f"column_{name}"
        name = name[:60]
        unique, count = name, 1
        while unique in self._names:
            count += 1
            unique = f"{name}_{count}"
        self._names.add(unique)
        return unique

    def _refused(self, index: int, heading: Heading, value: Any, wanted: str) -> None:
        held = str(value) if isinstance(value, ErrorValue) else shown(value)
        self.found.problems.append(
            Remark(
                self.log.cell(self.rows[index], heading.number),
                f"holds {held}, not {wanted}; missing in the output",
            )
        )

    def _numbers(self, heading: Heading, cells: Sequence[Any], kinds: set[str]) -> TypedColumn:
        unit = heading.unit or ""
        plain = kinds <= {"number"}
        # None becomes NaN
        values = np.array(cells, dtype=float) if plain else np.full(len(cells), np.nan)
        for index, value in enumerate(() if plain else cells):
            kind = _kind(value)
            if kind == "number":
                values[index] = value
            elif kind == "duration" and (not unit or units.same_kind(unit, "s")):
                # a spreadsheet counts a duration in days
                unit = unit or "d"
                values[index] = value.total_seconds() * units.factor("s", unit)
            elif value is not None:
                self._refused(index, heading, value, "a number")
        for index in np.flatnonzero(np.isinf(values)).tolist():
            # a spreadsheet has no infinity, and the formats spell it in ways of their own
            self._refused(index, heading, cells[index], "a finite number")
            values[index] = np.nan
        return _made(values, np.isnan(values), unit)

    def _truths(self, heading: Heading, cells: Sequence[Any], kinds: set[str]) -> TypedColumn:
        missing = np.array([not isinstance(value, bool) for value in cells])
        if missing.any():
            # no format but one can say of a truth that it is missing
            return self._texts(heading, cells, kinds, "TRUE or FALSE")
        return _made(np.array(cells, dtype=bool), missing)

    def _texts(
        self, heading: Heading, cells: Sequence[Any], kinds: set[str], wanted: str = "a text"
    ) -> TypedColumn:
        if "error" in kinds:
            cells = list(cells)
            for index, value in enumerate(cells):
                if isinstance(value, ErrorValue):
                    self._refused(index, heading, value, wanted)
                    cells[index] = None
        texts = ["" if value is None else text_of(value) for value in cells]
        if heading.column is None and "number" in kinds and kinds - {"number", "error"}:
            first = next(
                row for row, value in zip(self.rows, cells, strict=True) if _kind(value) == "number"
            )
            self.found.notes.append(
                f"{self.log.cell(first, heading.number)}: «{heading.label}» holds texts and "
                "numbers; written as text"
            )
        return _made(texts, np.array([not text for text in texts]))

    def _times(self, heading: Heading, cells: Sequence[Any]) -> TypedColumn:
        stamps: list[datetime | None] = []
        for index, value in enumerate(cells):
            stamp = _stamp(value)
            if stamp is None and value is not None:
                self._refused(index, heading, value, "a date")
            stamps.append(stamp)
        missing = np.array([stamp is None for stamp in stamps])
        says_utc = heading.column is not None or bool(SAYS_UTC.search(heading.text))
        if self.dates == "jd":
            values = np.array([np.nan if s is None else julian_date(s) for s in stamps])
            made = _made(values, missing, "d")
        else:
            made = _made(["" if s is None else _iso(s) for s in stamps], missing)
        made.time_format = self.dates
        made.time_scale = UTC_SCALE if says_utc else ""
        return made


def _made(values: Any, missing: Any, unit: str = "") -> TypedColumn:
    return TypedColumn("", "", unit, "", "", values, missing)


def _kind(value: Any) -> str:
    return _KINDS.get(type(value), "text")


def _kinds(cells: Sequence[Any]) -> set[str]:
    types = set(map(type, cells)) - {type(None)}
    return {_KINDS.get(each, "text") for each in types}


def text_of(value: Any) -> str:
    """Return a cell's value as text."""
    if isinstance(value, float):
        return repr(value).removesuffix(".0")
    if isinstance(value, str):
        # blanks at the ends say nothing, and half of the formats would lose them
        return value.strip()
    if isinstance(value, bool):
        return "TRUE" if value else "FALSE"
    if isinstance(value, datetime):
        return _iso(value)
    if isinstance(value, time):
        return value.isoformat()
    return str(value).strip()


def in_rows(
    columns: Sequence[TypedColumn], spelt: Callable[[TypedColumn, list[Any]], list[str]]
) -> Iterator[tuple[str, ...]]:
    """Yield a table row by row as texts, empty for what is missing.

    spelt: what gives a new list with the texts of some of a column's values
    """
    rows = len(columns[0].values)
    for start in range(0, rows, BLOCK):
        stretch = slice(start, start + BLOCK)
        blocks = []
        for column in columns:
            values = column.values[stretch]
            blocks.append(spelt(column, values if column.is_text else values.tolist()))
            for index in np.flatnonzero(column.missing[stretch]).tolist():
                blocks[-1][index] = ""
        yield from zip(*blocks, strict=True)


def _stamp(value: Any) -> datetime | None:
    if isinstance(value, datetime):
        return value
    if isinstance(value, date):
        return datetime.combine(value, time())
    if isinstance(value, str):
        text = value.strip().removesuffix("Z").removesuffix("z")
        try:
            parsed = datetime.fromisoformat(text)
        except ValueError:
            return None
        return parsed.astimezone(UTC).replace(tzinfo=None) if parsed.tzinfo else parsed
    if isinstance(value, float) and value > LEAST_JULIAN_DATE:
        try:
            return J2000 + timedelta(days=value - J2000_JD)
        except OverflowError:
            return None
    return None


def _iso(stamp: datetime) -> str:
    """Return ISO 8601 text; a spreadsheet's day count leaves microseconds that nobody typed."""
    whole = stamp + timedelta(microseconds=500)
    whole = whole.replace(microsecond=whole.microsecond // 1000 * 1000)
    return whole.isoformat(timespec="milliseconds" if whole.microsecond else "seconds")


def julian_date(stamp: datetime) -> float:
    """Return the Julian date of a civil date and time, in the scale of that time."""
    return J2000_JD + (stamp - J2000) / timedelta(days=1)
