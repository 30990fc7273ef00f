"""Cells exchanged in the content of an .ods, every other byte kept."""

import re
from collections.abc import Iterable, Iterator, Mapping
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Final

from workbooks.files.cells import LAST_ROW, ErrorValue, LogbookError, Value
from workbooks.files.edits import Edits
from workbooks.files.ods_cells import CALC, FORMULA, OFFICE, TABLE, TEXT, Cell
from workbooks.files.ods_content import Row, Walk
from workbooks.files.xml_check import TAG

_REFUSED = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")


@lru_cache(maxsize=1024)
def _paragraphs_of(text: str, prefix: str) -> bytes:
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
        self.waiting: list[tuple[str, Row]] = []
        self.last: tuple[str, int, int] | None = None
        """The last row of the table that is going by: its table, last number and end"""
        self._known: dict[tuple[bytes, re.Pattern[bytes]], bytes] = {}

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

    def _row(self, table: str, row: Row) -> None:
        edits = self.edits.get(table)
        if edits is None:
            self.done = row.end
            return
        end = self._after(row.start, row.end)
        wanted = {
            number: values
            for number in range(row.number, min(row.number + row.repeated, edits.last_row + 1))
            if (values := edits.row(number))
        }
        if wanted:
            self.patches.append((row.start, end, b"".join(self._split(row, wanted))))
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
        self.done = self.walk.at

    def _split(self, row: Row, wanted: Mapping[int, list[tuple[int, Value]]]) -> Iterator[bytes]:
        """Yield a row, or what is left of one that was repeated, with some of its cells set."""
        tag = self._tag(row.start)
        inner = self._bytes(row.start + len(tag), row.end) if not tag.endswith(b"/>") else b""
        plain = self._without(tag, self._rows_repeated)
        plain = plain[:-2] + b">" if plain.endswith(b"/>") else plain
        number = row.number
        for edited, values in wanted.items():
            if edited > number:
                yield self._repeating(plain, "rows", edited - number) + inner + self._row_end
            yield plain
            yield from self._cells(row, tag, values)
            yield self._row_end
            number = edited + 1
        left = row.number + row.repeated - number
        if left:
            yield self._repeating(plain, "rows", left) + inner + self._row_end

    def _cells(self, row: Row, tag: bytes, wanted: list[tuple[int, Value]]) -> Iterator[bytes]:
        at = row.start + len(tag)
        column = wanted[0][0]
        done, count = 0, len(wanted)
        for cell in row.cells_from(column):
            column = cell.column + cell.repeated
            if wanted[done][0] >= column:
                continue
            yield self._bytes(at, cell.start)
            tag_of_cell = self._tag(cell.start)
            inside = cell.start + len(tag_of_cell)
            at = inside if tag_of_cell.endswith(b"/>") else cell.end + len(self._tag(cell.end))
            plain = self._without(tag_of_cell, self._columns_repeated)
            rest = self._bytes(inside, at)
            place = cell.column
            while done < count and wanted[done][0] < column:
                number, value = wanted[done]
                if number > place:
                    yield self._repeating(plain, "columns", number - place) + rest
                yield self._edited(cell, plain, at, value)
                place = number + 1
                done += 1
            if place < column:
                yield self._repeating(plain, "columns", column - place) + rest
            if done == count:
                break
        if not tag.endswith(b"/>"):
            yield self._bytes(at, row.end)
        if done < count:
            last = row.cells[-1] if row.cells else None
            yield from self._beyond(wanted[done:], last.column + last.repeated if last else 1)

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
        gone = self._value if cell.has_formula else self._value_and_formula
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
        match value:
            case None:
                return b"", b""
            case bool():
                word = b"true" if value else b"false"
                return self._typed("boolean", b"boolean-value", word), self._paragraphs(
                    word.decode().upper()
                )
            case ErrorValue():
                attributes = self._typed("string", b"string-value", b"", shown="error")
                formula = self.walk.prefixes.get(FORMULA)
                if not has_formula and formula:
                    text = f' {self._prefix(TABLE)}:formula="{formula}:={value.text}"'
                    attributes = text.encode() + attributes
                return attributes, self._paragraphs(value.text)
            case str():
                return self._typed("string"), self._paragraphs(value)
        number = repr(float(value)).removesuffix(".0").encode()
        # what a number is written with needs no look at its characters
        attributes, paragraph = self._of_number
        return attributes % number, paragraph % number

    def _typed(self, kind: str, name: bytes = b"", value: bytes = b"", *, shown: str = "") -> bytes:
        """Return the attributes that say what a cell holds, and the value in one of its own."""
        office, calc = self._prefix(OFFICE).encode(), self.walk.prefixes.get(CALC)
        attributes = b' %b:value-type="%b"' % (office, kind.encode())
        if name:
            attributes += b' %b:%b="%b"' % (office, name, value)
        if calc:
            attributes += f' {calc}:value-type="{shown or kind}"'.encode()
        return attributes

    @cached_property
    def _of_number(self) -> tuple[bytes, bytes]:
        """The patterns of a number's attributes and paragraph."""
        return self._typed("float", b"value", b"%b"), self._paragraphs("%b")

    def _paragraphs(self, text: str) -> bytes:
        if found := _REFUSED.search(text):
            raise LogbookError(f"{self.path}: no .ods can hold the character {found[0]!r}")
        prefix = self.walk.prefixes.get(TEXT)
        if prefix is None:
            raise LogbookError(f"{self.path} has no place for text")
        return _paragraphs_of(text, prefix)

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

    def _prefix(self, namespace: str) -> str:
        prefix = self.walk.prefixes.get(namespace)
        if prefix is None:
            raise LogbookError(f"{self.path} has no place for values")
        return prefix

    def _without(self, tag: bytes, attributes: re.Pattern[bytes]) -> bytes:
        """Return a tag without some attributes."""
        key = tag, attributes
        known = self._known.get(key)
        if known is None:
            if len(self._known) > MOST_KNOWN:
                self._known.clear()
            known = self._known[key] = attributes.sub(b"", tag)
        return known

    def _attributes(self, names: Iterable[tuple[str, str]]) -> re.Pattern[bytes]:
        """Return the pattern of attributes by namespace and name."""
        prefixes = self.walk.prefixes
        spelled = "|".join(
            re.escape(f"{prefixes[namespace]}:{local}")
            for namespace, local in names
            if namespace in prefixes
        )
        return re.compile(rf"""\s+(?:{spelled or "(?!)"})\s*=\s*(?:"[^"]*"|'[^']*')""".encode())

    @cached_property
    def _rows_repeated(self) -> re.Pattern[bytes]:
        return self._attributes([(TABLE, "number-rows-repeated")])

    @cached_property
    def _columns_repeated(self) -> re.Pattern[bytes]:
        return self._attributes([(TABLE, "number-columns-repeated")])

    @cached_property
    def _value(self) -> re.Pattern[bytes]:
        return self._attributes(_VALUE_ATTRIBUTES)

    @cached_property
    def _value_and_formula(self) -> re.Pattern[bytes]:
        return self._attributes([*_VALUE_ATTRIBUTES, (TABLE, "formula")])


MOST_KNOWN: Final = 10_000

_VALUE_ATTRIBUTES: Final = (
    *(
        (OFFICE, name)
        for name in (
            "value-type",
            "value",
            "string-value",
            "boolean-value",
            "date-value",
            "time-value",
            "currency",
        )
    ),
    (CALC, "value-type"),
)
