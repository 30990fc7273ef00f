"""The XML of a worksheet: where its cells are, and how to set some and keep every other byte.

The part is never parsed into a tree and written out again: that would lose white space, prefix
declarations and the like. It goes by in pieces of whole rows, so that no more than one piece is
held at a time. expat checks it first (well-formed, no document type); what is left has a form
simple enough for regular expressions.

Nearly every sheet that a program writes is plain: one prefix, each row and cell with its name, no
comment among them. A sheet that is not is read the careful way: as one piece, in a copy of which
comments, CDATA and foreign namespaces are blanked, so that its offsets hold for the original too.
"""

import re
from array import array
from bisect import bisect_left
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Final, Literal

from workbooks.files.cell_xml import (
    held_pattern,
    is_something,
    letters_of,
    stored_as,
    widened_spans,
)
from workbooks.files.cells import (
    LAST_COLUMN,
    LAST_ROW,
    Area,
    ErrorValue,
    LogbookError,
    Value,
    cell_name,
)
from workbooks.files.edits import Edits, Unset
from workbooks.files.sheet_patterns import NEVER, Shape, names, number_of, plain_rows
from workbooks.files.xml_check import (
    ATTRIBUTES,
    MAIN_NAMESPACES,
    TAG,
    FrameChecker,
    Layout,
    Unusual,
    attributes_of,
    check_xml,
    is_obviously_sound,
)

_TYPE = re.compile(rb"""\s+t\s*=\s*(?:"[^"]*"|'[^']*')""")
_VALUE_METADATA = re.compile(rb"""\s+vm\s*=\s*(?:"[^"]*"|'[^']*')""")
_POSITION = re.compile(rb"""\sr\s*=\s*["']([A-Z]{1,3})([0-9]{1,7})["']""")

MOST_OF_ONE_ROW: Final = 32 << 20
"""Bytes without the end of a row after which a sheet is not plain"""

MOST_OF_A_TAIL: Final = 1 << 20
"""Bytes after the rows that are kept, so that the rows need not go by again for them"""

MOST_SPANNED: Final = 1 << 21
"""Cells of the smallest rectangle around the cells that are read at once"""

MOST_SPANNED_IN_ALL: Final = 100_000_000
"""The sum of such rectangles in a sheet; one with more has cells far out in row after row"""

MOST_SPANNED_AT_ONCE: Final = 1 << 24
"""The same for a sheet that must be read as a whole"""


@dataclass(frozen=True, slots=True)
class Piece:
    """A stretch of the part: what stands before the rows, some whole rows, or what follows them."""

    kind: Literal["head", "rows", "tail"]
    content: bytes
    plain: bytes
    """The content with comments and the like blanked"""


@dataclass(frozen=True, slots=True)
class Stretch:
    """Some whole rows as a worksheet of their own, for another reader."""

    content: bytes
    first_row: int
    last_row: int
    last_column: int


_DATA = re.compile(rb"<(?:[\w.-]+:)?sheetData(?=[\s/>])(" + ATTRIBUTES + rb")(/?)>")


class SheetPart:
    """One worksheet: where its cells are, which hold formulas, and how to set some of them."""

    def __init__(
        self, source: bytes | Callable[[], Iterable[bytes]], path: Path, part: str
    ) -> None:
        """Take the part's XML, or what gives it in pieces.

        Raises LogbookError when it is not a sound worksheet; of pieces, where that is met.
        """
        self._source = (lambda: [source]) if isinstance(source, bytes) else source
        self._file = path, part
        self._where = f"{path}, part {part!r}"
        self._whole: tuple[bytes, Layout] | None = None
        self._formulas: dict[int, array[int]] = {}
        self._array_rows: dict[int, list[tuple[int, int]]] = {}
        self.errors: dict[tuple[int, int], ErrorValue] = {}
        self.last_row = 0
        self.last_column = 0
        self._is_known = False
        if isinstance(source, bytes):
            self.take_stock()

    # -- pieces

    def _pieces(self, *, check: bool = False) -> Iterator[Piece]:
        """Yield the part: its head, its rows, its tail. Raises Unusual where it is not plain."""
        if self._whole:
            yield from self._pieces_of_whole(*self._whole)
            return
        buffer = b""
        at: Literal["head", "rows", "tail"] = "head"
        frame = FrameChecker(*self._file) if check else None
        for chunk in self._source():
            buffer = buffer + chunk if buffer else chunk
            if at == "head" and (opening := _DATA.search(buffer)):
                self._data_tag = opening
                head, buffer = buffer[: opening.end()], buffer[opening.end() :]
                if frame:
                    frame.feed(head)
                    self._know(frame.layout, head)
                yield Piece("head", head, head)
                at = "tail" if opening[2] else "rows"
            if at == "rows":
                ending = self._names.data_end.search(buffer)
                cut = ending.start() if ending else buffer.rfind(self._plain_rows.row_mark)
                if cut > 0:
                    rows, buffer = buffer[:cut], buffer[cut:]
                    yield Piece("rows", rows, rows)
                if ending:
                    at = "tail"
            if at == "tail":
                if frame:
                    frame.feed(buffer)
                yield Piece("tail", buffer, buffer)
                buffer = b""
            if len(buffer) > MOST_OF_ONE_ROW:
                raise Unusual
        if at != "tail":
            raise Unusual
        if frame:
            frame.feed(b"", True)

    def _know(self, layout: Layout, head: bytes) -> None:
        if not layout.root:
            raise Unusual
        self._check_root(layout)
        if len(layout.prefixes) != 1:
            raise Unusual
        (prefix,) = layout.prefixes
        if not head.startswith(b"<" + prefix + b"worksheet", layout.root_start):
            raise Unusual
        self._root_start = layout.root_start
        self._names = names(frozenset(layout.prefixes), prefix)
        self._plain_rows = plain_rows(prefix)

    def _check_root(self, layout: Layout) -> None:
        path, part = self._file
        namespace, _, root = layout.root.rpartition(" ")
        if root != "worksheet" or namespace not in MAIN_NAMESPACES:
            raise LogbookError(f"{path} has no worksheet in its part {part!r}")

    def _pieces_of_whole(self, content: bytes, layout: Layout) -> Iterator[Piece]:
        plain = layout.blanked(content)
        opening = self._names.data.search(plain)
        if not opening:
            raise LogbookError(f"{self._where}: the sheet has no place for cells")
        self._data_tag = opening
        start = end = opening.end()
        yield Piece("head", content[:start], plain[:start])
        if not opening[2]:
            ending = self._names.data_end.search(plain, start)
            end = ending.start() if ending else start
            yield Piece("rows", content[start:end], plain[start:end])
        yield Piece("tail", content[end:], plain[end:])

    def _read_whole(self) -> None:
        path, part = self._file
        content = b"".join(self._source())
        layout = check_xml(content, path, part)
        self._check_root(layout)
        root = re.match(rb"<([^\s/>]*:)?", layout.blanked(content)[layout.root_start :][:256])
        self._names = names(frozenset(layout.prefixes), (root and root[1]) or b"")
        self._whole = content, layout

    # -- reading

    def stretches(self, most_rows: int = LAST_ROW) -> Iterator[Stretch]:
        """Yield the rows, at least up to number `most_rows`, as small worksheets; take stock.

        Raises Unusual before the careful way is taken: ask again, and forget what was given.
        """
        if self._whole:
            yield from self._stretch_of_whole()
            return
        self._begin_stock()
        try:
            yield from self._plain_stretches(most_rows)
        except Unusual:
            self._read_whole()
            self._begin_stock()
            raise

    def take_stock(self) -> None:
        """Find out where cells and formulas are."""
        if self._is_known:
            return
        with suppress(Unusual):
            for _ in self.stretches():
                pass
            return
        for _ in self.stretches():
            pass

    def _begin_stock(self) -> None:
        self._formulas, self._array_rows, self.errors = {}, {}, {}
        self._covered = self._spanned = self.last_row = self.last_column = 0
        self._shapes = (Shape(NEVER, 0, 0),) * 2
        self._tail = b""
        self._width = 0

    def _stretch_of_whole(self) -> Iterator[Stretch]:
        assert self._whole
        content, _ = self._whole
        first = 0
        for piece in self._pieces():
            if piece.kind == "rows":
                first = self._note_rows(piece)
        self._is_known = True
        if self.last_row:
            height = self.last_row - first + 1
            if height * self.last_column > MOST_SPANNED_AT_ONCE:
                raise LogbookError(
                    f"{self._where}: the sheet reaches to "
                    f"{cell_name(self.last_row, self.last_column)}, more than the "
                    f"{MOST_SPANNED_AT_ONCE:,} cells allowed in one laid out as this is"
                )
            yield Stretch(content, first, self.last_row, self.last_column)

    def _plain_stretches(self, most_rows: int) -> Iterator[Stretch]:
        opening = closing = b""
        before = 0
        for piece in self._pieces(check=True):
            if piece.kind == "head":
                name = self._names.prefix + b"sheetData"
                root = TAG.match(piece.content, self._root_start)
                opening = (root[0] if root else b"") + b"<" + name + b">"
                closing = b"</" + name + b"></" + self._names.prefix + b"worksheet>"
            elif piece.kind == "rows":
                for start, end, first, last, width in self._plain_spans(piece.content, before):
                    before = last
                    rows = piece.content[start:end]
                    stretch = b"".join((opening, rows, closing))
                    if not is_obviously_sound(rows) or b"<r>" in rows:
                        FrameChecker(*self._file).feed(stretch, True)
                    if width:
                        self._spanned += (last - first + 1) * width
                        if self._spanned > MOST_SPANNED_IN_ALL:
                            raise LogbookError(
                                f"{self._where}: the cells up to {cell_name(last, width)} lie so "
                                "far apart that there is no reading them"
                            )
                        yield Stretch(stretch, first, last, width)
                if before >= most_rows:
                    return
            elif len(self._tail) <= MOST_OF_A_TAIL:
                self._tail += piece.content
        self._is_known = True

    def _plain_spans(self, rows: bytes, before: int) -> Iterator[tuple[int, int, int, int, int]]:
        """Yield spans of whole rows: start, end, first and last row, last column; take stock."""
        patterns = self._plain_rows
        find_cells = patterns.cells.findall
        has_formulas = patterns.formula_mark in rows
        has_errors = patterns.error_mark in rows
        start = position = 0
        first = number = before
        width = 0
        shape, other = self._shapes
        while (
            (found := shape.row.match(rows, position))
            or (found := other.row.match(rows, position))
            or (found := patterns.row.match(rows, position))
        ):
            number = int(found[1])
            if not before < number <= LAST_ROW:
                raise Unusual
            begin, end = found.span(2)
            if begin < 0:
                begin = end = found.end()
            if found.re is other.row:
                shape, other = other, shape
            elif found.re is not shape.row:
                shape, other = patterns.shape(find_cells(rows, begin, end)), shape
                self._width = max(self._width, shape.width)
            last = shape.last_column
            if last:
                if not width:
                    first = number
                elif (number - first + 1) * max(width, last) > MOST_SPANNED:
                    yield start, position, first, before, width
                    start, first, width = position, number, 0
                if last > width:
                    width = last
                    self.last_column = max(last, self.last_column)
                self.last_row = number
            if has_formulas and rows.find(patterns.formula_mark, begin, end) >= 0:
                for letters, attributes in patterns.formulas.findall(rows, begin, end):
                    self._note_formula(number, number_of(letters), attributes)
            if has_errors and rows.find(patterns.error_mark, begin, end) >= 0:
                for letters, text in patterns.errors.findall(rows, begin, end):
                    self._note_error(number, number_of(letters), text)
            before = number
            position = found.end()
        self._shapes = shape, other
        if rows[position:].strip():
            raise Unusual
        if position > start:
            yield start, position, first, before, width

    def _rows(self, plain: bytes, number: int) -> Iterator[tuple[int, re.Match[bytes], int, int]]:
        """Yield each row's number, its tag, and where its content and the row itself end."""
        position = 0
        find_row, find_end = self._names.row.search, self._names.row_end.search
        while found := find_row(plain, position):
            given = found[2] or attributes_of(found[3]).get(b"r")
            if given is not None and not (given.isdigit() and len(given) <= 7):
                raise LogbookError(f"{self._where}: a row is numbered {given.decode()!r}")
            after = int(given) if given else number + 1
            if not number < after <= LAST_ROW:
                raise LogbookError(f"{self._where}: row {after} comes after row {number}")
            number = after
            content_end = position = found.end()
            if not found[4]:
                ending = find_end(plain, position)
                if not ending:
                    raise LogbookError(f"{self._where}: row {number} has no end")
                content_end, position = ending.span()
            yield number, found, content_end, position

    def _cells(
        self, plain: bytes, row: int, start: int, end: int, column: int = 0
    ) -> Iterator[tuple[int, re.Match[bytes]]]:
        """Yield the column and the match of each cell of a row; `column` is the one before."""
        own_digits = b"%d" % row
        for found in self._names.cell.finditer(plain, start, end):
            letters, digits = found.group("letters", "digits")
            if letters is None:
                given = _POSITION.search(found["attributes"])
                if given:
                    letters, digits = given.groups()
                elif b"r" in attributes_of(found["attributes"]):
                    raise LogbookError(f"{self._where}: a cell of row {row} has no readable name")
                else:
                    column += 1
                    yield column, found
                    continue
            after = number_of(letters)
            if digits != own_digits or not column < after <= LAST_COLUMN:
                raise LogbookError(
                    f"{self._where}: cell {(letters + digits).decode()} is out of its place "
                    f"in row {row}"
                )
            column = after
            yield column, found

    def _note_rows(self, piece: Piece) -> int:
        """Take stock of rows cell by cell, and return the first that holds something."""
        first = 0
        for row, tag, content_end, _ in self._rows(piece.plain, 0):
            for column, cell in self._cells(piece.plain, row, tag.end(), content_end):
                formula, attributes, rest = cell.group("formula", "attributes", "rest")
                if rest is None:
                    continue
                if rest and self._names.misplaced.search(rest):
                    raise LogbookError(
                        f"{self._where}: cell {cell_name(row, column)} is not laid out as a cell is"
                    )
                first = first or row
                self.last_row = row
                if column > self.last_column:
                    self.last_column = column
                if formula is not None:
                    self._note_formula(row, column, cell["formula_attributes"])
                # Looked for here because calamine gives an error as an empty cell.
                if b"e" in attributes and attributes_of(attributes).get(b"t") == b"e":
                    self._note_error(row, column, cell["stored"] or b"")
        return first

    def _note_error(self, row: int, column: int, stored: bytes) -> None:
        with suppress(ValueError):
            self.errors[row, column] = ErrorValue(stored.decode().strip())

    def _note_formula(self, row: int, column: int, attributes: bytes) -> None:
        self._formulas.setdefault(column, array("L")).append(row)
        if b"ref" in attributes:
            self._covered += self._note_array(attributes_of(attributes))
            if self._covered > 4 * LAST_ROW:
                raise LogbookError(f"{self._where}: its array formulas overlap")

    def _note_array(self, formula: dict[bytes, bytes]) -> int:
        # Only the first cell of an array formula or a data table carries the formula.
        if formula.get(b"t") not in (b"array", b"dataTable"):
            return 0
        area = Area.parsed(formula.get(b"ref", b"").decode())
        if area is None or area.last_row > LAST_ROW:
            return 0
        if area.first_row != area.last_row or area.first_column != area.last_column:
            for row in range(area.first_row, area.last_row + 1):
                self._array_rows.setdefault(row, []).append((area.first_column, area.last_column))
        return area.last_row - area.first_row + 1

    def has_formula(self, row: int, column: int) -> bool:
        """Say whether a cell holds a formula or lies in the range of an array formula."""
        rows = self._formulas.get(column)
        if rows:
            place = bisect_left(rows, row)
            if place < len(rows) and rows[place] == row:
                return True
        return bool(self._array_rows) and any(
            first <= column <= last for first, last in self._array_rows.get(row, ())
        )

    @property
    def formula_columns(self) -> set[int]:
        """The columns in which some cell may hold a formula."""
        columns = set(self._formulas)
        for spans in self._array_rows.values():
            for first, last in spans:
                columns.update(range(first, last + 1))
        return columns

    def formulas_outside(self, edits: Edits) -> bool:
        """Say whether any cell but the edited ones holds a formula."""
        return any(
            (row, column) not in edits for column, rows in self._formulas.items() for row in rows
        )

    @cached_property
    def merged(self) -> list[Area]:
        """The merged cells."""
        self.take_stock()
        tail = self._tail
        if self._whole or len(tail) > MOST_OF_A_TAIL:
            tail = b"".join(piece.plain for piece in self._pieces() if piece.kind == "tail")
        areas = []
        for found in self._names.opening(rb"mergeCell").finditer(tail):
            area = Area.parsed(attributes_of(found[1]).get(b"ref", b"").decode())
            if area:
                areas.append(area)
        return areas

    # -- editing

    def edited(self, edits: Mapping[int, Mapping[int, Value]]) -> bytes:
        """Return the part with cells set: edits[row][column] is a value, None empties the cell."""
        return b"".join(self.edited_pieces(Edits.of(edits)))

    def edited_pieces(self, edits: Edits) -> Iterator[bytes]:
        """Yield the part with cells set.

        A formula stays and only its stored result changes. Every byte outside the edited cells
        is kept, but for the widened `spans` of a row and `dimension` of the sheet where cells
        came in outside them.
        """
        self.take_stock()
        number = 0
        is_open = True
        for piece in self._pieces():
            if piece.kind == "head":
                self._read_column_styles(piece.plain)
                yield from self._edited_head(piece, edits)
                # sheetData that is one empty tag, or becomes a pair of them
                if self._data_tag[2]:
                    is_open = False
            elif piece.kind == "rows":
                rows, number = self._edited_rows(piece, edits, number)
                yield rows
            else:
                if is_open:
                    yield self._new_rows(edits, number, LAST_ROW + 1)
                    is_open = False
                yield piece.content

    def _edited_head(self, piece: Piece, edits: Edits) -> Iterator[bytes]:
        head, done = piece.content, 0
        if widened := self._widened_dimension(piece.plain, edits):
            start, end, text = widened
            yield head[:start] + text
            done = end
        new = self._new_rows(edits, 0, LAST_ROW + 1) if self._data_tag[2] else b""
        if new:
            name = self._data_tag[0][1:].split()[0].rstrip(b"/>")
            yield head[done : -len("/>")] + b">" + new + b"</" + name + b">"
        else:
            yield head[done:]

    def _edited_rows(self, piece: Piece, edits: Edits, before: int) -> tuple[bytes, int]:
        """Return the piece with the edited cells of its rows, and the number of its last row."""
        last_edited = edits.last_row
        if before >= last_edited:
            return piece.content, before
        if appended := self._appended_rows(piece, edits, before):
            return appended
        out: list[bytes] = []
        done = 0
        content = piece.content
        for number, tag, content_end, row_end in self._rows(piece.plain, before):
            if number > before + 1 and (new := self._new_rows(edits, before, number)):
                out += content[done : tag.start()], new
                done = tag.start()
            before = number
            if wanted := edits.row(number):
                out.append(content[done : tag.start()])
                out += self._edited_row(piece, number, tag, content_end, row_end, wanted)
                done = row_end
            if number >= last_edited:
                break
        out.append(content[done:])
        return b"".join(out), before

    def _appended_rows(self, piece: Piece, edits: Edits, before: int) -> tuple[bytes, int] | None:
        """Do the same where all edits are new cells after the last one of each row.

        That is what a log without computed columns gets, and it is quicker than looking at each
        row's cells. None where it is not so.
        """
        columns = edits.columns
        content = piece.content
        if (
            self._whole
            or self._array_rows
            or columns[0] <= self._width
            or (b"customFormat" in content and _OWN_STYLE.search(content))
        ):
            return None
        end = self._plain_rows.row_end
        rows = content.split(end)
        rest = rows.pop()
        if rest.strip() or content.count(self._plain_rows.row_mark) != len(rows):
            return None
        has_spans = b"spans" in content
        number_of = self._plain_rows.row_number.match
        out: list[bytes] = []
        noted = edits.rows(before + 1, before + 1 + len(rows))
        for row, values in zip(rows, noted, strict=True):
            found = number_of(row)
            if not found or int(found[1]) != before + 1:
                return None
            before += 1
            cells = self._new_cells(found[1], columns, values)
            if cells and has_spans:
                tag_end = row.index(b">") + 1
                out += widened_spans(row[:tag_end], columns), row[tag_end:], cells, end
            else:
                out += row, cells, end
        out.append(rest)
        return b"".join(out), before

    def _new_rows(self, edits: Edits, after: int, before: int) -> bytes:
        return b"".join(
            self._new_row(number, edits.row(number)) for number in edits.new_rows(after, before)
        )

    def _edited_row(
        self,
        piece: Piece,
        number: int,
        tag: re.Match[bytes],
        content_end: int,
        row_end: int,
        wanted: Sequence[tuple[int, Value]],
    ) -> list[bytes]:
        content, plain = piece.content, piece.plain
        pieces: list[bytes] = []
        inserted: list[int] = []
        done = tag.end()
        # The last cell passed ends at `passed`; the next one is not before column `ahead`.
        passed, passed_column, ahead = done, 0, 0
        for column, value in wanted:
            cell = None
            if ahead <= column:
                # Markup cannot stand inside a value, so what is found here is the cell.
                mark = b'<%bc r="%b%d"' % (tag[1], letters_of(column), number)
                place = plain.find(mark, passed, content_end)
                if place >= 0:
                    cell = self._names.cell.match(plain, place, content_end)
                else:
                    ahead = LAST_COLUMN + 1
                    for at, other in self._cells(plain, number, passed, content_end, passed_column):
                        if at >= column:
                            ahead = at
                            cell = other if at == column else None
                            break
                        passed, passed_column = other.end(), at
            if cell:
                pieces.append(content[done : cell.start()])
                pieces.append(self._edited_cell(piece, number, column, cell, value))
                done = passed = cell.end()
                passed_column, ahead = column, 0
            elif value is not None:
                pieces.append(content[done:passed])
                done = passed
                style = self._style(tag[3], column)
                pieces.append(self._new_cell(number, column, value, style, tag[1]))
                inserted.append(column)
        opening = tag[0]
        if inserted:
            opening = widened_spans(opening, inserted)
            if tag[4]:
                return [opening[:-2], b">", *pieces, b"</", tag[1], b"row>"]
        return [opening, *pieces, content[done:row_end]]

    def _edited_cell(
        self, piece: Piece, row: int, column: int, cell: re.Match[bytes], value: Value
    ) -> bytes:
        prefix, name, attributes, formula, old, inline, rest = cell.group(
            "prefix", "name", "attributes", "formula", "value", "inline", "rest"
        )
        if value is None and old is None and inline is None:
            return piece.content[cell.start() : cell.end()]
        if b"t" in attributes:
            attributes = _TYPE.sub(b"", attributes)
        calculated = formula is not None or self.has_formula(row, column)
        if not calculated and b"vm" in attributes:
            # Value metadata describes the value that is going.
            attributes = _VALUE_METADATA.sub(b"", attributes)
        kind, stored = stored_as(value, calculated, prefix)
        before = after = b""
        if rest is not None:
            # From the original, where comments are not blanked.
            gap = cell.end("gap")
            before = piece.content[cell.start("gap" if formula is None else "formula") : gap]
            if rest:
                after = piece.content[cell.start("rest") : cell.end("rest")]
        opening = b"<%bc%b%b%b" % (prefix, name or b"", attributes.rstrip(), kind)
        if not (before or stored or after):
            return opening + b"/>"
        return b"%b>%b%b%b</%bc>" % (opening, before, stored, after, prefix)

    def _new_row(self, number: int, cells: Sequence[tuple[int, Value]]) -> bytes:
        prefix = self._names.prefix
        inside = b"".join(
            self._new_cell(number, column, value, self._style(b"", column), prefix)
            for column, value in cells
            if value is not None
        )
        return b'<%brow r="%d">%b</%brow>' % (prefix, number, inside, prefix)

    def _new_cell(self, row: int, column: int, value: Value, style: bytes, prefix: bytes) -> bytes:
        calculated = bool(self._array_rows) and self.has_formula(row, column)
        kind, stored = stored_as(value, calculated, prefix)
        return b'<%bc r="%b%d"%b%b>%b</%bc>' % (
            prefix,
            letters_of(column),
            row,
            style,
            kind,
            stored,
            prefix,
        )

    def _new_cells(
        self, number: bytes, columns: Sequence[int], values: "tuple[Value | Unset, ...]"
    ) -> bytes:
        """Return new cells of a plain row, written with a pattern for values of their types."""
        types = tuple(map(type, values))
        prefix = self._names.prefix
        known = self._row_patterns.get(types)
        if known is None:
            known = self._row_patterns[types] = self._row_pattern(columns, values)
        pattern, others = known
        texts: tuple[object, ...] = values
        if others:
            changed = list(texts)
            # From the end, so that the places before stay as they were counted.
            for place in others:
                value = values[place]
                if is_something(value):
                    changed[place] = stored_as(value, False, prefix)[1]
                else:
                    del changed[place]
            texts = tuple(changed)
        # as short as elsewhere: 5, not 5.0
        cells = (pattern % texts).replace(b".0</%bv>" % prefix, b"</%bv>" % prefix)
        return cells.replace(b"\0", number)

    def _row_pattern(
        self, columns: Sequence[int], values: "Sequence[Value | Unset]"
    ) -> tuple[bytes, list[int]]:
        """Return the pattern of cells of these values' types, and where no float stands."""
        prefix = self._names.prefix
        # A zero byte, which no value's text can hold, stands for the row's number.
        pattern = b"".join(
            b'<%bc r="%b\0"%b%b</%bc>'
            % (
                prefix,
                letters_of(column),
                self._style(b"", column),
                held_pattern(value, prefix),
                prefix,
            )
            for column, value in zip(columns, values, strict=True)
            if is_something(value)
        )
        others = [place for place, value in enumerate(values) if type(value) is not float]
        return pattern, others[::-1]

    def _style(self, row_attributes: bytes, column: int) -> bytes:
        if b"customFormat" in row_attributes and _OWN_STYLE.search(row_attributes):
            row = attributes_of(row_attributes)
            if b"s" in row:
                return b' s="%b"' % row[b"s"]
        known = self._styles_by_column.get(column)
        if known is None:
            known = self._styles_by_column[column] = next(
                (
                    b' s="%b"' % style
                    for first, last, style in self._column_styles
                    if first <= column <= last
                ),
                b"",
            )
        return known

    def _read_column_styles(self, head: bytes) -> None:
        self._styles_by_column: dict[int, bytes] = {}
        self._row_patterns: dict[tuple[type, ...], tuple[bytes, list[int]]] = {}
        self._column_styles: list[tuple[int, int, bytes]] = []
        for found in self._names.opening(rb"col").finditer(head):
            column = attributes_of(found[1])
            with suppress(KeyError, ValueError):
                self._column_styles.append(
                    (int(column[b"min"]), int(column[b"max"]), column[b"style"])
                )

    def _widened_dimension(self, head: bytes, edits: Edits) -> tuple[int, int, bytes] | None:
        """Return where the dimension's text stands and what it must become, None if it holds."""
        found = self._names.opening(rb"dimension").search(head)
        place = found and _REFERENCE.search(head, found.start(1), found.end(1))
        area = Area.parsed(place[1].decode()) if place else None
        filled = edits.area()
        if not place or not area or not filled:
            return None
        wide = Area(*map(min, area[:2], filled[:2]), *map(max, area[2:], filled[2:]))
        return None if wide == area else (place.start(1), place.end(1), str(wide).encode())


_OWN_STYLE = re.compile(rb"""\scustomFormat\s*=\s*["'](?:1|true)["']""")
_REFERENCE = re.compile(rb"""\sref\s*=\s*["']([^"']*)["']""")
