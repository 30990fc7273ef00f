"""The formulas that a sheet's cells hold, copies of one another told as one."""

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from io import BytesIO
from typing import Final

from lxml import etree

from workbooks.files.cells import Area, column_number
from workbooks.files.ods_cells import FORMULA_TEXT
from workbooks.files.ods_content import Row
from workbooks.files.opendocument import OdsLogbook
from workbooks.files.xlsx import XlsxLogbook
from workbooks.files.xml_check import ATTRIBUTES, attributes_of
from workbooks.logbook import Logbook

_PLACE: Final = re.compile(r"([A-Z]{1,3})([0-9]{1,7})")


@dataclass(frozen=True)
class Written:
    """A formula as one of its cells holds it."""

    text: str
    row: int
    column: int


@dataclass
class FormulaCells:
    """A sheet's formulas: which group each cell belongs to, and an example of each group.

    Cells of one group hold the same formula, moved along with the cell.
    """

    groups: list[Written] = field(default_factory=list)
    by_column: dict[int, dict[int, int]] = field(default_factory=dict)
    _by_shape: dict[tuple[int, str], int] = field(default_factory=dict)
    _moving: list["_Moving"] = field(default_factory=list)
    _last: dict[int, int] = field(default_factory=dict)

    def add(self, row: int, column: int, text: str) -> int:
        """Note a cell's formula and return its group."""
        group = self._last.get(column, -1)
        # the cell below most often holds the same formula, moved down: telling that is quick
        if group < 0 or self._moving[group].in_row(row) != text:
            shape = (column, relative(text, row, column))
            group = self._by_shape.setdefault(shape, len(self.groups))
            if group == len(self.groups):
                self.groups.append(Written(text, row, column))
                self._moving.append(_Moving(text, row))
        self._last[column] = group
        self.put(row, column, group)
        return group

    def put(self, row: int, column: int, group: int) -> None:
        self.by_column.setdefault(column, {})[row] = group


def formula_cells(logbook: Logbook, sheet: str) -> FormulaCells:
    """Return the formulas of a sheet; none in a file that holds only values."""
    if isinstance(logbook, XlsxLogbook):
        package = logbook.package
        return _of_worksheet(package.part(package.sheets[sheet]))
    if isinstance(logbook, OdsLogbook):
        return _of_table(logbook, sheet)
    return FormulaCells()


def _of_worksheet(content: bytes) -> FormulaCells:
    found = FormulaCells()
    shared: dict[str, int] = {}
    for cell, kind, number, text in _formulas(content):
        place = _PLACE.fullmatch(cell)
        if place is None or kind == "dataTable":
            continue
        row, column = int(place[2]), column_number(place[1])
        if text:
            group = found.add(row, column, f"={text}")
            if kind == "shared":
                shared[number] = group
        elif number in shared:
            found.put(row, column, shared[number])
    return found


_CELL_AND_FORMULA: Final = re.compile(
    rb"<((?:[\w.-]+:)?)c(?=\s)(" + ATTRIBUTES + rb")>\s*"
    rb"<\1f(?=[\s/>])(" + ATTRIBUTES + rb")(?:/>|>([^<]*)</)"
)


def _formulas(content: bytes) -> Iterator[tuple[str, str, str, str]]:
    """Yield cell, kind, number among the shared ones and text of each formula."""
    if b"<!" in content or content.find(b"<?", 1) > 0:
        # what looks like a cell may be a remark
        yield from _parsed_formulas(content)
        return
    # half the time of a parser, which builds a tree of every cell
    for found in _CELL_AND_FORMULA.finditer(content):
        tag, of_formula, text = found.group(2, 3, 4)
        given = attributes_of(of_formula) if of_formula else {}
        yield (
            attributes_of(tag).get(b"r", b"").decode(),
            given.get(b"t", b"").decode(),
            given.get(b"si", b"").decode(),
            _unescaped(text or b""),
        )


def _unescaped(text: bytes) -> str:
    if b"&" not in text:
        return text.decode()
    parser = etree.XMLParser(resolve_entities=False, no_network=True, load_dtd=False)
    return etree.fromstring(b"<f>%b</f>" % text, parser).text or ""


def _parsed_formulas(content: bytes) -> Iterator[tuple[str, str, str, str]]:
    # the part was found to be free of entities when the logbook was opened
    events = etree.iterparse(
        BytesIO(content),
        tag=("{*}f", "{*}row"),
        resolve_entities=False,
        no_network=True,
        load_dtd=False,
    )
    for _, element in events:
        if element.tag.endswith("}f"):
            cell = element.getparent()
            if cell is not None and cell.get("r"):
                yield (
                    str(cell.get("r")),
                    str(element.get("t", "")),
                    str(element.get("si", "")),
                    element.text or "",
                )
        else:
            element.clear()
            while (before := element.getprevious()) is not None:
                parent = before.getparent()
                if parent is None:
                    break
                parent.remove(before)


# ---- one formula for many rows -----------------------------------------------------------------

_MOVING: Final = re.compile(
    r"""("(?:[^"]|"")*"|'(?:[^']|'')*')"""
    r"|(?<![A-Za-z0-9_.$])(\$?)([A-Z]{1,3})(\$?)([0-9]{1,7})(?![A-Za-z0-9_.(])"
)


def relative(formula: str, row: int, column: int) -> str:
    """Return the formula with its cells counted from its own, so that copies of it are alike."""

    def counted(found: re.Match[str]) -> str:
        if found[1] is not None:
            return found[1]
        place = Area.parsed(f"{found[3]}1")
        across = found[3] if found[2] or place is None else f"({place.first_column - column})"
        down = found[5] if found[4] else f"({int(found[5]) - row})"
        return f"\0{found[2]}{across}{found[4]}{down}"

    return _MOVING.sub(counted, formula)


class _Moving:
    """A formula that moves up and down its column."""

    def __init__(self, formula: str, row: int) -> None:
        self._between: list[str] = []
        self._down: list[int] = []
        end = 0
        for found in _MOVING.finditer(formula):
            if found[1] is None and not found[4]:
                self._between.append(formula[end : found.start(5)])
                self._down.append(int(found[5]) - row)
                end = found.end()
        self._between.append(formula[end:])
        self._all_here = not any(self._down)

    def in_row(self, row: int) -> str:
        """Return what the formula is in a row."""
        if self._all_here:
            return str(row).join(self._between)
        cells = (
            f"{text}{row + down}" for text, down in zip(self._between, self._down, strict=False)
        )
        return "".join(cells) + self._between[-1]


# ---- OpenDocument (OASIS OpenDocument 1.3: part 3, 9.1.4, and part 4, 5.8) -----------------------

_BRACKETED: Final = re.compile(r'("(?:[^"]|"")*")|\[([^\[\]]*)\]|;')
_IN_BRACKETS: Final = re.compile(
    r"((?:\$?(?:'(?:[^']|'')*'|[^.':$]+))?)\.(\$?[A-Z]{1,3}\$?[0-9]{1,7})"
)


def _of_table(logbook: OdsLogbook, sheet: str) -> FormulaCells:
    found = FormulaCells()

    def take(row: Row) -> bool:
        with_formula = [cell for cell in row.cells if cell.has_formula]
        # what is repeated a million times holds nothing
        for number in range(row.number, row.number + min(row.repeated, 1000)):
            for cell in with_formula:
                text = plain_formula(cell.attributes[FORMULA_TEXT])
                for column in range(cell.column, cell.column + min(cell.repeated, 1000)):
                    found.add(number, column, text)
        return True

    logbook.read(sheet, take)
    return found


def plain_formula(text: str) -> str:
    """Return an OpenDocument formula as cells show it: of:=[.C5]*[$Log.B$2] is =C5*Log!B$2."""
    formula = text[text.index("=") :] if "=" in text else f"={text}"

    def plain(found: re.Match[str]) -> str:
        if found[1] is not None:
            return found[1]
        if found[2] is None:
            return ","
        ends = _IN_BRACKETS.findall(found[2])
        if not ends:
            return "#REF!"
        sheet = str(ends[0][0]).removeprefix("$")
        return (f"{sheet}!" if sheet else "") + ":".join(place for _, place in ends)

    return _BRACKETED.sub(plain, formula)
