"""Cells exchanged in the content of an .ods, every other byte kept."""

import re
from collections.abc import Collection, Iterator, Mapping
from pathlib import Path
from typing import Final

from workbooks.cells import LAST_ROW, ErrorValue, LogbookError, Value
from workbooks.edits import Edits
from workbooks.ods_content import CALC, FORMULA, OFFICE, TABLE, TEXT, Cell, TableRow, Walk
from workbooks.xml_check import TAG

_REFUSED = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")


class Writer:
    """Exchanges cells in content.xml as it goes by; every other byte is passed on."""

    def __init__(self, path: Path, edits: Mapping[str, Edits]) -> None:
        self.path = path
        self.edits = edits
        self.walk = Walk(path, self._row)
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
