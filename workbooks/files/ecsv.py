"""Logbooks in .ecsv, whose header says each column's unit, type and meaning (astropy APE 6)."""

import json
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO, Final

from workbooks.files.cells import ErrorValue, LogbookError, Value, cell_name
from workbooks.files.delimited import DelimitedLogbook, DelimitedSheet
from workbooks.files.records import Record, Text, unquoted
from workbooks.logbook import parse_header

LONGEST_HEADER: Final = 1 << 20
NUMBERS: Final = re.compile(r"(?:u?int|float)\d+\Z")


@dataclass(frozen=True)
class Described:
    """What the header says of a column."""

    name: str
    unit: str
    datatype: str
    is_single: bool
    """Whether each cell is one value, not an array"""


class EcsvLogbook(DelimitedLogbook):
    """A file of delimited text under a header in YAML."""

    def _made(self, separator: str | None) -> DelimitedSheet:
        content = self._file.head(LONGEST_HEADER)
        if not content.startswith(b"# %ECSV "):
            raise LogbookError(f"{self.path} is not an .ecsv, whatever its name says")
        end = 0
        for line in content.splitlines(keepends=True):
            if not line.startswith(b"#"):
                break
            end += len(line)
        else:
            raise LogbookError(f"{self.path} has no row of column names after its header")
        try:
            header = content[:end].decode()
        except UnicodeDecodeError:
            raise LogbookError(f"{self.path} is not a text in utf-8") from None
        described, delimiter = _read(header, self.path)
        text = Text(self._file, delimiter, end)
        text.decimal = "."
        return EcsvSheet(text, header, described)


def _read(header: str, path: Path) -> tuple[list[Described], str]:
    import yaml  # type: ignore[import-untyped]

    lines = [line[1:].removeprefix(" ") for line in header.splitlines()]
    start, end = _datatype_lines(lines)
    delimiter = next(
        (line.partition(":")[2].strip() for line in lines if line.startswith("delimiter:")), "' '"
    )
    try:
        # Only these two are read: what a header may hold besides is nobody's business here.
        columns = yaml.safe_load("\n".join(lines[start:end]))["datatype"]
        delimiter = yaml.safe_load(delimiter)
        described = [
            Described(
                str(column["name"]),
                str(column.get("unit") or ""),
                str(column["datatype"]),
                "subtype" not in column or column["subtype"] is None,
            )
            for column in columns
        ]
    except (yaml.YAMLError, KeyError, TypeError, AttributeError, RecursionError, ValueError):
        raise LogbookError(f"{path} has a header that does not describe its columns") from None
    if delimiter not in (" ", ","):
        raise LogbookError(f"{path} names {delimiter!r} as its delimiter; it must be ' ' or ','")
    return described, delimiter


def _datatype_lines(lines: Sequence[str]) -> tuple[int, int]:
    """Return where the list of columns begins and where it ends."""
    start = next((at for at, line in enumerate(lines) if line.startswith("datatype:")), len(lines))
    end = start + 1
    while end < len(lines) and (not lines[end].strip() or lines[end][0] in "- \t"):
        end += 1
    return start, end


class EcsvSheet(DelimitedSheet):
    """The rows of an .ecsv, the first of which holds names with the header's units."""

    def __init__(self, text: Text, header: str, described: Sequence[Described]) -> None:
        """Use `Logbook.sheet`."""
        super().__init__(text)
        self._header = header
        self._described = described
        names = next(text.records(), None)
        if names is None or [unquoted(each) for each in names.fields] != [
            column.name for column in described
        ]:
            raise LogbookError(f"{self.path}: the row of column names is not what the header says")
        self._words: dict[int, str] = {}

    _empty = '""'

    def describe(self, column: int, words: str) -> None:
        self._words[column] = words

    def _values(self, column: int, first_row: int, fields: Sequence[str]) -> Sequence[Any]:
        described = self._described[column - 1] if column <= len(self._described) else None
        texts = [unquoted(field) for field in fields]
        if described and NUMBERS.match(described.datatype) and described.is_single:
            values: list[Any] = [
                None if text in ("", "nan") else self._value(text) for text in texts
            ]
        else:
            values = list(texts)
        if first_row == 1 and described and described.unit:
            values[0] = f"{described.name} [{described.unit}]"
        elif first_row == 1:
            values[0] = texts[0]
        return values

    def _written(self, value: Value) -> str:
        # In a column of numbers there is no place for an error: the report alone tells it.
        if isinstance(value, ErrorValue):
            return self._empty
        # No spreadsheet program opens an .ecsv, so that a text needs no guard against formulas.
        return self._quoted(value) if isinstance(value, str) else super()._written(value)

    def _quoted(self, text: str) -> str:
        return super()._quoted(text) if text else self._empty

    def write(self, file: BinaryIO) -> None:
        file.write(self._edited_header().encode())
        super().write(file)

    def _edited_header(self) -> str:
        known = len(self._described)
        for column in self._edits.columns:
            if column <= known:
                self._check_kind(column)
        new = [column for column in self._edits.columns if column > known]
        if not new:
            return self._header
        if new != list(range(known + 1, known + 1 + len(new))):
            raise LogbookError(f"{self.path}: a column would stand apart from the others")
        lines = self._header.splitlines(keepends=True)
        _, end = _datatype_lines([line[1:].removeprefix(" ") for line in lines])
        newline = "\r\n" if lines[0].endswith("\r\n") else "\n"
        made = [f"# - {self._description(column)}{newline}" for column in new]
        return "".join([*lines[:end], *made, *lines[end:]])

    def _check_kind(self, column: int) -> None:
        described = self._described[column - 1]
        if all(value is None or isinstance(value, str) for value in self._new_values(column)):
            return
        if not described.datatype.startswith("float") or not described.is_single:
            raise LogbookError(
                f"{self.path}: the column {described.name!r} is of {described.datatype}, which "
                "does not hold the results; it must be float64"
            )

    def _new_values(self, column: int) -> Iterator[Value]:
        return (value for row, value in self._edits.column(column) if row > 1)

    def _description(self, column: int) -> str:
        label = next((value for row, value in self._edits.column(column) if row == 1), None)
        if not isinstance(label, str):
            raise LogbookError(f"{self.path}: {cell_name(1, column)} would have no name")
        header = parse_header(label)
        is_text = any(isinstance(value, str) for value in self._new_values(column))
        # JSON is YAML too, and quotes whatever needs quoting.
        fields = {"name": header.label}
        if header.unit:
            fields["unit"] = header.unit
        fields["datatype"] = "string" if is_text else "float64"
        if words := self._words.get(column):
            fields["description"] = words
        return json.dumps(fields, ensure_ascii=False)

    def _edited_record(self, number: int, record: Record) -> str:
        # Every row has as many fields as there are columns, also where none was noted.
        missing = max(self._edits.columns) - len(record.fields)
        if record.text and missing > 0:
            fields = [*record.fields, *[self._empty] * missing]
            record = Record(self._text.separator.join(fields), record.end, fields)
        return super()._edited_record(number, record)

    def _edited(self) -> Iterator[str]:
        # In the row of names a unit has no place: it is in the header.
        for column in self._edits.columns:
            label = next((value for row, value in self._edits.column(column) if row == 1), None)
            if isinstance(label, str):
                self._edits.set(1, column, parse_header(label).label)
        return super()._edited()
