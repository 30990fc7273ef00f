"""Logbooks in .csv and .tsv: what is not set keeps its bytes, quoting and line ends included."""

import os
from collections.abc import Collection, Iterator, Sequence
from functools import cached_property
from itertools import islice
from math import isfinite
from pathlib import Path
from typing import Any, BinaryIO, Final

from workbooks.files.cells import LAST_COLUMN, LAST_ROW, ErrorValue, LogbookError, Value
from workbooks.files.opened import OpenedFile
from workbooks.files.records import Block, Record, Text, unquoted
from workbooks.files.saving import stamp, write_whole
from workbooks.files.sheet import HEADER_ROWS, Gathered, Sheet
from workbooks.logbook import Logbook

ERRORS: Final = {
    text: ErrorValue(text)
    for text in ("#NUM!", "#VALUE!", "#N/A", "#DIV/0!", "#REF!", "#NAME?", "#NULL!")
}
"""What spreadsheet programs, and `fill`, write in a number's place"""

CLOSED_FIRST: Final = os.name == "nt"
"""Whether the system puts no file in the place of one that is open"""


class DelimitedLogbook(Logbook):
    """A file of delimited text, which is a logbook of one sheet."""

    def __init__(self, path: Path, separator: str | None = None) -> None:
        """Read `path`; raise LogbookError for what is not a text."""
        super().__init__(path)
        self._file = OpenedFile(path)
        self._stamp = self._file.stamp
        self._sheet = self._made(separator)

    def _made(self, separator: str | None) -> "DelimitedSheet":
        return DelimitedSheet(Text(self._file, separator))

    @property
    def sheet_names(self) -> list[str]:
        return [self._sheet.name]

    def _open_sheet(self, name: str) -> Sheet:
        return self._sheet

    def save(self, path: Path, *, overwrite: bool = False, backup: bool = False) -> None:
        path = Path(path)
        ours = path.resolve() == self.path.resolve()

        def write(file: BinaryIO) -> None:
            self._sheet.write(file)
            if ours and CLOSED_FIRST:
                self._file.close()

        written = write_whole(
            path,
            write,
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
        for block in self._text.blocks():
            height += len(block)
            width = max(width, max(block.widths))
        return self._checked(height, width)

    def _checked(self, height: int, width: int) -> tuple[int, int]:
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

    def _gather(self, wanted: Collection[int] | None, most_rows: int = LAST_ROW) -> Gathered:
        gathered = Gathered(wanted)
        if most_rows == HEADER_ROWS:
            self._gather_top(gathered, wanted)
            return gathered
        height = width = 0
        for block in self._text.blocks():
            first = height + 1
            height += len(block)
            widest = max(block.widths)
            width = max(width, widest)
            if height > LAST_ROW or width > LAST_COLUMN:
                # It will be refused, in words that say how large it is.
                continue
            here = range(1, widest + 1)
            ours = here if wanted is None else [column for column in here if column in wanted]
            for column, fields in block.columns(ours):
                gathered.add_column(column, first, self._values(column, first, fields))
            self._note_last(gathered, first, block, set(here).difference(ours))
        # Without another look at the file, `height` and `width` are known now.
        self.__dict__["_size"] = self._checked(height, width)
        return gathered

    def _gather_top(self, gathered: Gathered, wanted: Collection[int] | None) -> None:
        rows = [record.fields for record in islice(self._text.records(), HEADER_ROWS)]
        width = max(map(len, rows), default=0)
        if width > LAST_COLUMN:
            self._checked(*self._size)
        for column in range(1, width + 1):
            if wanted is None or column in wanted:
                fields = [row[column - 1] if column <= len(row) else "" for row in rows]
                gathered.add_column(column, 1, self._values(column, 1, fields))

    @staticmethod
    def _note_last(gathered: Gathered, first: int, block: Block, missing: set[int]) -> None:
        """Note how far columns go whose values are not wanted."""
        for index in range(len(block) - 1, -1, -1):
            if not missing:
                return
            fields = block.fields(index)
            # Whichever are fewer: a record may be long, and so may a block of empty lines be.
            columns = missing if len(missing) < len(fields) else range(1, len(fields) + 1)
            found = [
                column
                for column in columns
                if column <= len(fields)
                and fields[column - 1] not in ("", '""')
                and not fields[column - 1].isspace()
            ]
            for column in missing.intersection(found):
                gathered.last_filled[column] = first + index
            missing.difference_update(found)

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
        if not self._edits:
            for chunk in self._text.chunks():
                file.write(chunk)
            return
        for piece in self._edited():
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
        for block in text.blocks():
            yield self._edited_block(number, block)
            number += len(block)
        ends_well = text.ends_well
        for row in self._edits.new_rows(number - 1, LAST_ROW + 1):
            missing = row - number
            yield ("" if ends_well else text.line_end) + text.line_end * missing
            yield self._edited_record(row, Record("", text.line_end, [""]))
            number, ends_well = row + 1, True

    def _edited_block(self, first: int, block: Block) -> str:
        """Return a block with the noted values of its records."""
        return self._lengthened(first, block) or "".join(
            self._edited_record(number, record)
            for number, record in enumerate(block.records(), first)
        )

    def _lengthened(self, first: int, block: Block) -> str | None:
        """Return a block with new columns at the end of every row, None where that is not all.

        They are joined faster than looked at one by one.
        """
        columns = self._edits.columns
        before = columns[0] - 1
        text, newline = block.text, block.newline
        feeds, returns = text.count("\n"), text.count("\r")
        is_two = newline == "\n" and returns > 0
        if (
            block.quoted is not None
            or not before
            or columns != list(range(columns[0], columns[0] + len(columns)))
            or (is_two and not feeds == returns == text.count("\r\n"))
            or min(block.widths) != before
            or max(block.widths) != before
        ):
            return None
        texts = []
        for column in columns:
            values = self._edits.values(column, first, first + len(block))
            if values is None:
                return None
            # A cell that is not there needs not be emptied.
            if column == columns[-1] and None in values:
                return None
            texts.append(self._texts(values))
        separator = block.separator
        end = "\r\n" if is_two else newline
        tails = map(separator.join, zip(*texts, strict=True))
        piece = end.join(
            [f"{line}{separator}{tail}" for line, tail in zip(block.lines, tails, strict=True)]
        )
        return piece + (end if text.endswith(newline) else "")

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
        if decimal == "." and set(map(type, values)) == {float}:
            return list(map(repr, values))
        # A trail is the same in every row.
        known: dict[str, str] = {}
        texts = []
        for value in values:
            if type(value) is float:
                texts.append(repr(value).replace(".", decimal))
            elif type(value) is str:
                if value not in known:
                    known[value] = self._written(value)
                texts.append(known[value])
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
