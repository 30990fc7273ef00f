"""Logbooks in .ods: OpenDocument spreadsheets (OASIS ODF 1.3, part 3)."""

from array import array
from bisect import bisect_left
from collections.abc import Callable, Collection, Iterator, Mapping
from functools import cached_property
from pathlib import Path
from typing import Any, Final

from workbooks.files.archive import Archive
from workbooks.files.cells import LAST_COLUMN, LAST_ROW, Area, LogbookError, cell_name
from workbooks.files.edits import Edits
from workbooks.files.ods_cells import COLUMNS_SPANNED, ROWS_SPANNED, VALUE_TYPE, Cell
from workbooks.files.ods_content import Row, Walk
from workbooks.files.ods_rows import PlainRow
from workbooks.files.ods_writer import Writer
from workbooks.files.sheet import HEADER_ROWS, MOST_CELLS, Gathered, Sheet
from workbooks.logbook import Logbook

KIND: Final = "application/vnd.oasis.opendocument.spreadsheet"

BLOCK: Final = 2000
"""Rows that are laid out at a time"""


class _Enough(Exception):
    """What was wanted has been read."""


class OdsLogbook(Logbook):
    """A spreadsheet in .ods."""

    def __init__(self, path: Path) -> None:
        """Open and check `path`; raise LogbookError for anything that is not a sound .ods."""
        super().__init__(path)
        self.archive = Archive(path, ".ods")
        """The parts of the file, as they were when it was opened"""
        archive = self.archive
        if not archive.has("mimetype") or not archive.has("content.xml"):
            raise LogbookError(f"{path} is a zip archive but holds no .ods spreadsheet")
        kind = b"".join(archive.chunks("mimetype"))[:200].decode("latin-1").strip()
        if kind.removesuffix("-template") != KIND:
            raise LogbookError(f"{path} holds a document, but not a spreadsheet")
        if archive.has("META-INF/manifest.xml") and b"encryption-data" in archive.part(
            "META-INF/manifest.xml"
        ):
            raise LogbookError(f"{path} is encrypted; save it without a password")
        self._stock: dict[str, _Stock] = {}
        self._named: dict[str, str] = {}
        self._take_stock()

    def _take_stock(self) -> None:
        def note(table: str, row: Row) -> None:
            stock = self._stock.setdefault(table, _Stock())
            stock.note(row, self.path)

        walk = self._walked(note, check=True)
        if len(set(walk.tables)) < len(walk.tables):
            raise LogbookError(f"{self.path} holds two sheets of one name")
        if not walk.tables:
            raise LogbookError(f"{self.path} holds no sheet")
        self._stock = {name: self._stock.get(name, _Stock()) for name in walk.tables}
        self._named = walk.names

    def _walked(self, take: Callable[[str, Row], None], *, check: bool = False) -> Walk:
        walk = Walk(self.path, take, check=check)
        for chunk in self.archive.chunks("content.xml"):
            walk.feed(chunk)
        walk.feed(b"", True)
        return walk

    @property
    def sheet_names(self) -> list[str]:
        return list(self._stock)

    def _open_sheet(self, name: str) -> Sheet:
        return OdsSheet(self, name, self._stock[name])

    @cached_property
    def named_cells(self) -> dict[str, tuple[str, int, int]]:
        found: dict[str, tuple[str, int, int]] = {}
        for name, reference in self._named.items():
            sheet, mark, place = reference.removeprefix("$").rpartition(".")
            if sheet.startswith("'") and sheet.endswith("'"):
                sheet = sheet[1:-1].replace("''", "'")
            area = Area.parsed(place)
            if mark and area is not None and sheet in self._stock and ":" not in reference:
                found[name] = (sheet, area.first_row, area.first_column)
        return found

    def read(self, name: str, take: Callable[[Row], bool]) -> None:
        """Give the rows of a sheet to `take`, until it says that it has enough."""

        def pass_on(table: str, row: Row) -> None:
            if table == name and not take(row):
                raise _Enough

        try:
            self._walked(pass_on)
        except _Enough:
            return

    def save(self, path: Path, *, overwrite: bool = False, backup: bool = False) -> None:
        edits = {
            sheet.name: sheet.edits
            for sheet in self._opened.values()
            if isinstance(sheet, OdsSheet) and sheet.is_edited
        }
        replaced = {"content.xml": lambda: self._edited(edits)} if edits else {}
        self.archive.save(Path(path), replaced, overwrite=overwrite, backup=backup)

    def _edited(self, edits: Mapping[str, Edits]) -> Iterator[bytes]:
        return Writer(self.path, edits).pieces(self.archive.chunks("content.xml"))


class _Stock:
    """Where a sheet's cells and formulas are."""

    def __init__(self) -> None:
        self.height = self.width = 0
        self.formulas: dict[int, array[int]] = {}
        self.merged: list[Area] = []
        self._cells = 0

    def note(self, row: Row, path: Path) -> None:
        if isinstance(row, PlainRow) and not row.shape.has_formulas:
            shape = row.shape
            if shape.count:
                self._note_filled(row, 1, shape.last_column, shape.count, path)
            return
        for cell in row.cells:
            if COLUMNS_SPANNED in cell.attributes or ROWS_SPANNED in cell.attributes:
                self._note_merged(row.number, cell)
            if VALUE_TYPE not in cell.attributes and not cell.has_formula:
                continue
            last_column = cell.column + cell.repeated - 1
            self._note_filled(row, cell.column, last_column, cell.repeated, path)
            if cell.has_formula:
                for column in range(cell.column, last_column + 1):
                    self.formulas.setdefault(column, array("L")).extend(
                        range(row.number, row.number + row.repeated)
                    )

    def _note_filled(self, row: Row, column: int, last_column: int, count: int, path: Path) -> None:
        """Take in `count` cells of a row, which end in `last_column`."""
        last_row = row.number + row.repeated - 1
        self._cells += row.repeated * count
        if last_row > LAST_ROW or last_column > LAST_COLUMN or self._cells > MOST_CELLS:
            raise LogbookError(
                f"{path} repeats the cell {cell_name(row.number, column)} up to row "
                f"{last_row:,}, column {last_column:,}, more than a sheet can be worth"
            )
        self.height = max(self.height, last_row)
        self.width = max(self.width, last_column)

    def _note_merged(self, row: int, cell: Cell) -> None:
        rows, columns = (
            int(text) if text.isascii() and text.isdigit() and len(text) <= 9 else 1
            for text in (
                cell.attributes.get(ROWS_SPANNED, "1"),
                cell.attributes.get(COLUMNS_SPANNED, "1"),
            )
        )
        last_row, last_column = row + rows - 1, cell.column + columns - 1
        if rows * columns > 1 and last_row <= LAST_ROW and last_column <= LAST_COLUMN:
            self.merged.append(Area(row, cell.column, last_row, last_column))


class OdsSheet(Sheet):
    """A sheet of an .ods."""

    def __init__(self, logbook: OdsLogbook, name: str, stock: _Stock) -> None:
        """Use `Logbook.sheet`."""
        super().__init__(logbook.path, name)
        self._logbook = logbook
        self._stock = stock

    @property
    def height(self) -> int:
        return self._stock.height

    @property
    def width(self) -> int:
        return self._stock.width

    @property
    def edits(self) -> Edits:
        """The values noted so far."""
        return self._edits

    def _gather(self, wanted: Collection[int] | None, most_rows: int = LAST_ROW) -> Gathered:
        gathered = Gathered(wanted)
        most = min(most_rows, self.height) if most_rows != HEADER_ROWS else HEADER_ROWS
        asked = None if wanted is None else frozenset(wanted)
        block: list[list[Any]] = []
        first = 1

        def take_block() -> None:
            width = max(map(len, block), default=0)
            if width:
                gathered.add(first, 1, [row + [None] * (width - len(row)) for row in block])
            block.clear()

        def take(row: Row) -> bool:
            nonlocal first
            if isinstance(row, PlainRow) and row.repeated == 1:
                if not block or row.number != first + len(block) or len(block) >= BLOCK:
                    take_block()
                    first = row.number
                block.append(row.values(asked))
                return row.number < most
            take_block()
            values = [
                (cell.column, cell.repeated, value)
                for cell in row.cells
                if (value := cell.value()) is not None
            ]
            if values:
                for number in range(row.number, min(row.number + row.repeated, most + 1)):
                    for first, repeated, value in values:
                        for column in range(first, first + repeated):
                            gathered.set(number, column, value)
            return row.number + row.repeated <= most

        self._logbook.read(self.name, take)
        take_block()
        return gathered

    @property
    def merged(self) -> list[Area]:
        return self._stock.merged

    def has_formula(self, row: int, column: int) -> bool:
        rows = self._stock.formulas.get(column)
        if not rows:
            return False
        place = bisect_left(rows, row)
        return place < len(rows) and rows[place] == row

    @property
    def formula_columns(self) -> Collection[int]:
        return self._stock.formulas.keys()

    @property
    def formulas_unset(self) -> bool:
        return any(
            (row, column) not in self._edits
            for column, rows in self._stock.formulas.items()
            for row in rows
        )
