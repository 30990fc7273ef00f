"""How a template's sheets look: paper, colours, fonts, and the few kinds of cell there are."""

from collections.abc import Sequence
from typing import Any, Final

from openpyxl import Workbook
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.workbook.defined_name import DefinedName
from openpyxl.worksheet.page import PageMargins
from openpyxl.worksheet.properties import PageSetupProperties
from openpyxl.worksheet.worksheet import Worksheet

from workbooks.recipe import Table

HEADER_ROW: Final = 4
FIRST_ROW: Final = 5

INK = "1F2A30"
PAPER, WASH = "FFFFFF", "E9EDEB"
TYPE_HERE, COMPUTED, ALERT = "3E6B5C", "6A7378", "F3DDB3"
RULE = Side(style="thin", color="C3CBC8")
BOX = Border(left=RULE, right=RULE, top=RULE, bottom=RULE)
PLAIN = Font(name="Calibri", size=11, color=INK)
BOLD = Font(name="Calibri", size=11, color=INK, bold=True)
TITLE = Font(name="Calibri", size=15, color=INK, bold=True)
QUIET = Font(name="Calibri", size=10, color=COMPUTED, italic=True)
ON_DARK = Font(name="Calibri", size=11, color=PAPER, bold=True)
WRAPPED = Alignment(wrap_text=True, vertical="top")
CENTRED = Alignment(horizontal="center", vertical="center", wrap_text=True)


def fill_of(colour: str) -> PatternFill:
    return PatternFill("solid", start_color=colour, end_color=colour)


class Book:
    """A workbook in the making."""

    def __init__(self) -> None:
        self.workbook = Workbook()
        first = self.workbook.active
        assert first is not None
        self.workbook.remove(first)

    def sheet(self, title: str) -> Worksheet:
        """Return a new sheet that prints on landscape A4, as wide as the paper."""
        sheet: Worksheet = self.workbook.create_sheet(title)
        sheet.sheet_view.showGridLines = False
        sheet.page_setup.orientation = "landscape"
        sheet.page_setup.paperSize = 9
        sheet.page_setup.fitToWidth = 1
        sheet.page_setup.fitToHeight = 0
        sheet.page_margins = PageMargins(left=0.3, right=0.3, top=0.4, bottom=0.4)
        sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
        return sheet

    def name(self, key: str, sheet: Worksheet, place: str) -> None:
        """Name a cell or a range."""
        self.workbook.defined_names[key] = DefinedName(
            key, attr_text=f"{quoted(sheet.title)}!{place}"
        )


def quoted(title: str) -> str:
    return "'" + title.replace("'", "''") + "'"


def put(sheet: Worksheet, place: str, value: Any, font: Font) -> Any:
    cell = sheet[place]
    cell.value = value
    cell.font = font
    if isinstance(value, str) and not value.startswith("="):
        cell.data_type = "s"
    return cell


def put_input(sheet: Worksheet, place: str, value: Any, number_format: str) -> None:
    cell = put(sheet, place, value, PLAIN)
    cell.border, cell.fill = BOX, fill_of(PAPER)
    cell.alignment = Alignment(horizontal="left")
    if number_format:
        cell.number_format = number_format


def put_result(sheet: Worksheet, place: str, formula: str, number_format: str) -> None:
    cell = put(sheet, place, formula, PLAIN)
    cell.fill = fill_of(WASH)
    cell.alignment = Alignment(horizontal="left")
    cell.number_format = number_format


def put_heading(sheet: Worksheet, row: int, words: Sequence[str]) -> None:
    for place, word in enumerate(words, 1):
        cell = sheet.cell(row, place, word or None)
        cell.font = ON_DARK
        cell.fill = fill_of(COMPUTED)


def put_named(book: Book, sheet: Worksheet, place: int, key: str, values: Sequence[Any]) -> None:
    """Put values below their name into a column, and name their range."""
    sheet.cell(1, place, key)
    for row, value in enumerate(values, 2):
        sheet.cell(row, place, value)
    letter = get_column_letter(place)
    book.name(key, sheet, f"${letter}$2:${letter}${len(values) + 1}")


def letters_of(table: Table) -> dict[str, str]:
    """Return the letter of each column, inputs first."""
    ordered = [*table.inputs, *table.computed]
    return {column.key: get_column_letter(place) for place, column in enumerate(ordered, 1)}
