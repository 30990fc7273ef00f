"""A sheet's headers held against a recipe: which column is which, and in which unit."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import partial

from cellfuncs import units
from cellfuncs.errors import InputError
from workbooks.logbook import Header, Sheet, cell_name, parse_header
from workbooks.recipe import Column, Recipe, Table


@dataclass(frozen=True)
class Remark:
    """Something that a person should hear, and the cell it is about."""

    cell: str
    sentence: str

    def __str__(self) -> str:
        return f"{self.cell}: {self.sentence}"


@dataclass(frozen=True)
class Place:
    """Where a recipe's column stands in a sheet, and its unit there."""

    column: Column
    number: int
    unit: str

    @property
    def to_recipe(self) -> float:
        return units.factor(self.unit, self.column.unit) if self.column.is_number else 1.0


@dataclass(frozen=True)
class Match:
    """A sheet of a logbook read as a table of a recipe."""

    sheet: Sheet
    table: Table
    header_row: int
    places: Mapping[str, Place]

    def cell(self, row: int, key: str) -> str:
        return f"{self.sheet.name}!{cell_name(row, self.places[key].number)}"


def folded(label: str) -> str:
    """Return a label as it is compared: case and the width of blanks do not count."""
    return " ".join(label.split()).casefold()


def matched(sheet: Sheet, recipe: Recipe) -> Match | None:
    """Return the sheet as the table whose columns it has, None where it has none.

    Raises InputError where it has the columns but a header names a unit that does not fit.
    """
    best: tuple[int, Table, int] | None = None
    for table in recipe.tables:
        labels = labels_of(table)
        row = sheet.header_row(partial(is_header, labels))
        if row is None:
            continue
        headers = [value for value in sheet.top[row - 1] if isinstance(value, str)]
        found = {
            labels[folded(header_of(labels, text).label)]
            for text in headers
            if is_header(labels, text)
        }
        needed = table.required or {column.key for column in table.inputs}
        if needed <= found and (best is None or len(found) > best[0]):
            best = (len(found), table, row)
    if best is None:
        return None
    _, table, row = best
    return Match(sheet, table, row, dict(_placed(sheet, table, row)))


def is_header(labels: Mapping[str, str], text: str) -> bool:
    return folded(header_of(labels, text).label) in labels


def labels_of(table: Table) -> dict[str, str]:
    return {
        folded(label): column.key
        for column in table.sheet.columns
        for label in (column.label, *column.aliases)
    }


def header_of(labels: Mapping[str, str], text: str) -> Header:
    """Return a header's label and unit; brackets that belong to an alias are no unit."""
    return Header(text) if folded(text) in labels else parse_header(text)


def _placed(sheet: Sheet, table: Table, row: int) -> Iterator[tuple[str, Place]]:
    labels = labels_of(table)
    seen: dict[str, int] = {}
    for number, value in enumerate(sheet.top[row - 1], 1):
        if not isinstance(value, str):
            continue
        header = header_of(labels, value)
        key = labels.get(folded(header.label))
        if key is None:
            continue
        where = f"{cell_name(row, number)} holds {value!r}"
        if key in seen:
            raise InputError(
                f"{where}, but {cell_name(row, seen[key])} is that column already; "
                "no row of the sheet was filled"
            )
        seen[key] = number
        column = table.columns[key]
        unit = column.unit if header.unit is None else header.unit
        if column.is_number:
            try:
                units.factor(unit, column.unit)
            except InputError as error:
                raise InputError(f"{where}: {error}; no row of the sheet was filled") from None
        yield key, Place(column, number, unit)
