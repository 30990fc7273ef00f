"""What stands above a sheet's columns, where the sheet is one of a recipe's and where it is not."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.errors import InputError
from workbooks.fill import COMPUTED_WITH
from workbooks.logbook import Logbook, Sheet, cell_name, parse_header
from workbooks.matching import Match, folded, labels_of, matched
from workbooks.recipe import STATUS, Column, Recipe, Table

SUPPORTING: Final = (
    "settings",
    "line names",
    "how to use",
    "provenance",
    "tables",
    "season",
    "chart",
)
"""The sheets of a template that hold no log"""

MISREAD_UNITS: Final = {"A": "Angstrom", "C": "deg_C"}
"""What a person writes for a unit, where the standard reads the ampere and the coulomb"""


@dataclass(frozen=True)
class Heading:
    """A column's header: what it says, and the recipe's column that it stands for, if any."""

    number: int
    text: str
    label: str
    written_unit: str | None
    """What stands in brackets after the label, whether it is a unit or not"""
    in_square_brackets: bool
    column: Column | None

    @cached_property
    def unit(self) -> str | None:
        """The unit by the header, or else by the recipe; None where neither gives one."""
        if self.written_unit is not None:
            return self.written_unit if is_unit(self.written_unit) else None
        return self.column.unit if self.column and self.column.is_number else None

    @property
    def is_trail(self) -> bool:
        return folded(self.label) in (folded(COMPUTED_WITH), folded(STATUS))

    @property
    def is_computed(self) -> bool:
        return self.is_trail or (self.column is not None and self.column.role == "computed")


@dataclass(frozen=True)
class Log:
    """A sheet that holds a log: its header row and its columns.

    `match` is None where no recipe fits; `obstacle` then says why one that has the columns did not.
    """

    sheet: Sheet
    header_row: int
    headings: tuple[Heading, ...]
    match: Match | None
    obstacle: str = ""

    def cell(self, row: int, number: int) -> str:
        return f"{self.sheet.name}!{cell_name(row, number)}"

    @cached_property
    def columns(self) -> dict[int, list[Any]]:
        """The columns under headings, each from row 1"""
        return self.sheet.columns({heading.number for heading in self.headings})

    def value(self, row: int, number: int) -> Any:
        cells = self.columns.get(number)
        if cells is None:
            return value_at(self.sheet, row, number)
        return cells[row - 1] if row <= len(cells) else None

    def values(self, number: int) -> list[Any]:
        """Return the cells of a column under a heading, in the rows in use."""
        cells, rows = self.columns[number], self.rows_in_use
        if isinstance(rows, range):
            return cells[rows.start - 1 : rows.stop - 1]
        return [cells[row - 1] for row in rows]

    def below(self, number: int) -> Iterator[tuple[int, Any]]:
        """Yield row and value of all cells of a column under a heading."""
        return enumerate(self.columns[number][self.header_row :], self.header_row + 1)

    @property
    def row_numbers(self) -> range:
        return range(self.header_row + 1, self.sheet.height + 1)

    @cached_property
    def by_number(self) -> dict[int, Heading]:
        return {heading.number: heading for heading in self.headings}

    @cached_property
    def rows_in_use(self) -> Sequence[int]:
        """The rows that hold a measurement; a remark under the table is none.

        With a recipe, what `fill` would compute; without, those with two filled cells or, in a
        table of one column, with one.
        """
        if self.match is not None:
            numbers = [
                self.match.places[key].number
                for key in self.match.table.anchors
                if key in self.match.places
            ]
            least = 1
        else:
            numbers = [heading.number for heading in self.headings if not heading.is_trail]
            least = min(2, len(numbers))
        begin = self.header_row
        filled: Any = 0
        for number in numbers:
            cells = self.columns[number][begin:]
            filled = filled + np.array([value is not None for value in cells], dtype=np.int32)
        rows = (np.flatnonzero(filled >= least) + begin + 1).tolist() if numbers else []
        if rows and rows[-1] - rows[0] + 1 == len(rows):
            return range(rows[0], rows[-1] + 1)
        return rows


def is_unit(text: str) -> bool:
    """Tell whether a text in a header is a unit that means what its writer meant."""
    if text in MISREAD_UNITS:
        return False
    try:
        units.unit_of(text)
    except InputError:
        return False
    return True


def value_at(sheet: Sheet, row: int, number: int) -> Any:
    if not 0 < row <= len(sheet.rows):
        return None
    cells = sheet.rows[row - 1]
    return cells[number - 1] if 0 < number <= len(cells) else None


def logs_of(logbook: Logbook, recipe: Recipe | None) -> list[Log]:
    """Return the sheets of a logbook that hold a log, in the workbook's order.

    A template's supporting sheets are none. With a recipe its tables come into it, and other
    sheets with a header row as well.
    """
    from_template = "recipe_name" in logbook.named_cells
    found = []
    for name in logbook.sheet_names:
        if from_template and _is_supporting(name):
            continue
        log = _log_of(logbook.sheet(name), recipe)
        if log is not None:
            found.append(log)
    return found


def _is_supporting(name: str) -> bool:
    return folded(name) in SUPPORTING or folded(name).endswith((" points", " chart", " working"))


def _log_of(sheet: Sheet, recipe: Recipe | None) -> Log | None:
    match, obstacle = None, ""
    if recipe is not None:
        try:
            match = matched(sheet, recipe)
        except InputError as error:
            # what it says of filling is no news here
            obstacle = str(error).partition("; no row")[0]
    if match is not None:
        table: Table | None = match.table
        header_row: int | None = match.header_row
    else:
        header_row = _header_row(sheet)
        table = _likeliest(sheet, header_row, recipe) if recipe and header_row else None
    if header_row is None:
        return None
    headings = tuple(_headings(sheet, header_row, table))
    return Log(sheet, header_row, headings, match, obstacle) if headings else None


def _header_row(sheet: Sheet) -> int | None:
    """Return the first row of texts alone that is nearly as full as the fullest row."""
    rows = [[value for value in row if value is not None] for row in sheet.top]
    fullest = max((len(row) for row in rows), default=0)
    for number, row in enumerate(rows, 1):
        if len(row) >= max(2, 0.6 * fullest) and all(isinstance(value, str) for value in row):
            return number
    return None


def _likeliest(sheet: Sheet, header_row: int, recipe: Recipe) -> Table | None:
    """Return the table with the most of its columns here, though they do not make it up."""
    counted = [
        (sum(heading.column is not None for heading in _headings(sheet, header_row, table)), table)
        for table in recipe.tables
    ]
    most, table = max(counted, key=lambda pair: pair[0])
    return table if most else None


def _headings(sheet: Sheet, header_row: int, table: Table | None) -> Iterator[Heading]:
    labels: dict[str, Column] = {}
    if table is not None:
        labels = {label: table.columns[key] for label, key in labels_of(table).items()}
    for number, value in enumerate(sheet.top[header_row - 1], 1):
        if not isinstance(value, str):
            continue
        text = " ".join(value.split())
        named = labels.get(folded(text))
        if named is not None:
            yield Heading(number, text, text, None, False, named)
            continue
        header = parse_header(text)
        yield Heading(
            number,
            text,
            header.label,
            header.unit,
            bool(re.search(r"\[[^\[\]]*\]$", text)),
            labels.get(folded(header.label)),
        )
