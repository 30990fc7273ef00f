"""Delimited text read from its file block by block, as often as it is needed."""

import codecs
import re
from collections.abc import Collection, Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import islice
from typing import Final

from workbooks.files.cells import LogbookError
from workbooks.files.opened import OpenedFile

LONGEST: Final = 1 << 20
"""Characters that a record may have, and that are looked at to tell a text from what is none"""

LOOKED_AT: Final = 200
"""Records from which separator and decimal sign are told"""

MARKS: Final = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)

_COMMA_NUMBER = re.compile(r"\s*[+-]?\d*,\d+(?:[eE][+-]?\d+)?\s*\Z")
_POINT_NUMBER = re.compile(r"\s*[+-]?\d*\.\d+(?:[eE][+-]?\d+)?\s*\Z")
_QUOTED = re.compile(r'"[^"]*(?:""[^"]*)*"(?!")')


@dataclass(frozen=True)
class Record:
    """A row of the file: its text without the line's end, that end, and its fields as written."""

    text: str
    end: str
    fields: list[str]


@dataclass(frozen=True)
class Block:
    """A stretch of the text that ends where a record ends, or the text does."""

    text: str
    separator: str
    newline: str
    quoted: list[Record] | None
    """Its records where there is a quotation in it; where there is none, lines are records"""

    @cached_property
    def lines(self) -> list[str]:
        """The lines of a block without quotations, without their ends."""
        lines = self.text.split(self.newline)
        if not lines[-1]:
            lines.pop()
        if self.newline == "\n" and "\r" in self.text:
            lines = [line.removesuffix("\r") for line in lines]
        return lines

    def __len__(self) -> int:
        """Return the number of records."""
        return len(self.lines if self.quoted is None else self.quoted)

    def fields(self, index: int) -> list[str]:
        """Return the fields of a record, as they are written."""
        if self.quoted is None:
            return self.lines[index].split(self.separator)
        return self.quoted[index].fields

    @cached_property
    def widths(self) -> list[int]:
        """The number of fields of each record."""
        if self.quoted is None:
            separator = self.separator
            return [line.count(separator) + 1 for line in self.lines]
        return [len(record.fields) for record in self.quoted]

    def columns(self, wanted: Collection[int]) -> Iterator[tuple[int, list[str]]]:
        """Yield numbers of columns and their fields, "" where a record has none."""
        if not wanted:
            return
        if self.quoted is None:
            # What stands right of the last column that is wanted is left in one piece.
            last, separator = max(wanted), self.separator
            rows = [line.split(separator, last) for line in self.lines]
        else:
            rows = [record.fields for record in self.quoted]
        narrowest = min(self.widths)
        for column in sorted(wanted):
            at = column - 1
            if at < narrowest:
                yield column, [row[at] for row in rows]
            else:
                yield column, [row[at] if at < len(row) else "" for row in rows]

    def records(self) -> Iterator[Record]:
        """Yield the records, one by one."""
        if self.quoted is not None:
            yield from self.quoted
            return
        start, text = 0, self.text
        while start < len(text):
            stop = _after(text, self.newline, start)
            bare, end = _without_end(text[start:stop])
            yield Record(bare, end, bare.split(self.separator))
            start = stop


class Text:
    """A file of delimited text, or the part of it from some byte on, taken apart into records."""

    def __init__(self, file: OpenedFile, separator: str | None, begin: int = 0) -> None:
        """Find out encoding, line ends and separator; raise LogbookError for what is no text."""
        self.path = file.path
        self._file = file
        start = file.head(3, begin)
        self.mark = next((mark for mark, _ in MARKS if start.startswith(mark)), b"")
        self._begin = begin + len(self.mark)
        marked = dict(MARKS).get(self.mark)
        for encoding in (marked,) if marked else ("utf-8", "cp1252", "latin-1"):
            try:
                self._look_through(encoding)
                break
            except UnicodeDecodeError:
                continue
        else:
            raise LogbookError(f"{self.path} is not a text in {marked}")
        self.separator = separator or self._likeliest_separator()
        self.decimal = "," if self.separator != "," and self._has_decimal_commas() else "."

    def _look_through(self, encoding: str) -> None:
        """Find out what only the whole text tells; raise UnicodeDecodeError if it is none."""
        self.encoding = encoding
        head = last = ""
        has_feed = has_return = False
        for piece in self._pieces():
            head += piece[: LONGEST - len(head)]
            last = piece[-1]
            has_feed = has_feed or "\n" in piece
            has_return = has_return or "\r" in piece
        if "\0" in head:
            raise LogbookError(f"{self.path} is not a text, whatever its name says")
        self.newline = "\r" if has_return and not has_feed else "\n"
        self.line_end = "\r\n" if "\r\n" in head else self.newline
        """What ends a line that is put after the others"""
        self.ends_well = last in ("\n", "\r", "")
        """Whether the last line has an end, too"""

    def _likeliest_separator(self) -> str:
        """Return the separator that cuts the first lines into the most fields, all alike."""
        found: list[tuple[int, str]] = []
        for separator in ",;\t":
            self.separator = separator
            try:
                counts = [len(record.fields) for record in islice(self.records(), LOOKED_AT)]
            except LogbookError:
                # Taken apart wrongly, a text may seem to open a quotation where it closes one.
                continue
            usual = max(set(counts), key=counts.count, default=1)
            found.append((counts.count(usual) * (usual > 1) * min(usual, 3), separator))
        return max(found, key=lambda each: each[0], default=(0, ","))[1]

    def _has_decimal_commas(self) -> bool:
        texts = [
            text
            for record in islice(self.records(), LOOKED_AT)
            for text in map(unquoted, record.fields)
        ]
        return any(map(_COMMA_NUMBER.match, texts)) and not any(map(_POINT_NUMBER.match, texts))

    def chunks(self) -> Iterator[bytes]:
        """Yield the bytes as they are, the mark of the encoding not among them."""
        return self._file.chunks(self._begin)

    def _pieces(self) -> Iterator[str]:
        """Yield the text in pieces that end anywhere."""
        decoder = codecs.getincrementaldecoder(self.encoding)()
        for chunk in self.chunks():
            if piece := decoder.decode(chunk):
                yield piece
        if piece := decoder.decode(b"", final=True):
            yield piece

    def blocks(self) -> Iterator[Block]:
        """Yield the text in stretches that end where a record ends."""
        rest = ""
        try:
            for piece in self._pieces():
                text = rest + piece
                block = self._block(text, text.rfind(self.newline) + 1)
                rest = text[len(block.text) :]
                if len(rest) > LONGEST:
                    raise self._too_long(rest)
                if block.text:
                    yield block
        except UnicodeDecodeError:
            raise self._file.changed() from None
        if rest:
            block = self._block(rest, len(rest))
            if block.text:
                yield block
            if len(block.text) < len(rest):
                raise self._not_closed(rest[len(block.text) :])

    def records(self) -> Iterator[Record]:
        """Yield the records, one by one."""
        for block in self.blocks():
            yield from block.records()

    def _block(self, text: str, stop: int) -> Block:
        """Return the records of a text up to the end of a line, without one that goes on there."""
        if text.find('"', 0, stop) < 0:
            return Block(text[:stop], self.separator, self.newline, None)
        records = []
        start = 0
        while start < stop:
            end = _after(text, self.newline, start, stop)
            record = self._record(text, start, end, stop)
            if record is None:
                break
            records.append(record)
            start += len(record.text) + len(record.end)
        return Block(text[:start], self.separator, self.newline, records)

    def _record(self, text: str, start: int, end: int, stop: int) -> Record | None:
        """Return the record whose first line is given, None where a quotation goes on at `stop`."""
        if text.find('"', start, end) < 0:
            bare, line_end = _without_end(text[start:end])
            return Record(bare, line_end, bare.split(self.separator))
        fields = []
        place = after = start
        while True:
            if text.startswith('"', place):
                found = _QUOTED.match(text, place, stop)
                if not found:
                    return None
                after = found.end()
                if after > end:
                    end = _after(text, self.newline, after, stop)
            cut = text.find(self.separator, after, end)
            if cut < 0:
                break
            fields.append(text[place:cut])
            place = after = cut + 1
        bare, line_end = _without_end(text[start:end])
        fields.append(text[place : start + len(bare)])
        return Record(bare, line_end, fields)

    def _too_long(self, text: str) -> LogbookError:
        if self._record(text, 0, _after(text, self.newline, 0), len(text)) is None:
            return self._not_closed(text)
        return LogbookError(
            f"{self.path}: a line has more than {LONGEST:,} characters, which no row of a logbook "
            f"has: {' '.join(text[:200].split())[:60]}"
        )

    def _not_closed(self, text: str) -> LogbookError:
        line = text[: _after(text, self.newline, 0)]
        return LogbookError(
            f"{self.path}: a quotation mark is opened and not closed: {' '.join(line.split())[:60]}"
        )


def _after(text: str, newline: str, start: int, stop: int | None = None) -> int:
    """Return where the line ends that goes on at `start`, its end included."""
    found = text.find(newline, start, stop)
    return found + 1 if found >= 0 else len(text) if stop is None else stop


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
