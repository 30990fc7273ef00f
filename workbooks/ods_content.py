"""The content of an .ods as it goes by: tables, rows and cells (OASIS ODF 1.3, part 3)."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from datetime import datetime, time, timedelta
from pathlib import Path
from typing import Any, Final

from workbooks.cells import LAST_COLUMN, ErrorValue, LogbookError
from workbooks.xml_check import Checker

_ODF = "urn:oasis:names:tc:opendocument:xmlns"
TABLE: Final = f"{_ODF}:table:1.0"
OFFICE: Final = f"{_ODF}:office:1.0"
TEXT: Final = f"{_ODF}:text:1.0"
FORMULA: Final = f"{_ODF}:of:1.2"
CALC: Final = "urn:org:documentfoundation:names:experimental:calc:xmlns:calcext:1.0"

_ROW, _TABLE = f"{TABLE} table-row", f"{TABLE} table"
_CELLS = (f"{TABLE} table-cell", f"{TABLE} covered-table-cell")
_SPREADSHEET, _PARAGRAPH = f"{OFFICE} spreadsheet", f"{TEXT} p"
_NAMED = f"{TABLE} named-range"
_ROWS_REPEATED, _COLUMNS_REPEATED = (
    f"{TABLE} number-rows-repeated",
    f"{TABLE} number-columns-repeated",
)
ROWS_SPANNED, COLUMNS_SPANNED = (
    f"{TABLE} number-rows-spanned",
    f"{TABLE} number-columns-spanned",
)

_ERROR_CONSTANT = re.compile(r"of:=(#[A-Z0-9/]+[!?]?)\Z")
_DURATION = re.compile(r"(-?)P(?:(\d+)D)?T(?:(\d+)H)?(?:(\d+)M)?(?:(\d+(?:\.\d+)?)S)?\Z")


@dataclass(slots=True)
class Cell:
    """A cell of the file, which may stand for several beside one another."""

    column: int
    repeated: int
    start: int
    """Where its tag begins in the file's bytes; `end` is where its end tag, if any, begins"""
    attributes: Mapping[str, str]
    end: int = 0
    paragraphs: list[list[int]] = field(default_factory=list)
    """Where each of its own paragraphs begins and ends"""
    texts: list[str] = field(default_factory=list)

    @property
    def has_formula(self) -> bool:
        formula = self.attributes.get(f"{TABLE} formula")
        # An error that was not computed can only be written as a formula that names it.
        return formula is not None and not _ERROR_CONSTANT.match(formula)

    def value(self) -> Any:
        """Return what the cell holds."""
        given = self.attributes
        kind = given.get(f"{OFFICE} value-type")
        text = "\n".join(self.texts)
        if given.get(f"{CALC} value-type") == "error" and text:
            return _error(text)
        try:
            match kind:
                case None:
                    return None
                case "float" | "percentage" | "currency":
                    return float(given[f"{OFFICE} value"])
                case "boolean":
                    return given[f"{OFFICE} boolean-value"] == "true"
                case "date":
                    moment = datetime.fromisoformat(given[f"{OFFICE} date-value"])
                    return moment.replace(tzinfo=None)
                case "time":
                    return _duration(given[f"{OFFICE} time-value"])
        except (KeyError, ValueError, OverflowError):
            return text or None
        return given.get(f"{OFFICE} string-value") or text or None


@dataclass(slots=True)
class TableRow:
    """A row of the file, which may stand for several one under another."""

    number: int
    repeated: int
    start: int
    cells: list[Cell] = field(default_factory=list)
    end: int = 0


class Walk(Checker):
    """Goes through content.xml and tells of each row when it has gone by."""

    def __init__(self, path: Path, take: Callable[[str, TableRow], None]) -> None:
        super().__init__(path, "content.xml")
        self.path = path
        self.take = take
        self.ended: Callable[[str], None] = lambda _: None
        self.prefixes: dict[str, str] = {}
        self.names: dict[str, str] = {}
        self.tables: list[str] = []
        self._depth = 0
        self._table_depth = self._row_depth = self._cell_depth = 0
        self._spreadsheet_depth = 0
        self._row = TableRow(0, 1, 0)
        self._next_row = self._next_column = 1
        self._paragraph: list[str] | None = None
        parser = self.parser
        parser.buffer_text = True
        parser.StartElementHandler = self._start
        parser.EndElementHandler = self._end
        parser.CharacterDataHandler = None

    def _begin_namespace(self, prefix: str | None, uri: str | None) -> None:
        if self._depth == 0 and prefix and uri:
            self.prefixes.setdefault(uri, prefix)

    def _start(self, name: str, attributes: dict[str, str]) -> None:
        self._depth += 1
        if self._cell_depth:
            self._start_inside(name, attributes)
        elif self._row_depth:
            if name in _CELLS:
                self._cell_depth = self._depth
                repeated = self._repeated(attributes, _COLUMNS_REPEATED)
                cell = Cell(self._next_column, repeated, self.parser.CurrentByteIndex, attributes)
                self._next_column += repeated
                if self._next_column > 4 * LAST_COLUMN:
                    raise LogbookError(f"{self.path} holds a row of too many cells")
                self._row.cells.append(cell)
        elif self._table_depth:
            if name == _ROW:
                self._row_depth = self._depth
                repeated = self._repeated(attributes, _ROWS_REPEATED)
                self._row = TableRow(self._next_row, repeated, self.parser.CurrentByteIndex)
                self._next_row += repeated
                self._next_column = 1
        elif self._spreadsheet_depth:
            if name == _TABLE and self._depth == self._spreadsheet_depth + 1:
                self._table_depth = self._depth
                self._next_row = 1
                self.tables.append(attributes.get(f"{TABLE} name", ""))
            elif name == _NAMED:
                self.names[attributes.get(f"{TABLE} name", "")] = attributes.get(
                    f"{TABLE} cell-range-address", ""
                )
        elif name == _SPREADSHEET:
            self._spreadsheet_depth = self._depth

    def _start_inside(self, name: str, attributes: dict[str, str]) -> None:
        if self._paragraph is not None:
            if name == f"{TEXT} s":
                count = attributes.get(f"{TEXT} c", "1")
                self._paragraph.append(" " * min(int(count) if count.isdigit() else 1, 1000))
            elif name == f"{TEXT} tab":
                self._paragraph.append("\t")
            elif name == f"{TEXT} line-break":
                self._paragraph.append("\n")
        elif name == _PARAGRAPH and self._depth == self._cell_depth + 1:
            self._paragraph = []
            self.parser.CharacterDataHandler = self._paragraph.append
            self._row.cells[-1].paragraphs.append([self.parser.CurrentByteIndex, 0])

    def _end(self, name: str) -> None:
        depth, self._depth = self._depth, self._depth - 1
        if self._cell_depth:
            cell = self._row.cells[-1]
            if depth == self._cell_depth:
                self._cell_depth = 0
                cell.end = self.parser.CurrentByteIndex
            elif depth == self._cell_depth + 1 and self._paragraph is not None:
                cell.texts.append("".join(self._paragraph))
                cell.paragraphs[-1][1] = self.parser.CurrentByteIndex
                self._paragraph = None
                self.parser.CharacterDataHandler = None
        elif depth == self._row_depth:
            self._row_depth = 0
            self._row.end = self.parser.CurrentByteIndex
            self.take(self.tables[-1], self._row)
        elif depth == self._table_depth:
            self._table_depth = 0
            self.ended(self.tables[-1])
        elif depth == self._spreadsheet_depth:
            self._spreadsheet_depth = 0

    def _repeated(self, attributes: Mapping[str, str], key: str) -> int:
        text = attributes.get(key, "1")
        if not (text.isascii() and text.isdigit() and len(text) <= 9 and int(text)):
            raise LogbookError(f"{self.path} repeats a row or cell {text!r} times")
        return int(text)


def _error(text: str) -> ErrorValue:
    try:
        return ErrorValue(text)
    except ValueError:
        # such as Err:502, LibreOffice's own
        return ErrorValue(f"#{re.sub('[^A-Z0-9]', '', text.upper())[:20] or 'ERROR'}!")


def _duration(text: str) -> time | timedelta:
    found = _DURATION.match(text)
    if not found:
        raise ValueError(text)
    days, hours, minutes = (int(part or 0) for part in found.group(2, 3, 4))
    length = timedelta(days=days, hours=hours, minutes=minutes, seconds=float(found[5] or 0))
    if found[1] or length >= timedelta(days=1):
        return -length if found[1] else length
    return (datetime.min + length).time()
