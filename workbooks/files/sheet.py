"""A sheet as rows or columns of values, whatever file it comes from, and the cells to be set."""

from abc import ABC, abstractmethod
from collections.abc import Callable, Collection, Iterable, Mapping, Sequence
from datetime import date, datetime, time
from functools import cached_property
from itertools import repeat
from pathlib import Path
from typing import Any, Final

from workbooks.files.cells import LAST_ROW, Area, LogbookError, Value, cell_name
from workbooks.files.edits import Edits

HEADER_ROWS: Final = 30
MOST_CELLS: Final = 40_000_000
"""Cells that are laid out as rows: one stray cell in the far corner would claim 17 000 million"""


class Gathered:
    """The columns that were asked for, and how far every column goes; of others no value is kept.

    The values are as the file stores them: float, str, bool, datetime, time, timedelta or
    ErrorValue; None for an empty cell and for one that holds only blanks.
    """

    def __init__(self, wanted: Collection[int] | None) -> None:
        """Gather some columns, or with None all of them."""
        self._wanted = wanted
        self._values: dict[int, list[Any]] = {}
        # Most texts come again and again; each is kept once.
        self._texts: dict[str, str] = {}
        self.last_filled: dict[int, int] = {}
        """The last row that holds a value, by column"""

    def add(self, first_row: int, first_column: int, rows: Sequence[Sequence[Any]]) -> None:
        """Take in a rectangle of values, which is below those before it."""
        for number, values in enumerate(zip(*rows, strict=True), first_column):
            if self._wanted is None or number in self._wanted:
                self.add_column(number, first_row, values)
            else:
                self._note_last(number, first_row, values)

    def add_column(self, number: int, first_row: int, values: Sequence[Any]) -> None:
        """Take in values of one column that is wanted."""
        cells = self._values.setdefault(number, [])
        cells.extend(repeat(None, first_row - 1 - len(cells)))
        plain = self._plain
        cells.extend([value if type(value) is float else plain(value) for value in values])
        self._note_last(number, first_row, values)

    def set(self, row: int, column: int, value: Any) -> None:
        """Take in one value, perhaps an error where the reader saw an empty cell."""
        value = self._plain(value)
        if value is None:
            return
        self.last_filled[column] = max(row, self.last_filled.get(column, 0))
        if self._wanted is None or column in self._wanted:
            cells = self._values.setdefault(column, [])
            cells.extend(repeat(None, row - len(cells)))
            cells[row - 1] = value

    def columns(self, height: int) -> dict[int, list[Any]]:
        """Return the wanted columns, each `height` long; `columns[4][16]` is cell D17."""
        for cells in self._values.values():
            cells.extend(repeat(None, height - len(cells)))
        for number in self._wanted or ():
            if number not in self._values:
                self._values[number] = [None] * height
        return self._values

    def _note_last(self, number: int, first_row: int, values: Sequence[Any]) -> None:
        for place in range(len(values) - 1, -1, -1):
            if self._plain(values[place]) is not None:
                self.last_filled[number] = first_row + place
                return

    def _plain(self, value: Any) -> Any:
        if isinstance(value, str):
            if not value or value.isspace():
                return None
            return self._texts.setdefault(value, value)
        # calamine gives a date-time that falls on midnight as a date; a column of times must not
        # change type there.
        if isinstance(value, date) and not isinstance(value, datetime):
            return datetime.combine(value, time())
        return value


class Sheet(ABC):
    """One sheet. Rows and columns are counted from 1, as the sheet's own row numbers are."""

    def __init__(self, path: Path, name: str) -> None:
        """Use `Logbook.sheet`."""
        self.name = name
        self.path = path
        self._edits = Edits(name)

    # -- reading

    @abstractmethod
    def _gather(self, wanted: Collection[int] | None, most_rows: int = LAST_ROW) -> Gathered:
        """Read the sheet, or at least its first `most_rows` rows."""

    @property
    @abstractmethod
    def height(self) -> int:
        """The last row that holds something."""

    @property
    @abstractmethod
    def width(self) -> int:
        """The last column that holds something."""

    @cached_property
    def rows(self) -> list[list[object]]:
        """The values as the file stores them: `rows[16][3]` is cell D17.

        float, str, bool, datetime, time, timedelta or ErrorValue; None for an empty cell and for
        one that holds only blanks. All rows are of one length. Cells set since are not in it.
        """
        self._take_stock()
        height, width = self.height, self.width
        if height * width > MOST_CELLS:
            raise LogbookError(
                f"{self.path}: sheet {self.name!r} reaches to "
                f"{cell_name(height, width)}, more than the {MOST_CELLS:,} cells allowed"
            )
        return _laid_out(self._gather(None).columns(height), height, width)

    @cached_property
    def top(self) -> list[list[object]]:
        """The first rows, among which headers are looked for; as `rows`, perhaps less wide."""
        if "rows" in self.__dict__:
            return self.rows[:HEADER_ROWS]
        columns = self._gather(None, HEADER_ROWS).columns(0)
        height = min(HEADER_ROWS, max(map(len, columns.values()), default=0))
        for cells in columns.values():
            cells.extend(repeat(None, height - len(cells)))
        return _laid_out(columns, height, max(columns, default=0))

    def columns(self, wanted: Collection[int]) -> dict[int, list[Any]]:
        """Return whole columns by number, as `rows` would give them, and read nothing else.

        `columns({4})[4][16]` is cell D17.
        """
        gathered = self._gather(wanted)
        self._last_filled = gathered.last_filled
        return gathered.columns(self.height)

    def last_used_column(self, first_row: int) -> int:
        """Return the last column that holds a value in `first_row` or below it."""
        if "_last_filled" not in self.__dict__:
            self._last_filled = self._gather(()).last_filled
        return max(
            (column for column, row in self._last_filled.items() if row >= first_row), default=0
        )

    def header_row(self, wanted: Callable[[str], bool]) -> int | None:
        """Return the row, among the first thirty, with the most texts that `wanted` accepts.

        The upper one of two that hold as many; None if there is no such text.
        """
        best, most = None, 0
        for number, row in enumerate(self.top, 1):
            count = sum(isinstance(value, str) and wanted(value) for value in row)
            if count > most:
                best, most = number, count
        return best

    # -- formulas and merged cells, of which not every format knows

    def _take_stock(self) -> None:  # noqa: B027 - a format may know its cells beforehand
        """Find out where cells and formulas are."""

    @property
    def merged(self) -> list[Area]:
        """The merged cells; only the first cell of each holds a value."""
        return []

    def has_formula(self, row: int, column: int) -> bool:
        """Say whether a cell holds a formula or belongs to an array formula."""
        return False

    @property
    def formula_columns(self) -> Collection[int]:
        """The columns in which some cell may hold a formula."""
        return ()

    @property
    def formulas_unset(self) -> bool:
        """Whether any cell of this sheet holds a formula and is not being set."""
        return False

    # -- editing

    def set(self, row: int, column: int, value: Value) -> None:
        """Note a value for a cell, to be written by `Logbook.save`; None empties the cell.

        A formula in the cell stays: the value takes the place of its stored result. Text stays
        text, whatever it begins with. Raises LogbookError for a number that is not finite.
        """
        self._edits.set(row, column, value)

    def set_column(self, column: int, first_row: int, values: Iterable[Value]) -> None:
        """Note values for the cells of a column, from `first_row` downward."""
        values = list(values)
        self._edits.set_column(column, range(first_row, first_row + len(values)), values)

    def set_rows(self, column: int, rows: range, values: Sequence[Any]) -> None:
        """Note values for the cells of a column, one a row; where one is UNSET, none is noted."""
        self._edits.set_column(column, rows, values)

    def describe(self, column: int, words: str) -> None:  # noqa: B027 - few formats have a place
        """Say what a new column holds, where the format has a place for that."""

    @property
    def is_edited(self) -> bool:
        """Whether any value was noted."""
        return bool(self._edits)


def _laid_out(columns: Mapping[int, Sequence[Any]], height: int, width: int) -> list[list[object]]:
    nothing = [None] * height
    if not width:
        return [[] for _ in nothing]
    every = (columns.get(number, nothing) for number in range(1, width + 1))
    return [list(row) for row in zip(*every, strict=True)]
