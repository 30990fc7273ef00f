"""Logbooks in .csv and .tsv: what is not set keeps its bytes, quoting and line ends included."""

import codecs
import re
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import chain, islice
from math import isfinite
from pathlib import Path
from typing import Any, BinaryIO, Final

from workbooks.archive import read_file
from workbooks.cells import LAST_COLUMN, LAST_ROW, ErrorValue, LogbookError, Value
from workbooks.logbook import Logbook
from workbooks.saving import stamp, write_whole
from workbooks.sheet import HEADER_ROWS, Gathered, Sheet

BLOCK: Final = 1 << 20
"""Characters that are taken apart at a time"""

LOOKED_AT: Final = 200
"""Records from which separator and decimal sign are told"""

MARKS: Final = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)
ERRORS: Final = {
    text: ErrorValue(text)
    for text in ("#NUM!", "#VALUE!", "#N/A", "#DIV/0!", "#REF!", "#NAME?", "#NULL!")
}
"""What spreadsheet programs, and `fill`, write in a number's place"""

_COMMA_NUMBER = re.compile(r"\s*[+-]?\d*,\d+(?:[eE][+-]?\d+)?\s*\Z")
_POINT_NUMBER = re.compile(r"\s*[+-]?\d*\.\d+(?:[eE][+-]?\d+)?\s*\Z")


@dataclass(frozen=True)
class Record:
    """A row of the file: its text without the line's end, that end, and its fields as written."""

    text: str
    end: str
    fields: list[str]


class Text:
    """A file of delimited text taken apart into records."""

    def __init__(self, path: Path, content: bytes, separator: str | None) -> None:
        """Find out encoding, line ends and separator; raise LogbookError for what is no text."""
        self.path = path
        self.mark = next((mark for mark, _ in MARKS if content.startswith(mark)), b"")
        self.encoding = dict(MARKS).get(self.mark) or _encoding_of(content)
        try:
            self.text = content[len(self.mark) :].decode(self.encoding)
        except UnicodeDecodeError:
            raise LogbookError(f"{path} is not a text in {self.encoding}") from None
        if "\0" in self.text[:BLOCK]:
            raise LogbookError(f"{path} is not a text, whatever its name says")
        self.newline = "\r" if "\n" not in self.text and "\r" in self.text else "\n"
        self.separator = separator or self._likeliest_separator()
        self.decimal = "," if self.separator != "," and self._has_decimal_commas() else "."

    def _likeliest_separator(self) -> str:
        """Return the separator that cuts the first lines into the most fields, all alike."""
        found: list[tuple[int, str]] = []
        for separator in ",;\t":
            self.separator = separator
            counts = [len(record.fields) for record in islice(self.records(), LOOKED_AT)]
            usual = max(set(counts), key=counts.count, default=1)
            found.append((counts.count(usual) * (usual > 1) * min(usual, 3), separator))
        return max(found, key=lambda each: each[0])[1]

    def _has_decimal_commas(self) -> bool:
        texts = [
            text
            for record in islice(self.records(), LOOKED_AT)
            for text in map(unquoted, record.fields)
        ]
        return any(map(_COMMA_NUMBER.match, texts)) and not any(map(_POINT_NUMBER.match, texts))

    def blocks(self) -> Iterator[str]:
        """Yield stretches of the text that end where a line ends."""
        start, text, newline = 0, self.text, self.newline
        while start < len(text):
            cut = text.find(newline, start + BLOCK)
            end = len(text) if cut < 0 else cut + 1
            yield text[start:end]
            start = end

    def records(self) -> Iterator[Record]:
        """Yield the records, one by one."""
        waiting: list[str] = []
        for line in chain.from_iterable(_lines(block, self.newline) for block in self.blocks()):
            whole = "".join([*waiting, line]) if waiting else line
            text, end = _without_end(whole)
            fields = self.fields(text)
            if fields is None:
                waiting.append(line)
                if sum(map(len, waiting)) > BLOCK:
                    break
                continue
            waiting = []
            yield Record(text, end, fields)
        if waiting:
            raise LogbookError(
                f"{self.path}: a quotation mark is opened and not closed: "
                f"{' '.join(waiting[0].split())[:60]}"
            )

    def fields(self, record: str) -> list[str] | None:
        """Return a record's fields as they are written, None where a quotation goes on."""
        if '"' not in record:
            return record.split(self.separator)
        fields = []
        place = 0
        while True:
            if record.startswith('"', place):
                found = _QUOTED.match(record, place)
                if not found:
                    return None
                end = record.find(self.separator, found.end())
            else:
                end = record.find(self.separator, place)
            if end < 0:
                fields.append(record[place:])
                return fields
            fields.append(record[place:end])
            place = end + 1


_QUOTED = re.compile(r'"[^"]*(?:""[^"]*)*"')


def _encoding_of(content: bytes) -> str:
    try:
        content.decode("utf-8")
    except UnicodeDecodeError:
        try:
            content.decode("cp1252")
        except UnicodeDecodeError:
            return "latin-1"
        return "cp1252"
    return "utf-8"


def _lines(block: str, newline: str) -> Iterator[str]:
    """Yield the lines of a block, with their ends."""
    start = 0
    while start < len(block):
        cut = block.find(newline, start)
        end = len(block) if cut < 0 else cut + 1
        yield block[start:end]
        start = end


def _without_end(line: str) -> tuple[str, str]:
    for end in ("\r\n", "\n", "\r"):
        if line.endswith(end):
            return line[: -len(end)], end
    return line, ""


def unquoted(field: str) -> str:
    """Return what a field says."""
    if not field.startswith('"'):
        return field
    found = _QUOTED.match(field)
    return field if not found else found[0][1:-1].replace('""', '"') + field[found.end() :]


class DelimitedLogbook(Logbook):
    """A file of delimited text, which is a logbook of one sheet."""

    def __init__(self, path: Path, separator: str | None = None) -> None:
        """Read `path`; raise LogbookError for what is not a text."""
        super().__init__(path)
        content, self._stamp = read_file(path)
        self._sheet = self._made(content, separator)

    def _made(self, content: bytes, separator: str | None) -> "DelimitedSheet":
        return DelimitedSheet(Text(self.path, content, separator))

    @property
    def sheet_names(self) -> list[str]:
        return [self._sheet.name]

    def _open_sheet(self, name: str) -> Sheet:
        return self._sheet

    def save(self, path: Path, *, overwrite: bool = False, backup: bool = False) -> None:
        path = Path(path)
        ours = path.resolve() == self.path.resolve()
        written = write_whole(
            path,
            self._sheet.write,
            overwrite=overwrite,
            unchanged=self._stamp if ours and path.exists() else None,
            backup=backup and ours,
        )
        if ours:
            self._stamp = stamp(written)


class DelimitedSheet(Sheet):
    """The rows of a file of delimited text."""

    def __init__(self, text: Text) -> None:
        """Use `Logbook.sheet`."""
        super().__init__(text.path, text.path.stem)
        self._text = text
        self._known: dict[str, Any] = {}

    @cached_property
    def _size(self) -> tuple[int, int]:
        height = width = 0
        for first, rows in self._rows_by_block():
            height = first + len(rows) - 1
            width = max(width, max(map(len, rows)))
        if height > LAST_ROW or width > LAST_COLUMN:
            raise LogbookError(
                f"{self.path} has {height:,} rows of up to {width:,} fields, more than the "
                f"{LAST_ROW:,} of {LAST_COLUMN:,} that a sheet holds"
            )
        return height, width

    @property
    def height(self) -> int:
        return self._size[0]

    @property
    def width(self) -> int:
        return self._size[1]

    def _rows_by_block(self) -> Iterator[tuple[int, list[list[str]]]]:
        """Yield the number of the first row and the fields of some rows, as they are written."""
        text, separator = self._text, self._text.separator
        number = 1
        if '"' in text.text:
            records = text.records()
            while rows := [record.fields for record in islice(records, 10_000)]:
                yield number, rows
                number += len(rows)
            return
        for block in text.blocks():
            rows = [line.split(separator) for line in _bare_lines(block, text.newline)]
            yield number, rows
            number += len(rows)

    def _gather(self, wanted: Collection[int] | None, most_rows: int = LAST_ROW) -> Gathered:
        gathered = Gathered(wanted)
        for first, rows in self._rows_by_block():
            if first > most_rows:
                break
            if most_rows == HEADER_ROWS:
                rows = rows[:most_rows]
            width = max(map(len, rows))
            if min(map(len, rows)) < width:
                rows = [row + [""] * (width - len(row)) for row in rows]
            for place, fields in enumerate(zip(*rows, strict=True)):
                if wanted is None or place + 1 in wanted:
                    gathered.add_column(place + 1, first, self._values(place + 1, first, fields))
                    continue
                for offset in range(len(fields) - 1, -1, -1):
                    if not fields[offset].isspace() and fields[offset] not in ("", '""'):
                        gathered.last_filled[place + 1] = first + offset
                        break
        return gathered

    def _values(self, column: int, first_row: int, fields: Sequence[str]) -> Sequence[Any]:
        """Return what the fields of a column hold."""
        if self._text.decimal == ".":
            try:
                numbers = list(map(float, fields))
                # float() takes more than a logbook means: nan, infinity, 1_000
                if isfinite(sum(map(abs, numbers))) and "_" not in "".join(fields):
                    return numbers
            except ValueError:
                pass
        known = self._known
        values = []
        for field in fields:
            if field not in known:
                if len(known) > 100_000:
                    known.clear()
                known[field] = self._value(unquoted(field))
            values.append(known[field])
        return values

    def _value(self, text: str) -> Any:
        if text in ERRORS:
            return ERRORS[text]
        decimal = self._text.decimal
        number = text if decimal == "." else text.replace(decimal, ".") if "." not in text else ""
        if "_" in number:
            return text
        try:
            value = float(number)
        except ValueError:
            return text
        return value if isfinite(value) else text

    # -- writing

    def write(self, file: BinaryIO) -> None:
        """Write the text with the noted values in place."""
        file.write(self._text.mark)
        for piece in self._edited() if self._edits else (self._text.text,):
            self._put(file, piece)

    def _put(self, file: BinaryIO, piece: str) -> None:
        try:
            file.write(piece.encode(self._text.encoding))
        except UnicodeEncodeError as error:
            raise LogbookError(
                f"{self.path} is in {self._text.encoding}, which has no "
                f"{piece[error.start : error.end]!r}; save it as UTF-8"
            ) from None

    def _edited(self) -> Iterator[str]:
        number = 1
        text = self._text
        if '"' in text.text:
            records = text.records()
            while some := list(islice(records, 10_000)):
                yield "".join(
                    self._edited_record(number, record)
                    for number, record in enumerate(some, number)
                )
                number += len(some)
        else:
            for block in text.blocks():
                piece, count = self._edited_block(number, block)
                yield piece
                number += count
        ends_well = text.text.endswith(("\n", "\r")) or not text.text
        for row in self._edits.new_rows(number - 1, LAST_ROW + 1):
            end = "\r\n" if "\r\n" in text.text[:BLOCK] else text.newline
            missing = row - number
            yield ("" if ends_well else end) + end * missing
            yield self._edited_record(row, Record("", end, [""]))
            number, ends_well = row + 1, True

    def _edited_block(self, first: int, block: str) -> tuple[str, int]:
        """Return a block without quotations, with the noted values of its rows, and its rows."""
        lines = _bare_lines(block, self._text.newline)
        count = len(lines)
        columns = self._edits.columns
        before = columns[0] - 1
        slices = [self._edits.values(column, first, first + count) for column in columns]
        whole = (
            columns == list(range(columns[0], columns[0] + len(columns)))
            and "\r" not in block.replace("\r\n", "\n")[:-1]
            and None not in slices
        )
        separator = self._text.separator
        widths = {line.count(separator) + 1 for line in lines} if whole else set()
        if widths == {before} and before:
            # New columns at the end of every row, which are joined faster than looked at one by one
            texts = [self._texts(cells) for cells in slices if cells is not None]
            tails = map(separator.join, zip(*texts, strict=True))
            end = "\r\n" if block.endswith("\r\n") else self._text.newline
            piece = end.join(
                [f"{line}{separator}{tail}" for line, tail in zip(lines, tails, strict=True)]
            )
            return piece + (end if block.endswith(self._text.newline) else ""), count
        pieces = []
        for number, line in enumerate(_lines(block, self._text.newline), first):
            bare, end = _without_end(line)
            pieces.append(self._edited_record(number, Record(bare, end, bare.split(separator))))
        return "".join(pieces), count

    def _edited_record(self, number: int, record: Record) -> str:
        wanted = self._edits.row(number)
        if not wanted:
            return record.text + record.end
        fields = record.fields
        for column, value in wanted:
            if column > len(fields):
                if value is None:
                    continue
                fields = fields + [self._empty] * (column - len(fields))
            elif fields is record.fields:
                fields = list(fields)
            fields[column - 1] = self._texts([value])[0]
        return self._text.separator.join(fields) + record.end

    _empty = ""

    def _texts(self, values: Sequence[Value]) -> list[str]:
        """Return how values are written."""
        decimal = self._text.decimal
        texts = []
        for value in values:
            if type(value) is float:
                text = repr(value)
                texts.append(text if decimal == "." else text.replace(".", decimal))
            else:
                texts.append(self._written(value))
        return texts

    def _written(self, value: Value) -> str:
        match value:
            case None:
                return self._empty
            case bool():
                return "TRUE" if value else "FALSE"
            case ErrorValue():
                return value.text
            case str():
                return self._quoted(harmless(value))
        return repr(float(value)).replace(".", self._text.decimal)

    def _quoted(self, text: str) -> str:
        if any(sign in text for sign in (self._text.separator, '"', "\n", "\r")):
            return '"' + text.replace('"', '""') + '"'
        return text


def harmless(text: str) -> str:
    """Return a text that no spreadsheet takes for a formula; a mark before it says it is text."""
    return f"'{text}" if text.startswith(("=", "+", "-", "@", "\t", "\r")) else text


def _bare_lines(block: str, newline: str) -> list[str]:
    lines = block.split(newline)
    if not lines[-1]:
        lines.pop()
    if newline == "\n" and "\r" in block:
        lines = [line.removesuffix("\r") for line in lines]
    return lines
