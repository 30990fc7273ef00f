"""Tells an empty cell from one that holds 0, which Calc itself does not when it calls a function.

Calc hands an empty cell over as 0. So when a 0 arrives the open documents are asked: is there a
call of this function that refers to an empty cell in that place, and whose other arguments agree
with those that arrived? Only cell references, numbers and texts that stand in the call itself can
be looked at; reading the result of another formula would set off its calculation in the middle of
this one. What was read is kept until a document changes, so a column of empty cells costs one look.
Calc sometimes calculates before it says that a document has changed (when cells are deleted and the
height of their rows is found), so what was read is not kept either when it has not been asked for
as long as it took to read: a person's next step comes later than that.

It is copied into the extension and runs under every Python that LibreOffice is shipped with.
"""

from __future__ import annotations

import re
import time
from typing import TYPE_CHECKING, Any, NamedTuple

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence

NUMBERS_DATES_TEXTS = 1 | 2 | 4  # com.sun.star.sheet.CellFlags VALUE, DATETIME, STRING
FORMULAS = 16

REFERENCE = re.compile(
    r"(?:\$?(?P<sheet>'(?:[^']|'')+'|[^\s.'!]+)\.)?\$?(?P<column>[A-Z]{1,3})\$?(?P<row>[0-9]{1,7})"
)
NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
TEXT = re.compile(r'"(?:[^"]|"")*"')


class Cell(NamedTuple):
    """A cell: its sheet's name, its column and row counted from 0."""

    sheet: str
    column: int
    row: int


UNKNOWN = object()
EMPTY = object()


class Call(NamedTuple):
    """A call as it stands in a formula: the function, and each argument's own text."""

    name: str
    arguments: tuple[str, ...]


def calls(formula: str, prefix: str) -> Iterator[Call]:
    """Yield the calls in a formula of functions whose names begin with the prefix."""
    for found in re.finditer(re.escape(prefix) + r"([A-Z0-9_]+)\(", formula, re.IGNORECASE):
        arguments: list[str] = []
        depth, start, quote = 0, found.end(), ""
        for index in range(found.end(), len(formula)):
            letter = formula[index]
            if quote:
                if letter == quote:
                    quote = ""
            elif letter in "\"'":
                quote = letter
            elif letter in "({":
                depth += 1
            elif letter in ")}" and depth:
                depth -= 1
            elif letter == ")" or (letter == ";" and not depth):
                arguments.append(formula[start:index].strip())
                start = index + 1
                if letter == ")":
                    yield Call(found.group(1).upper(), tuple(arguments))
                    break


def reference(text: str, sheet: str) -> Cell | None:
    """Return the cell that a text refers to from a sheet, None for everything else."""
    found = REFERENCE.fullmatch(text)
    if not found:
        return None
    named = found.group("sheet")
    if named:
        sheet = named[1:-1].replace("''", "'") if named.startswith("'") else named
    column = 0
    for letter in found.group("column"):
        column = column * 26 + ord(letter) - 64
    return Cell(sheet, column - 1, int(found.group("row")) - 1)


class Patterns:
    """Sets of argument values, in some of which some are unknown."""

    def __init__(self) -> None:
        self.by_known: dict[tuple[int, tuple[int, ...]], set[tuple[Any, ...]]] = {}

    def add(self, values: Sequence[Any]) -> None:
        known = tuple(place for place, value in enumerate(values) if value is not UNKNOWN)
        found = self.by_known.setdefault((len(values), known), set())
        found.add(tuple(values[place] for place in known))

    def match(self, arguments: Sequence[Any]) -> bool:
        """Tell whether arguments fit; Calc hands None for those that a call leaves out."""
        return any(
            tuple(arguments[place] for place in known) in found
            and all(value is None for value in arguments[count:])
            for (count, known), found in self.by_known.items()
            if count <= len(arguments)
        )


class Calls:
    """The calls in all open documents that hand over an empty cell, or may hand over a true 0."""

    def __init__(self) -> None:
        self.empty: dict[tuple[str, int], Patterns] = {}
        self.zero: dict[tuple[str, int], Patterns] = {}

    def add(self, call: Call, values: Sequence[Any]) -> None:
        arrive = [0.0 if value is EMPTY else value for value in values]
        for place, value in enumerate(values):
            if value is EMPTY:
                self.empty.setdefault((call.name, place), Patterns()).add(arrive)
            elif value is UNKNOWN or value == 0.0:
                self.zero.setdefault((call.name, place), Patterns()).add(arrive)


def read(document: Any, prefix: str, found: Calls) -> None:
    """Put a document's calls into `found`; nothing is calculated for it."""
    sheets = document.Sheets
    written: list[tuple[str, Call]] = []
    for name in sheets.ElementNames:
        sheet = sheets.getByName(name)
        for area in sheet.queryContentCells(FORMULAS).RangeAddresses:
            for row in _cells(sheet, area).getFormulaArray():
                for formula in row:
                    if prefix in formula.upper():
                        written += [(name, call) for call in calls(formula, prefix)]
    wanted = {
        cell
        for sheet_name, call in written
        for cell in (reference(text, sheet_name) for text in call.arguments)
        if cell is not None
    }
    known = _contents(sheets, wanted)
    for sheet_name, call in written:
        found.add(call, [_value(text, sheet_name, known) for text in call.arguments])


def _cells(sheet: Any, area: Any) -> Any:
    return sheet.getCellRangeByPosition(
        area.StartColumn, area.StartRow, area.EndColumn, area.EndRow
    )


def _contents(sheets: Any, wanted: set[Cell]) -> dict[Cell, Any]:
    """Return what the cells hold: a number, a text, EMPTY, or UNKNOWN for a formula's result."""
    contents: dict[Cell, Any] = {}
    for name in {cell.sheet for cell in wanted}:
        if not sheets.hasByName(name):
            continue
        columns = [cell.column for cell in wanted if cell.sheet == name]
        rows = [cell.row for cell in wanted if cell.sheet == name]
        area = sheets.getByName(name).getCellRangeByPosition(
            min(columns), min(rows), max(columns), max(rows)
        )
        contents.update((cell, EMPTY) for cell in wanted if cell.sheet == name)
        for part in area.queryContentCells(NUMBERS_DATES_TEXTS).RangeAddresses:
            held = _cells(sheets.getByName(name), part).getDataArray()
            for row, values in enumerate(held, part.StartRow):
                for column, value in enumerate(values, part.StartColumn):
                    contents[Cell(name, column, row)] = value
        for part in area.queryContentCells(FORMULAS).RangeAddresses:
            for row in range(part.StartRow, part.EndRow + 1):
                for column in range(part.StartColumn, part.EndColumn + 1):
                    contents[Cell(name, column, row)] = UNKNOWN
    return contents


def _value(text: str, sheet: str, contents: dict[Cell, Any]) -> Any:
    cell = reference(text, sheet)
    if cell is not None:
        return contents.get(cell, UNKNOWN)
    if not text:
        return None
    if NUMBER.fullmatch(text):
        return float(text)
    if TEXT.fullmatch(text):
        return text[1:-1].replace('""', '"')
    return UNKNOWN


class Emptiness:
    """What is known of the open documents; `forget` when one of them changes."""

    def __init__(self, documents: Callable[[], Iterable[Any]], prefix: str) -> None:
        """Take what gives the open documents, and what every function's full name begins with."""
        self._documents = documents
        self._prefix = prefix.upper()
        self._calls: Calls | None = None
        self._took = 0.0
        self._asked_last = 0.0

    def forget(self) -> None:
        self._calls = None

    def without_empty(
        self, name: str, arguments: tuple[Any, ...], required: frozenset[int]
    ) -> tuple[Any, ...]:
        """Return the arguments with None for each 0 that is an empty cell.

        Where a call with a true 0 looks the same, or no call does (it stands in a document that is
        still being loaded), a required argument is taken for empty and an optional one for the 0:
        an error value in place of a number is seen, a number made from nothing is not.
        """
        known = self._known()
        changed = list(arguments)
        for place, value in enumerate(arguments):
            if value != 0.0 or type(value) is not float:
                continue
            empty = known.empty.get((name, place))
            zero = known.zero.get((name, place))
            may_be_zero = zero is not None and zero.match(arguments)
            if place in required:
                may_be_empty = not may_be_zero or (empty is not None and empty.match(arguments))
            else:
                may_be_empty = not may_be_zero and empty is not None and empty.match(arguments)
            if may_be_empty:
                changed[place] = None
        return tuple(changed)

    def _known(self) -> Calls:
        began = time.monotonic()
        if self._calls is None or began - self._asked_last > self._took:
            found = Calls()
            for document in self._documents():
                read(document, self._prefix, found)
            self._calls = found
            self._took = time.monotonic() - began
        self._asked_last = time.monotonic()
        return self._calls
