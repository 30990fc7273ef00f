"""Logbooks in .ods: OpenDocument spreadsheets (OASIS ODF 1.3, part 3)."""

import re
from array import array
from bisect import bisect_left
from collections.abc import Callable, Collection, Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime, time, timedelta
from functools import cached_property
from pathlib import Path
from typing import Any, Final

from workbooks.archive import Archive
from workbooks.cells import (
    LAST_COLUMN,
    LAST_ROW,
    Area,
    ErrorValue,
    LogbookError,
    Value,
    cell_name,
)
from workbooks.edits import Edits
from workbooks.logbook import Logbook
from workbooks.sheet import HEADER_ROWS, MOST_CELLS, Gathered, Sheet
from workbooks.xml_check import TAG, Checker

KIND: Final = "application/vnd.oasis.opendocument.spreadsheet"
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
_ROWS_SPANNED, _COLUMNS_SPANNED = (
    f"{TABLE} number-rows-spanned",
    f"{TABLE} number-columns-spanned",
)

_ERROR_CONSTANT = re.compile(r"of:=(#[A-Z0-9/]+[!?]?)\Z")
_DURATION = re.compile(r"(-?)P(?:(\d+)D)?T(?:(\d+)H)?(?:(\d+)M)?(?:(\d+(?:\.\d+)?)S)?\Z")
_REFUSED = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")


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


class _Enough(Exception):
    """What was wanted has been read."""


class _Walk(Checker):
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


class OdsLogbook(Logbook):
    """A spreadsheet in .ods."""

    def __init__(self, path: Path) -> None:
        """Open and check `path`; raise LogbookError for anything that is not a sound .ods."""
        super().__init__(path)
        self._archive = Archive(path, ".ods")
        archive = self._archive
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
        def note(table: str, row: TableRow) -> None:
            stock = self._stock.setdefault(table, _Stock())
            stock.note(row, self.path)

        walk = self._walked(note)
        if len(set(walk.tables)) < len(walk.tables):
            raise LogbookError(f"{self.path} holds two sheets of one name")
        if not walk.tables:
            raise LogbookError(f"{self.path} holds no sheet")
        self._stock = {name: self._stock.get(name, _Stock()) for name in walk.tables}
        self._named = walk.names

    def _walked(self, take: Callable[[str, TableRow], None]) -> _Walk:
        walk = _Walk(self.path, take)
        for chunk in self._archive.chunks("content.xml"):
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

    def read(self, name: str, take: Callable[[TableRow], bool]) -> None:
        """Give the rows of a sheet to `take`, until it says that it has enough."""

        def pass_on(table: str, row: TableRow) -> None:
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
        self._archive.save(Path(path), replaced, overwrite=overwrite, backup=backup)

    def _edited(self, edits: Mapping[str, Edits]) -> Iterator[bytes]:
        return _Writer(self.path, edits).pieces(self._archive.chunks("content.xml"))


class _Stock:
    """Where a sheet's cells and formulas are."""

    def __init__(self) -> None:
        self.height = self.width = 0
        self.formulas: dict[int, array[int]] = {}
        self.merged: list[Area] = []
        self._cells = 0

    def note(self, row: TableRow, path: Path) -> None:
        for cell in row.cells:
            if _COLUMNS_SPANNED in cell.attributes or _ROWS_SPANNED in cell.attributes:
                self._note_merged(row.number, cell)
            if f"{OFFICE} value-type" not in cell.attributes and not cell.has_formula:
                continue
            last_row, last_column = row.number + row.repeated - 1, cell.column + cell.repeated - 1
            self._cells += row.repeated * cell.repeated
            if last_row > LAST_ROW or last_column > LAST_COLUMN or self._cells > MOST_CELLS:
                raise LogbookError(
                    f"{path} repeats the cell {cell_name(row.number, cell.column)} up to row "
                    f"{last_row:,}, column {last_column:,}, more than a sheet can be worth"
                )
            self.height = max(self.height, last_row)
            self.width = max(self.width, last_column)
            if cell.has_formula:
                for column in range(cell.column, last_column + 1):
                    self.formulas.setdefault(column, array("L")).extend(
                        range(row.number, last_row + 1)
                    )

    def _note_merged(self, row: int, cell: Cell) -> None:
        rows, columns = (
            int(text) if text.isascii() and text.isdigit() and len(text) <= 9 else 1
            for text in (
                cell.attributes.get(_ROWS_SPANNED, "1"),
                cell.attributes.get(_COLUMNS_SPANNED, "1"),
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

        def take(row: TableRow) -> bool:
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


class _Writer:
    """Exchanges cells in content.xml as it goes by; every other byte is passed on."""

    def __init__(self, path: Path, edits: Mapping[str, Edits]) -> None:
        self.path = path
        self.edits = edits
        self.walk = _Walk(path, self._row)
        self.walk.ended = self._table_end
        self.buffer = b""
        self.base = 0
        """Where in the file the buffer begins"""
        self.patches: list[tuple[int, int, bytes]] = []
        self.done = 0
        """Up to where the file has been dealt with"""
        self.waiting: list[tuple[str, TableRow]] = []
        self.last: tuple[str, int, int] | None = None
        """The last row of the table that is going by: its table, last number and end"""

    def pieces(self, chunks: Iterator[bytes]) -> Iterator[bytes]:
        for chunk in chunks:
            self.buffer += chunk
            self.walk.feed(chunk)
            yield self._flushed()
        self.walk.feed(b"", True)
        yield self._flushed()
        yield self.buffer

    def _flushed(self) -> bytes:
        """Return what can be passed on, with the patches in place, and forget it."""
        out: list[bytes] = []
        at = self.base
        for start, end, content in self.patches:
            out += self.buffer[at - self.base : start - self.base], content
            at = end
        upto = max(at, self.done)
        out.append(self.buffer[at - self.base : upto - self.base])
        self.buffer = self.buffer[upto - self.base :]
        self.base = upto
        self.patches.clear()
        return b"".join(out)

    def _row(self, table: str, row: TableRow) -> None:
        edits = self.edits.get(table)
        if edits is None:
            self.done = row.end
            return
        end = self._after(row.start, row.end)
        numbers = [
            number
            for number in range(row.number, min(row.number + row.repeated, edits.last_row + 1))
            if edits.row(number)
        ]
        if numbers:
            self.patches.append((row.start, end, b"".join(self._split(row, end, numbers, edits))))
        self.done = end
        self.last = table, row.number + row.repeated - 1, end

    def _table_end(self, table: str) -> None:
        edits = self.edits.get(table)
        if edits is not None:
            if self.last is None or self.last[0] != table:
                raise LogbookError(f"{self.path}: its sheet {table!r} has no row")
            _, number, end = self.last
            rows = []
            for new in edits.new_rows(number, LAST_ROW + 1):
                if new > number + 1:
                    rows.append(
                        self._repeating(
                            b"<%b>" % self._name(TABLE, "table-row"), "rows", new - number - 1
                        )
                        + self._filler(1)
                        + self._row_end
                    )
                rows += (
                    b"<%b>" % self._name(TABLE, "table-row"),
                    *self._beyond(edits.row(new), 1),
                    self._row_end,
                )
                number = new
            if rows:
                self.patches.append((end, end, b"".join(rows)))
        self.done = self.walk.parser.CurrentByteIndex

    def _split(self, row: TableRow, end: int, numbers: list[int], edits: Edits) -> Iterator[bytes]:
        """Yield a row, or what is left of one that was repeated, with some of its cells set."""
        tag = self._tag(row.start)
        inner = self._bytes(row.start + len(tag), row.end) if not tag.endswith(b"/>") else b""
        plain = self._without(tag, ("table:number-rows-repeated",))
        plain = plain[:-2] + b">" if plain.endswith(b"/>") else plain
        number = row.number
        for edited in numbers:
            if edited > number:
                yield self._repeating(plain, "rows", edited - number) + inner + self._row_end
            yield plain
            yield from self._cells(row, tag, edits.row(edited))
            yield self._row_end
            number = edited + 1
        left = row.number + row.repeated - number
        if left:
            yield self._repeating(plain, "rows", left) + inner + self._row_end

    def _cells(self, row: TableRow, tag: bytes, wanted: list[tuple[int, Value]]) -> Iterator[bytes]:
        at = row.start + len(tag)
        column = 1
        for cell in row.cells:
            column = cell.column + cell.repeated
            here = [each for each in wanted if cell.column <= each[0] < column]
            if not here:
                continue
            yield self._bytes(at, cell.start)
            at = self._after(cell.start, cell.end)
            tag_of_cell = self._tag(cell.start)
            plain = self._without(tag_of_cell, ("table:number-columns-repeated",))
            rest = self._bytes(cell.start + len(tag_of_cell), at)
            place = cell.column
            for number, value in here:
                if number > place:
                    yield self._repeating(plain, "columns", number - place) + rest
                yield self._edited(cell, plain, at, value)
                place = number + 1
            if place < column:
                yield self._repeating(plain, "columns", column - place) + rest
        if not tag.endswith(b"/>"):
            yield self._bytes(at, row.end)
        yield from self._beyond([each for each in wanted if each[0] >= column], column)

    def _beyond(self, wanted: list[tuple[int, Value]], column: int) -> Iterator[bytes]:
        """Yield cells that come after a row's last one."""
        for number, value in wanted:
            if value is None:
                continue
            if number > column:
                yield self._filler(number - column)
            attributes, paragraphs = self._stored(value, has_formula=False)
            name = self._name(TABLE, "table-cell")
            yield b"<%b%b>%b</%b>" % (name, attributes, paragraphs, name)
            column = number + 1

    def _edited(self, cell: Cell, plain: bytes, end: int, value: Value) -> bytes:
        gone = [
            *(f"office:{name}" for name in _VALUE_ATTRIBUTES),
            "calcext:value-type",
            *(() if cell.has_formula else ("table:formula",)),
        ]
        tag = self._without(plain, gone)
        attributes, paragraphs = self._stored(value, has_formula=cell.has_formula)
        if tag.endswith(b"/>"):
            opening, inner = tag[:-2], b""
        else:
            opening = tag[:-1]
            kept = []
            at = cell.start + len(self._tag(cell.start))
            for start, stop in cell.paragraphs:
                kept.append(self._bytes(at, start))
                at = self._after(start, stop)
            kept.append(self._bytes(at, cell.end))
            inner = b"".join(kept)
        name = opening[1:].split(None, 1)[0]
        if not (inner or paragraphs):
            return opening + attributes + b"/>"
        return b"%b%b>%b%b</%b>" % (opening, attributes, inner, paragraphs, name)

    def _stored(self, value: Value, *, has_formula: bool) -> tuple[bytes, bytes]:
        """Return the attributes and the paragraphs of a cell that holds a value."""
        office = self.walk.prefixes[OFFICE].encode()
        match value:
            case None:
                return b"", b""
            case bool():
                word = b"true" if value else b"false"
                attributes = b' %b:value-type="boolean" %b:boolean-value="%b"' % (
                    office,
                    office,
                    word,
                )
                kind, text = b"boolean", "TRUE" if value else "FALSE"
            case ErrorValue():
                attributes = b' %b:value-type="string" %b:string-value=""' % (office, office)
                if not has_formula and FORMULA in self.walk.prefixes:
                    attributes = (
                        b' %b:formula="%b:=%b"'
                        % (
                            self.walk.prefixes[TABLE].encode(),
                            self.walk.prefixes[FORMULA].encode(),
                            value.text.encode(),
                        )
                        + attributes
                    )
                kind, text = b"error", value.text
            case str():
                attributes = b' %b:value-type="string"' % office
                kind, text = b"string", value
            case _:
                text = repr(float(value)).removesuffix(".0")
                attributes = b' %b:value-type="float" %b:value="%b"' % (
                    office,
                    office,
                    text.encode(),
                )
                kind = b"float"
        if CALC in self.walk.prefixes:
            calc = self.walk.prefixes[CALC].encode()
            attributes += b' %b:value-type="%b"' % (calc, kind)
        return attributes, self._paragraphs(text)

    def _paragraphs(self, text: str) -> bytes:
        if found := _REFUSED.search(text):
            raise LogbookError(f"{self.path}: no .ods can hold the character {found[0]!r}")
        prefix = self.walk.prefixes.get(TEXT)
        if prefix is None:
            raise LogbookError(f"{self.path} has no place for text")
        escaped = text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
        # White space counts as one blank, and as none at an end (ODF 1.3 part 3, 6.1.2).
        written = re.sub(
            r"^ +| +$| {2,}",
            lambda blanks: f'<{prefix}:s {prefix}:c="{len(blanks[0])}"/>',
            escaped,
            flags=re.MULTILINE,
        ).replace("\t", f"<{prefix}:tab/>")
        lines = re.split("\r\n|\r|\n", written)
        return "".join(f"<{prefix}:p>{line}</{prefix}:p>" for line in lines).encode()

    # -- bytes

    def _bytes(self, start: int, end: int) -> bytes:
        return self.buffer[start - self.base : end - self.base]

    def _tag(self, start: int) -> bytes:
        found = TAG.match(self.buffer, start - self.base)
        if not found:
            raise LogbookError(f"{self.path} is damaged: its part 'content.xml' is not readable")
        return found[0]

    def _after(self, start: int, end: int) -> int:
        """Return where an element ends whose tag and end tag begin at these places."""
        tag = self._tag(start)
        return start + len(tag) if tag.endswith(b"/>") else end + len(self._tag(end))

    def _name(self, namespace: str, local: str) -> bytes:
        return f"{self.walk.prefixes[namespace]}:{local}".encode()

    @property
    def _row_end(self) -> bytes:
        return b"</%b>" % self._name(TABLE, "table-row")

    def _filler(self, count: int) -> bytes:
        return self._repeating(b"<%b/>" % self._name(TABLE, "table-cell"), "columns", count)

    def _repeating(self, tag: bytes, what: str, count: int) -> bytes:
        """Return a tag that is told how often it counts."""
        if count == 1:
            return tag
        attribute = b' %b="%d"' % (self._name(TABLE, f"number-{what}-repeated"), count)
        at = -2 if tag.endswith(b"/>") else -1
        return tag[:at] + attribute + tag[at:]

    def _without(self, tag: bytes, names: Collection[str]) -> bytes:
        """Return a tag without some attributes, which are named by the usual prefixes."""
        for name in names:
            usual, _, local = name.partition(":")
            prefix = self.walk.prefixes.get(_USUAL[usual])
            if prefix:
                key = re.escape(f"{prefix}:{local}".encode())
                tag = re.sub(rb"\s+" + key + rb"""\s*=\s*(?:"[^"]*"|'[^']*')""", b"", tag)
        return tag


_USUAL: Final = {"table": TABLE, "office": OFFICE, "calcext": CALC}
_VALUE_ATTRIBUTES: Final = (
    "value-type",
    "value",
    "string-value",
    "boolean-value",
    "date-value",
    "time-value",
    "currency",
)
