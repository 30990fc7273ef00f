"""The formulas that a sheet's cells hold, copies of one another told as one."""

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from io import BytesIO
from pathlib import Path
from typing import Final

from lxml import etree

from workbooks.archive import Archive
from workbooks.formulas import moved_down, relative
from workbooks.logbook import Area
from workbooks.package import Package

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
    _last: dict[int, tuple[int, str, int]] = field(default_factory=dict)

    def add(self, row: int, column: int, text: str) -> int:
        """Note a cell's formula and return its group."""
        before = self._last.get(column)
        # the cell below most often holds the same formula, moved down: telling that is quick
        if before and row != before[0] and moved_down(before[1], before[0], row) == text:
            group = before[2]
        else:
            shape = (column, relative(text, row, column))
            group = self._by_shape.setdefault(shape, len(self.groups))
            if group == len(self.groups):
                self.groups.append(Written(text, row, column))
        self._last[column] = (row, text, group)
        self.put(row, column, group)
        return group

    def put(self, row: int, column: int, group: int) -> None:
        self.by_column.setdefault(column, {})[row] = group


def formula_cells(path: Path, sheet: str) -> FormulaCells:
    """Return the formulas of a sheet; none in a file that holds only values."""
    suffix = path.suffix.lower()
    if suffix in (".xlsx", ".xlsm"):
        package = Package(path)
        return _of_worksheet(package.part(package.sheets[sheet]))
    if suffix == ".ods":
        return _of_table(Archive(path, suffix).part("content.xml"), sheet)
    return FormulaCells()


def _of_worksheet(content: bytes) -> FormulaCells:
    found = FormulaCells()
    shared: dict[str, int] = {}
    for cell, formula in _formulas(content):
        place = _PLACE.fullmatch(cell)
        if place is None:
            continue
        area = Area.parsed(cell)
        assert area is not None
        row, column = area[:2]
        kind, text = formula.get("t"), formula.text or ""
        number = str(formula.get("si", ""))
        if kind == "dataTable":
            continue
        if text:
            group = found.add(row, column, f"={text}")
            if kind == "shared":
                shared[number] = group
        elif number in shared:
            found.put(row, column, shared[number])
    return found


def _formulas(content: bytes) -> Iterator[tuple[str, etree._Element]]:
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
                yield str(cell.get("r")), element
        else:
            element.clear()
            while (before := element.getprevious()) is not None:
                parent = before.getparent()
                if parent is None:
                    break
                parent.remove(before)


# ---- OpenDocument (OASIS OpenDocument 1.3: part 3, 9.1.4, and part 4, 5.8) -----------------------

_TABLE: Final = "{urn:oasis:names:tc:opendocument:xmlns:table:1.0}"
_BRACKETED: Final = re.compile(r'("(?:[^"]|"")*")|\[([^\[\]]*)\]|;')
_IN_BRACKETS: Final = re.compile(
    r"((?:\$?(?:'(?:[^']|'')*'|[^.':$]+))?)\.(\$?[A-Z]{1,3}\$?[0-9]{1,7})"
)


def _of_table(content: bytes, sheet: str) -> FormulaCells:
    found = FormulaCells()
    tags = tuple(f"{_TABLE}{name}" for name in ("table", "table-row"))
    inside = False
    row = 0
    events = etree.iterparse(
        BytesIO(content),
        events=("start", "end"),
        tag=tags,
        resolve_entities=False,
        no_network=True,
        load_dtd=False,
    )
    for event, element in events:
        if element.tag == tags[0]:
            inside = event == "start" and element.get(f"{_TABLE}name") == sheet
            row = 0
        elif event == "end":
            repeated = _count(element, "rows")
            if inside:
                # what is repeated a million times holds nothing
                for each in range(row + 1, row + 1 + min(repeated, 1000)):
                    _add_row(found, element, each)
            row += repeated
            element.clear()
    return found


def _add_row(found: FormulaCells, element: etree._Element, row: int) -> None:
    column = 1
    for cell in element:
        repeated = _count(cell, "columns")
        text = cell.get(f"{_TABLE}formula")
        if text:
            for each in range(column, column + min(repeated, 1000)):
                found.add(row, each, plain_formula(str(text)))
        column += repeated


def _count(element: etree._Element, of: str) -> int:
    given = str(element.get(f"{_TABLE}number-{of}-repeated", "1"))
    return int(given) if given.isdigit() and len(given) <= 7 else 1


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
