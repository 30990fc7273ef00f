"""The content of an .ods as it goes by: tables and rows (OASIS ODF 1.3, part 3)."""

import re
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Final

from workbooks.files.cells import LAST_COLUMN, LogbookError
from workbooks.files.ods_cells import (
    CELLS,
    COLUMNS_REPEATED,
    OFFICE,
    ROWS_REPEATED,
    TABLE,
    TEXT,
    Cell,
    TableRow,
)
from workbooks.files.ods_rows import PlainRow, PlainRows
from workbooks.files.xml_check import Checker, is_obviously_sound

Row = TableRow | PlainRow

_ROW, _TABLE = f"{TABLE} table-row", f"{TABLE} table"
_SPREADSHEET, _PARAGRAPH = f"{OFFICE} spreadsheet", f"{TEXT} p"
_NAMED = f"{TABLE} named-range"
_ANNOTATION = f"{OFFICE} annotation"

_ROW_MARK = re.compile(rb"<(?:[\w.-]+:)?table-row(?=[\s/>])")
_ROW_END = re.compile(rb"</(?:[\w.-]+:)?table-row\s*>")

MOST_OF_ONE_ROW: Final = 4 << 20
"""Bytes in which a row must come to its end, to be taken in at one look"""


class Walk(Checker):
    """Goes through content.xml and tells of each row when it has gone by."""

    def __init__(
        self, path: Path, take: Callable[[str, Row], None], *, check: bool = False
    ) -> None:
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
        self._waiting = b""
        self._fed = self._taken = 0
        """Bytes that went through the parser, and rows that were taken in beside it"""
        self._is_plain = True
        """Whether rows may be taken in at one look: nothing so far could hide one"""
        self._rows: PlainRows | None = None
        self._row_checker = Checker(path, "content.xml") if check else None
        parser = self.parser
        parser.buffer_text = True
        parser.StartElementHandler = self._start
        parser.EndElementHandler = self._end
        parser.CharacterDataHandler = None

    @property
    def at(self) -> int:
        """Where in the file that begins which is going by."""
        return self.parser.CurrentByteIndex + self._taken

    def feed(self, chunk: bytes, final: bool = False) -> None:
        """Take in the next piece; raise LogbookError where it is not sound."""
        content = self._waiting + chunk if self._waiting else chunk
        self._waiting = b""
        at = seek = 0
        while self._is_plain:
            mark = _ROW_MARK.search(content, seek)
            # the end of a piece may cut a mark in two
            end = mark.start() if mark else len(content) if final else content.rfind(b"<", at)
            if end > at:
                self._feed_frame(content[at:end])
                at = end
            if not mark:
                break
            seek = mark.end()
            if self._is_plain and self._table_depth and not self._row_depth:
                end = self._take_rows(content, at)
                if end > at:
                    self._taken += end - at
                    at = seek = end
                elif not final and not _ROW_END.search(content, at):
                    break
        if self._is_plain and not final and len(content) - at <= MOST_OF_ONE_ROW:
            self._waiting = content[at:]
        else:
            self._feed_frame(content[at:], final)

    def _feed_frame(self, content: bytes, final: bool = False) -> None:
        # A comment, CDATA or an instruction may hold what only looks like a row, and what is too
        # long to be looked at may be in the midst of anything.
        if (
            b"<!" in content
            or b"<?" in content.removeprefix(b"<?xml ")
            or len(content) > MOST_OF_ONE_ROW
        ):
            self._is_plain = False
        self._fed += len(content)
        super().feed(content, final)

    def _take_rows(self, content: bytes, start: int) -> int:
        """Take in the plain rows that begin at `start`; return where they end."""
        if self._rows is None:
            if not {TABLE, TEXT} <= self.prefixes.keys():
                self._is_plain = False
                return start
            self._rows = PlainRows(self.prefixes)
            if self._row_checker:
                names = " ".join(f'xmlns:{prefix}="{uri}"' for uri, prefix in self.prefixes.items())
                self._row_checker.feed(f"<rows {names}>".encode())
        base = self._fed + self._taken - start
        learnt = self._rows.learnt
        end = start
        hits = []
        while hit := self._rows.match(content, end):
            hits.append(hit)
            end = hit[1].end()
        if self._row_checker:
            rows = content[start:end]
            # What fits a shape is as well-formed as the row that the shape was learnt from, but
            # for characters and entities.
            if self._rows.learnt > learnt or not is_obviously_sound(rows):
                self._row_checker.feed(rows)
        for shape, found in hits:
            row = PlainRow(self._next_row, shape, found, base, self._rows)
            self._next_row += row.repeated
            self.take(self.tables[-1], row)
        return end

    def _begin_namespace(self, prefix: str | None, uri: str | None) -> None:
        if self._depth:
            self._is_plain = False
        elif prefix and uri:
            self.prefixes.setdefault(uri, prefix)

    def _start(self, name: str, attributes: dict[str, str]) -> None:
        self._depth += 1
        if self._cell_depth:
            self._start_inside(name, attributes)
        elif self._row_depth:
            if name in CELLS:
                self._cell_depth = self._depth
                repeated = self._repeated(attributes, COLUMNS_REPEATED)
                cell = Cell(self._next_column, repeated, self.at, attributes)
                self._next_column += repeated
                if self._next_column > 4 * LAST_COLUMN:
                    raise LogbookError(f"{self.path} holds a row of too many cells")
                self._row.cells.append(cell)
        elif self._table_depth:
            if name == _ROW:
                self._row_depth = self._depth
                repeated = self._repeated(attributes, ROWS_REPEATED)
                self._row = TableRow(self._next_row, repeated, self.at)
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
            self._row.cells[-1].paragraphs.append([self.at, 0])
        elif name == _ANNOTATION and self._depth == self._cell_depth + 1:
            self._row.cells[-1].annotation = (self.at, 0)

    def _end(self, name: str) -> None:
        depth, self._depth = self._depth, self._depth - 1
        if self._cell_depth:
            cell = self._row.cells[-1]
            if depth == self._cell_depth:
                self._cell_depth = 0
                cell.end = self.at
            elif depth == self._cell_depth + 1 and self._paragraph is not None:
                cell.texts.append("".join(self._paragraph))
                cell.paragraphs[-1][1] = self.at
                self._paragraph = None
                self.parser.CharacterDataHandler = None
            elif depth == self._cell_depth + 1 and name == _ANNOTATION and cell.annotation:
                cell.annotation = (cell.annotation[0], self.at)
        elif depth == self._row_depth:
            self._row_depth = 0
            self._row.end = self.at
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
