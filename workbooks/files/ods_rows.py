"""Rows of an .ods that are laid out as nearly every program does it, each taken in at one look."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from html import unescape
from typing import Any, Final

from workbooks.files.cells import LAST_COLUMN
from workbooks.files.ods_cells import (
    CALC,
    COLUMNS_REPEATED,
    COLUMNS_SPANNED,
    FORMULA_TEXT,
    OFFICE,
    ROWS_REPEATED,
    ROWS_SPANNED,
    TABLE,
    TEXT,
    VALUE_TYPE,
    Cell,
)

MOST_SHAPES: Final = 200
"""A sheet whose rows are more unlike than that gains nothing by shapes"""

MOST_CELLS_IN_SHAPE: Final = 300

TRIED: Final = 6
"""Shapes that a row is held against before its cells are looked at one by one"""

_VARYING: Final = (
    FORMULA_TEXT,
    *(
        f"{OFFICE} {name}"
        for name in ("value", "date-value", "time-value", "boolean-value", "string-value")
    ),
)
_ATTRIBUTE = re.compile(rb' ([\w:.-]+)="([^"]*)"')

Groups = tuple[bytes, ...]
"""What a row has at the places where its shape leaves it open"""


@dataclass(slots=True)
class ShapeCell:
    """A cell of a shape; groups are counted as `re` counts them, 0 is none."""

    column: int
    repeated: int
    before: int
    """The last group before the cell"""
    ahead: int
    """Bytes from the end of that group to the cell's tag"""
    attributes: dict[str, str] = field(default_factory=dict)
    """Those that are the same in all rows of the shape"""
    varying: dict[str, int] = field(default_factory=dict)
    """The groups that hold the others"""
    text: int = 0
    """The group that holds its paragraph"""

    def reader(self) -> Callable[[Groups], Any] | None:
        """Return what gives the value, where that needs no further look at the cell."""
        if self.attributes.get(f"{CALC} value-type") == "error":
            return None
        number, text = self.varying.get(f"{OFFICE} value", 0) - 1, self.text - 1
        match self.attributes[VALUE_TYPE]:
            case "float" | "percentage" | "currency" if number >= 0:
                return lambda groups: float(groups[number])
            case "string" if text >= 0 and f"{OFFICE} string-value" not in self.varying:
                return lambda groups: groups[text].decode()
        return None


@dataclass(slots=True)
class Reading:
    """How the values of a shape's rows are read."""

    blank: list[Any]
    readers: list[tuple[int, int, Callable[[Groups], Any]]] = field(default_factory=list)
    careful: list[tuple[int, int, int]] = field(default_factory=list)


class Shape:
    """Rows that differ in their values, texts and formulas alone."""

    def __init__(self, pattern: bytes, repeated: int, cells: list[ShapeCell]) -> None:
        self.match = re.compile(pattern).match
        self.repeated = repeated
        self.cells = cells
        self.filled = [
            (place, cell) for place, cell in enumerate(cells) if VALUE_TYPE in cell.attributes
        ]
        self.has_formulas = any(FORMULA_TEXT in cell.varying for cell in cells)
        self.last_column = max(
            (cell.column + cell.repeated - 1 for _, cell in self.filled), default=0
        )
        self.count = sum(cell.repeated for _, cell in self.filled)
        """How many cells of a row are filled"""
        self._readings: dict[frozenset[int] | None, Reading] = {}

    def reading(self, wanted: frozenset[int] | None) -> Reading:
        """Return how the values of some columns are read, with None those of all."""
        if wanted not in self._readings:
            self._readings[wanted] = self._made_reading(wanted)
        return self._readings[wanted]

    def _made_reading(self, wanted: frozenset[int] | None) -> Reading:
        made = Reading([None] * self.last_column)
        for place, cell in self.filled:
            start, stop = cell.column - 1, cell.column + cell.repeated - 1
            reader = cell.reader()
            if reader is None:
                made.careful.append((start, stop, place))
            elif cell.attributes[VALUE_TYPE] == "string" or (
                wanted is None or not wanted.isdisjoint(range(start + 1, stop + 1))
            ):
                made.readers.append((start, stop, reader))
            else:
                # Of a number that nobody wants it is enough to know that it is there.
                made.blank[start:stop] = [True] * (stop - start)
        return made


class PlainRow:
    """A row that fits a shape; it may stand for several one under another."""

    def __init__(
        self, number: int, shape: Shape, found: re.Match[bytes], base: int, patterns: "PlainRows"
    ) -> None:
        self.number = number
        self.repeated = shape.repeated
        self.shape = shape
        self.start = base + found.start()
        self.end = base + found.end() - len(patterns.row_end)
        """Where its end tag begins"""
        self._found = found
        self._base = base
        self._paragraph_tag = patterns.paragraph_tag

    @property
    def cells(self) -> list[Cell]:
        return [self._cell(cell) for cell in self.shape.cells]

    def cells_from(self, column: int) -> list[Cell]:
        """Return its cells from the one that stands for a column onward."""
        return [
            self._cell(cell) for cell in self.shape.cells if cell.column + cell.repeated > column
        ]

    def values(self, wanted: frozenset[int] | None) -> list[Any]:
        """Return what its cells hold, of columns that are not wanted whether they hold any."""
        reading = self.shape.reading(wanted)
        values = reading.blank[:]
        groups = self._found.groups()
        try:
            for start, stop, read in reading.readers:
                values[start:stop] = [read(groups)] * (stop - start)
        except ValueError:
            # a number that is none
            for _, cell in self.shape.filled:
                start, stop = cell.column - 1, cell.column + cell.repeated - 1
                values[start:stop] = [self._cell(cell).value()] * (stop - start)
            return values
        for start, stop, place in reading.careful:
            values[start:stop] = [self._cell(self.shape.cells[place]).value()] * (stop - start)
        return values

    def _cell(self, given: ShapeCell) -> Cell:
        found, base = self._found, self._base
        attributes = given.attributes
        if given.varying:
            attributes = attributes | {
                name: unescape(found[group].decode()) for name, group in given.varying.items()
            }
        start = (found.end(given.before) if given.before else found.start()) + given.ahead
        cell = Cell(given.column, given.repeated, base + start, attributes)
        if given.text:
            start, end = found.span(given.text)
            cell.texts.append(found[given.text].decode())
            cell.paragraphs.append([base + start - self._paragraph_tag, base + end])
            cell.end = base + end + self._paragraph_tag + len("/")
        return cell


class PlainRows:
    """Finds rows of known shapes, and learns shapes, by the prefixes of a file."""

    def __init__(self, prefixes: Mapping[str, str]) -> None:
        """Take the root's prefixes by namespace, those of tables and of text among them."""
        self._namespaces = {prefix: namespace for namespace, prefix in prefixes.items()}
        table, text = re.escape(prefixes[TABLE]), re.escape(prefixes[TEXT])
        # What is not of this kind, such as a comment, a drawing or a second paragraph in a cell,
        # an apostrophe around an attribute or an entity in a text, is for the careful way.
        attributes = (
            rf'((?: {table}:formula="[^"<>]*"'
            rf'| (?!xmlns|{table}:formula=)[A-Za-z_][\w:.-]*="[^"<>&]*")*)'
        )
        paragraph = rf"<{text}:p>([^<&]*)</{text}:p>"
        cell = (
            rf"<{table}:table-cell{attributes}(?:/>|>(?:{paragraph})?</{table}:table-cell>)"
            rf"|<{table}:covered-table-cell{attributes}/>"
        )
        row = rf"<{table}:table-row{attributes}>(?:{cell})*</{table}:table-row>"
        self._cell = re.compile(cell.encode())
        self._row = re.compile(row.encode())
        self.row_end = f"</{prefixes[TABLE]}:table-row>".encode()
        self.paragraph_tag = len(f"<{prefixes[TEXT]}:p>")
        self.learnt = 0
        """How many rows had to be looked at for their shape"""
        self._shapes: dict[bytes, Shape | None] = {}
        self._recent: list[Shape] = []

    def match(self, content: bytes, position: int) -> tuple[Shape, re.Match[bytes]] | None:
        """Return the shape and the match of a row that begins just there, if it has a shape."""
        for place, shape in enumerate(self._recent):
            if found := shape.match(content, position):
                if place:
                    self._recent.insert(0, self._recent.pop(place))
                return shape, found
        row = self._row.match(content, position)
        learnt = self._learnt(row[0], row.end(1) - row.start()) if row else None
        found = learnt.match(content, position) if learnt else None
        if learnt is None or found is None:
            return None
        self._recent.insert(0, learnt)
        del self._recent[TRIED:]
        return learnt, found

    def _learnt(self, row: bytes, tag_end: int) -> Shape | None:
        """Return the shape of a row, None where it is one for the careful way."""
        self.learnt += 1
        made = _Learning(row, self._namespaces)
        repeated = made.row(tag_end)
        for found in self._cell.finditer(row, tag_end):
            made.cell(found)
        pattern = made.pattern()
        if pattern not in self._shapes and len(self._shapes) < MOST_SHAPES:
            self._shapes[pattern] = Shape(pattern, repeated, made.cells) if made.is_plain else None
        return self._shapes.get(pattern)


class _Learning:
    """Makes a pattern of a row."""

    def __init__(self, row: bytes, namespaces: Mapping[str, str]) -> None:
        self.cells: list[ShapeCell] = []
        self.is_plain = True
        self._row = row
        self._namespaces = namespaces
        self._pieces: list[bytes] = []
        self._done = self._groups = 0
        self._next_column = 1

    def row(self, tag_end: int) -> int:
        """Take in the row's tag; return how often the row counts."""
        constant: dict[str, str] = {}
        self._attributes(0, tag_end, constant, {})
        return self._count(constant.get(ROWS_REPEATED, "1"))

    def cell(self, found: re.Match[bytes]) -> None:
        """Take in the next cell."""
        made = ShapeCell(self._next_column, 1, self._groups, found.start() - self._done)
        part = 1 if found[1] is not None else 3
        self._attributes(*found.span(part), made.attributes, made.varying)
        made.repeated = self._count(made.attributes.get(COLUMNS_REPEATED, "1"))
        if found[2] is not None:
            made.text = self._open(*found.span(2), rb"[^<&]*")
        self.cells.append(made)
        self._next_column += made.repeated
        if (
            self._next_column > 4 * LAST_COLUMN
            or len(self.cells) > MOST_CELLS_IN_SHAPE
            or COLUMNS_SPANNED in made.attributes
            or ROWS_SPANNED in made.attributes
        ):
            self.is_plain = False

    def pattern(self) -> bytes:
        return b"".join([*self._pieces, re.escape(self._row[self._done :])])

    def _attributes(
        self, start: int, end: int, constant: dict[str, str], varying: dict[str, int]
    ) -> None:
        for found in _ATTRIBUTE.finditer(self._row, start, end):
            prefix, _, local = found[1].decode().rpartition(":")
            namespace = self._namespaces.get(prefix)
            if prefix and namespace is None:
                self.is_plain = False
            name = f"{namespace} {local}" if prefix else local
            if name == FORMULA_TEXT:
                varying[name] = self._open(*found.span(2), rb'[^"<>]*')
            elif name in _VARYING:
                varying[name] = self._open(*found.span(2), rb'[^"<>&]*')
            elif found[2].isascii():
                constant[name] = found[2].decode()
            else:
                self.is_plain = False

    def _open(self, start: int, end: int, anything: bytes) -> int:
        """Leave open what stands from `start` to `end`; return the group."""
        self._pieces += re.escape(self._row[self._done : start]), b"(" + anything + b")"
        self._done = end
        self._groups += 1
        return self._groups

    def _count(self, text: str) -> int:
        if text.isascii() and text.isdigit() and len(text) <= 9 and int(text):
            return int(text)
        self.is_plain = False
        return 1
