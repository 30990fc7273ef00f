"""Values noted for cells, column by column, until they are written."""

from array import array
from collections.abc import Iterator, Mapping, Sequence
from enum import Enum
from itertools import chain, repeat
from math import isfinite
from typing import Final

from workbooks.files.cells import (
    LAST_COLUMN,
    LAST_ROW,
    LogbookError,
    Value,
    cell_name,
    check_value,
    column_letters,
)


class Unset(Enum):
    UNSET = 0


UNSET: Final = Unset.UNSET
"""Where no value was noted; None is one, which empties the cell"""


class _Column:
    """The values noted for a column, by row; what is a long run of finite floats is packed."""

    __slots__ = ("_cells", "_numbers")

    def __init__(self) -> None:
        self._cells: list[Value | Unset] = []
        self._numbers = array("d")
        """The rows after those, a quarter as large as in a list"""

    def __len__(self) -> int:
        return len(self._cells) + len(self._numbers)

    def at(self, row: int) -> Value | Unset:
        """Return the value noted for a row, UNSET where there is none."""
        place = row - len(self._cells)
        if place < 0:
            return self._cells[row]
        return self._numbers[place] if place < len(self._numbers) else UNSET

    def __iter__(self) -> Iterator[Value | Unset]:
        return chain(self._cells, self._numbers)

    def between(self, start: int, stop: int) -> list[Value | Unset]:
        """Return the values from one row to another, UNSET after the last."""
        before = len(self._cells)
        found = self._cells[start:stop]
        if stop > before:
            found += self._numbers[max(start - before, 0) : stop - before]
        return found + [UNSET] * (stop - start - len(found))

    def set(self, row: int, value: Value | Unset) -> None:
        self._unpack()
        self.lengthen(row)
        if row == len(self._cells):
            self._cells.append(value)
        else:
            self._cells[row] = value

    def lengthen(self, length: int) -> None:
        """Note nothing for the rows from the last one up to a length."""
        missing = length - len(self)
        if missing > 0:
            self._unpack()
            self._cells.extend(repeat(UNSET, missing))

    def extend(self, values: "Sequence[Value | Unset]", *, packed: bool) -> None:
        """Note values for the rows after the last one; those to be packed are floats."""
        if packed:
            self._numbers.extend(values)  # type: ignore[arg-type]
        else:
            self._unpack()
            self._cells += values

    def _unpack(self) -> None:
        if self._numbers:
            self._cells += self._numbers
            self._numbers = array("d")


class Edits:
    """The values noted for a sheet, column by column."""

    def __init__(self, sheet: str = "") -> None:
        self._sheet = sheet
        self._columns: dict[int, _Column] = {}

    @classmethod
    def of(cls, edits: Mapping[int, Mapping[int, Value]]) -> "Edits":
        """Return the values of edits[row][column]."""
        made = cls()
        for row, cells in edits.items():
            for column, value in cells.items():
                made.set(row, column, value)
        return made

    def set(self, row: int, column: int, value: Value) -> None:
        """Note a value; raise LogbookError where no cell can hold it."""
        # The common case, a finite float, needs no further look.
        if type(value) is not float or value - value != 0.0:
            check_value(value, f"cell {cell_name(row, column)} of sheet {self._sheet!r}")
        self._cells(row, column).set(row, value)

    def set_column(self, column: int, rows: range, values: Sequence[Value | Unset]) -> None:
        """Note values for the cells of a column; where one is UNSET, none is noted."""
        cells = self._cells(rows.start, column)
        if len(cells) <= rows.start and rows.stop <= LAST_ROW and self._are_sound(column, values):
            cells.lengthen(rows.start)
            cells.extend(values, packed=type(values[0]) is float)
            return
        for row, value in zip(rows, values, strict=True):
            if value is not UNSET:
                self.set(row, column, value)

    def _are_sound(self, column: int, values: Sequence[Value | Unset]) -> bool:
        """Say whether values are of a kind that can be seen to be sound without a look at each."""
        kinds = set(map(type, values))
        if kinds == {float}:
            return isfinite(sum(map(abs, values)))  # type: ignore[arg-type]
        if kinds == {str}:
            for text in set(values):
                check_value(text, f"column {column_letters(column)} of sheet {self._sheet!r}")  # type: ignore[arg-type]
            return True
        return False

    def _cells(self, row: int, column: int) -> _Column:
        if not (1 <= row <= LAST_ROW and 1 <= column <= LAST_COLUMN):
            raise LogbookError(
                f"row {row}, column {column} is outside a sheet: rows go from 1 to {LAST_ROW}, "
                f"columns from 1 to {LAST_COLUMN}"
            )
        cells = self._columns.get(column)
        if cells is None:
            cells = self._columns[column] = _Column()
            # Kept in order, so that a row's cells come from left to right.
            self._columns = dict(sorted(self._columns.items()))
        return cells

    def __bool__(self) -> bool:
        return bool(self._columns)

    def __contains__(self, place: tuple[int, int]) -> bool:
        row, column = place
        cells = self._columns.get(column)
        return cells is not None and cells.at(row) is not UNSET

    @property
    def columns(self) -> list[int]:
        """The columns for which a value was noted, from left to right."""
        return list(self._columns)

    @property
    def last_row(self) -> int:
        """The last row for which a value was noted, 0 where there is none."""
        return max((len(cells) - 1 for cells in self._columns.values()), default=0)

    def row(self, number: int) -> list[tuple[int, Value]]:
        """Return the columns and values noted for a row, from left to right."""
        return [
            (column, value)
            for column, cells in self._columns.items()
            if (value := cells.at(number)) is not UNSET
        ]

    def rows(self, start: int, stop: int) -> Iterator[tuple[Value | Unset, ...]]:
        """Yield the values of `columns` row by row, UNSET where none was noted."""
        return zip(*(cells.between(start, stop) for cells in self._columns.values()), strict=True)

    def column(self, number: int) -> Iterator[tuple[int, Value]]:
        """Yield the rows and values noted for a column, from above."""
        for row, value in enumerate(self._columns.get(number, ())):
            if value is not UNSET:
                yield row, value

    def values(self, column: int, start: int, stop: int) -> list[Value] | None:
        """Return the values noted for some rows of a column, None where one has none."""
        cells = self._columns[column].between(start, stop)
        if UNSET in cells:
            return None
        return cells  # type: ignore[return-value]

    def new_rows(self, after: int, before: int) -> Iterator[int]:
        """Yield the rows between two others for which a value, not an empty one, was noted."""
        for number in range(after + 1, min(before, self.last_row + 1)):
            if any(value is not None for _, value in self.row(number)):
                yield number

    def area(self) -> tuple[int, int, int, int] | None:
        """Return first row and column, last row and column of the values that are not empty."""
        rows: list[int] = []
        columns: list[int] = []
        for column, cells in self._columns.items():
            filled = (
                row for row, value in enumerate(cells) if value is not UNSET and value is not None
            )
            first = next(filled, None)
            if first is None:
                continue
            last = len(cells) - 1
            while cells.at(last) in (UNSET, None):
                last -= 1
            rows += [first, last]
            columns.append(column)
        return (min(rows), min(columns), max(rows), max(columns)) if rows else None
