"""Patterns of what a worksheet's XML holds: rows and cells, plain ones and any others."""

import re
from collections.abc import Sequence
from functools import cache
from typing import NamedTuple

from workbooks.files.cells import LAST_COLUMN, column_number
from workbooks.files.xml_check import ATTRIBUTES, Unusual

NEVER = re.compile(rb"(?!)")


@cache
def number_of(letters: bytes) -> int:
    """Return the number of a column by its letters."""
    return column_number(letters.decode())


class Names:
    """Patterns of the elements of a sheet, by the prefixes that stand for the main namespace."""

    def __init__(self, prefixes: frozenset[bytes], root_prefix: bytes) -> None:
        self.prefix = root_prefix
        # "(?:x:|)" matches as well what has no prefix, when both stand for the main namespace.
        any_prefix = b"|".join(sorted(map(re.escape, prefixes), reverse=True))
        self.any_prefix = name = rb"(?:" + any_prefix + rb")"

        def element(local_name: bytes, attributes: bytes, inside: bytes) -> bytes:
            """Return the pattern of an element that is empty or holds `inside`."""
            opening = rb"<" + name + local_name + rb"(?=[\s/>])" + attributes
            return opening + rb"(?:/>|>" + inside + rb"</" + name + local_name + rb"\s*>)"

        def anything_but_end(local_name: bytes) -> bytes:
            return rb"[^<]*(?:<(?!/" + name + local_name + rb"[\s>])[^<]*)*"

        self.row = re.compile(
            rb"<(" + any_prefix + rb")row(?: r=\"([0-9]{1,7})\")?(?=[\s/>])"
            rb"(" + ATTRIBUTES + rb")(/?)>"
        )
        self.row_end = re.compile(rb"</" + name + rb"row\s*>")
        formula = element(rb"f", rb"(?P<formula_attributes>" + ATTRIBUTES + rb")", rb"[^<]*")
        value = element(rb"v", ATTRIBUTES, rb"(?P<stored>[^<]*)")
        inline = element(rb"is", ATTRIBUTES, anything_but_end(rb"is"))
        # The order of a cell's children is fixed: f, v, is, extLst (ECMA-376 part 1, 18.3.1.4).
        # The common ` r="A1"` has groups of its own because taking attributes apart is slow.
        self.cell = re.compile(
            rb"<(?P<prefix>" + any_prefix + rb")c"
            rb"(?P<name> r=\"(?P<letters>[A-Z]{1,3})(?P<digits>[0-9]{1,7})\")?(?=[\s/>])"
            rb"(?P<attributes>" + ATTRIBUTES + rb")"
            rb"(?:/>|>(?P<formula>\s*" + formula + rb")?"
            rb"(?P<gap>\s*)(?P<value>" + value + rb")?(?P<inline>\s*" + inline + rb")?"
            rb"(?P<rest>" + anything_but_end(rb"c") + rb")</" + name + rb"c\s*>)"
        )
        self.misplaced = re.compile(rb"<" + name + rb"(?:f|v|is)[\s/>]")
        self.data = self.opening(rb"sheetData")
        self.data_end = re.compile(rb"</" + name + rb"sheetData\s*>")

    def opening(self, local_name: bytes) -> re.Pattern[bytes]:
        """Return the pattern of a tag; its groups are the attributes and the slash, if any."""
        return re.compile(
            rb"<" + self.any_prefix + local_name + rb"(?=[\s/>])(" + ATTRIBUTES + rb")(/?)>"
        )


class PlainRows:
    """Patterns of rows that are laid out as nearly every program does it."""

    def __init__(self, prefix: bytes) -> None:
        name = re.escape(prefix)
        self._prefix = name
        # The one pattern holds a row to everything that the careful way looks at, cell by cell:
        # its cells are named after it, and hold a formula, a value and a text in that order.
        attributes = rb"(?: [A-Za-z_][\w:.-]*=\"[^\"<]*\")*"
        formula = rb"\s*<%bf%b(?:/>|>[^<]*</%bf>)" % (name, attributes, name)
        value = rb"\s*<%bv%b(?:/>|>[^<]*</%bv>)" % (name, attributes, name)
        inline = rb"\s*<%bis>[^<]*(?:<(?!/%bis>)[^<]*)*</%bis>" % (name, name, name)
        any_held = rb">(?:%b)?(?:%b)?(?:%b)?\s*</%bc>" % (formula, value, inline, name)
        # What nearly every cell holds comes first: it halves the time.
        number = rb"><%bv>[^<]*</%bv></%bc>" % (name, name, name)
        text = rb"><%bis><%bt(?: xml:space=\"preserve\")?>[^<]*</%bt></%bis></%bc>" % ((name,) * 5)
        # Each alternative shuts out the others: a row that does not fit in the end would else be
        # tried in all the ways in which its cells can be taken.
        common = number + rb"|" + text
        held = rb"(?:" + common + rb"|(?!" + common + rb")" + any_held + rb")"
        self._cell = rb"\s*<%bc r=\"%%b\1\"%b" % (name, attributes)
        self._held = held
        self._begin = rb"\s*<%brow r=\"([0-9]{1,7})\"%b" % (name, attributes)
        any_cell = self._cell % rb"[A-Z]{1,3}" + rb"(?:/>|" + held + rb")"
        self._end = rb"\s*</%brow>" % name
        self.row = re.compile(self._begin + rb"(?:/>|>((?:" + any_cell + rb")*)" + self._end + b")")
        self._shapes: dict[tuple[tuple[bytes, bytes], ...], Shape] = {}
        begin = rb"<%bc r=\"([A-Z]{1,3})[0-9]+\"" % name
        self.cells = re.compile(begin + attributes + rb"(/?)>")
        self.formulas = re.compile(begin + attributes + rb">\s*<%bf(%b)" % (name, attributes))
        self.errors = re.compile(
            begin + rb"(?:" + attributes + rb") t=\"e\"" + attributes + rb">(?:%b)?"
            rb"\s*<%bv>([^<]*)<" % (formula, name)
        )
        self.formula_mark = b"<%bf" % prefix
        self.error_mark = b' t="e"'
        self.row_mark = b"<%brow " % prefix
        self.row_end = b"</%brow>" % prefix
        self.row_number = re.compile(rb"\s*<%brow r=\"([0-9]{1,7})\"" % name)

    def shape(self, cells: Sequence[tuple[bytes, bytes]]) -> "Shape":
        """Return the pattern of rows with just these cells; raise Unusual if out of order."""
        key = tuple(cells)
        known = self._shapes.get(key)
        if known:
            return known
        column = last = 0
        for letters, slash in cells:
            number = number_of(letters)
            if not column < number <= LAST_COLUMN:
                raise Unusual
            column = number
            if not slash:
                last = number
        if not 0 < len(cells) <= 64 or cells[-1][1] or len(self._shapes) >= 100:
            return Shape(NEVER, last, column)
        inside = b"".join(
            self._cell % letters
            + (rb"(?:/>|" + self._held + rb")" if at < len(cells) else self._held)
            for at, (letters, _) in enumerate(cells, 1)
        )
        row = re.compile(self._begin + rb">(" + inside + rb")" + self._end)
        made = self._shapes[key] = Shape(row, last, column)
        return made


class Shape(NamedTuple):
    """A pattern that a row like the one before fits, which is quicker than looking at its cells."""

    row: re.Pattern[bytes]
    last_column: int
    """The last one that holds something"""
    width: int
    """The last one there is"""


@cache
def names(prefixes: frozenset[bytes], root_prefix: bytes) -> Names:
    return Names(prefixes, root_prefix)


@cache
def plain_rows(prefix: bytes) -> PlainRows:
    return PlainRows(prefix)
