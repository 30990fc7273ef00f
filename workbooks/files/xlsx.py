"""Logbooks in .xlsx and .xlsm."""

from collections.abc import Collection, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Final

from workbooks.files.archive import CHUNK
from workbooks.files.cells import LAST_ROW, Area
from workbooks.files.excerpt import Excerpts
from workbooks.files.package import Package
from workbooks.files.sheet import Gathered, Sheet
from workbooks.files.worksheet import SheetPart
from workbooks.files.xml_check import Unusual
from workbooks.logbook import Logbook

if TYPE_CHECKING:
    from python_calamine import CalamineSheet

LARGEST_CHUNK: Final = 32 << 20


class XlsxLogbook(Logbook):
    """A workbook in .xlsx or .xlsm."""

    def __init__(self, path: Path) -> None:
        """Open and check `path`; raise LogbookError for anything that is not a sound .xlsx."""
        super().__init__(path)
        self.package = Package(path)
        """The parts of the file, as they were when it was opened"""

    @property
    def sheet_names(self) -> list[str]:
        return list(self.package.sheets)

    def _open_sheet(self, name: str) -> Sheet:
        return XlsxSheet(self.package, name)

    @cached_property
    def named_cells(self) -> dict[str, tuple[str, int, int]]:
        found: dict[str, tuple[str, int, int]] = {}
        for name, reference in self.package.global_names.items():
            sheet, mark, place = reference.removeprefix("=").rpartition("!")
            if sheet.startswith("'") and sheet.endswith("'"):
                sheet = sheet[1:-1].replace("''", "'")
            area = Area.parsed(place)
            if not mark or area is None or sheet not in self.package.sheets or ":" in place:
                continue
            found[name] = (sheet, area.first_row, area.first_column)
        return found

    def save(self, path: Path, *, overwrite: bool = False, backup: bool = False) -> None:
        replaced = {
            self.package.sheets[sheet.name]: sheet.edited_pieces
            for sheet in self._opened.values()
            if isinstance(sheet, XlsxSheet) and sheet.is_edited
        }
        self.package.save(Path(path), replaced, overwrite=overwrite, backup=backup)


class XlsxSheet(Sheet):
    """A worksheet of an .xlsx."""

    def __init__(self, package: Package, name: str) -> None:
        """Use `Logbook.sheet`."""
        super().__init__(package.path, name)
        self._package = package
        part = package.sheets[name]
        # Shared texts are read again for each stretch of rows, so that one must be worth it.
        strings = package.size(package.strings_part) if package.has(package.strings_part) else 0
        size = min(max(CHUNK, strings), LARGEST_CHUNK)
        self._part = SheetPart(lambda: package.chunks(part, size), package.path, part)

    def _take_stock(self) -> None:
        self._part.take_stock()

    @property
    def height(self) -> int:
        self._part.take_stock()
        return self._part.last_row

    @property
    def width(self) -> int:
        self._part.take_stock()
        return self._part.last_column

    def _gather(self, wanted: Collection[int] | None, most_rows: int = LAST_ROW) -> Gathered:
        try:
            return self._gathered(wanted, most_rows)
        except Unusual:
            return self._gathered(wanted, most_rows)

    def _gathered(self, wanted: Collection[int] | None, most_rows: int) -> Gathered:
        excerpts = Excerpts(self._package)
        gathered = Gathered(wanted)

        def take(sheet: "Future[CalamineSheet]") -> None:
            block = excerpts.block(sheet.result())
            gathered.add(block.first_row, block.first_column, block.rows)

        with ThreadPoolExecutor(1) as reading:
            before: Future[CalamineSheet] | None = None
            for stretch in self._part.stretches(most_rows):
                after = reading.submit(excerpts.opened, stretch)
                if before:
                    take(before)
                before = after
            if before:
                take(before)
        for (row, column), error in self._part.errors.items():
            gathered.set(row, column, error)
        return gathered

    @property
    def merged(self) -> list[Area]:
        return self._part.merged

    def has_formula(self, row: int, column: int) -> bool:
        self._part.take_stock()
        return self._part.has_formula(row, column)

    @property
    def formula_columns(self) -> Collection[int]:
        self._part.take_stock()
        return self._part.formula_columns

    @property
    def formulas_unset(self) -> bool:
        self._part.take_stock()
        return self._part.formulas_outside(self._edits)

    def edited_pieces(self) -> Iterator[bytes]:
        """Yield the sheet's XML with the noted values in place."""
        return self._part.edited_pieces(self._edits)
