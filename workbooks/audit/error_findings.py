"""Error values in cells, and the sentence that explains each."""

from collections.abc import Iterator
from typing import Any, Final

from cellfuncs.catalogue import shown
from cellfuncs.errors import CellError, InputError
from workbooks.audit.examined import Examined
from workbooks.audit.findings import Spot
from workbooks.audit.formula_cells import Written
from workbooks.audit.formulas import (
    NotReadable,
    Operation,
    Part,
    Reference,
    evaluated,
    named_functions,
    references,
)
from workbooks.headings import Heading
from workbooks.logbook import ErrorValue, cell_name


def of_error_values(sheet: Examined) -> Iterator[Spot]:
    """Yield every error value, with its reason."""
    for heading in sheet.log.headings:
        for row, value in sheet.log.below(heading.number):
            if type(value) is ErrorValue:
                yield row, heading.number, "error value", _explained(sheet, row, heading, value)


def _explained(sheet: Examined, row: int, heading: Heading, value: ErrorValue) -> str:
    expected = sheet.expected(row, heading)
    if isinstance(expected, CellError):
        said = [sentence for _, sentence in sheet.problems.get(row, [])]
        return f"{value}: {said[0] if said else expected}"
    group = sheet.formulas.by_column.get(heading.number, {}).get(row)
    if group is not None:
        reason = _reason_of_formula(sheet, sheet.formulas.groups[group], row)
        if reason:
            return f"{value}: {reason}"
    return f"{value}: {_ERROR_WORDS.get(value.text, 'an error')}"


def _reason_of_formula(sheet: Examined, written: Written, row: int) -> str:
    """Return what a function says of this row's cells, or which of them is the reason."""
    part = sheet.parts_of(written)
    if part is None:
        return ""
    down = row - written.row

    def moved(each: Reference) -> tuple[int, int]:
        # copies of a formula move along; a cell above the table stands still
        above = each.area.first_row <= sheet.log.header_row
        return each.area.first_row + (0 if above else down), each.area.first_column

    def held(each: Part) -> Any:
        if not isinstance(each, Reference) or not each.is_cell or each.sheet is not None:
            raise NotReadable("not a cell of this sheet")
        value = sheet.value(*moved(each))
        if isinstance(value, ErrorValue):
            raise InputError(f"{cell_name(*moved(each))} holds {value}")
        return value

    for called in reversed(list(named_functions(part))):
        if called.ours is None:
            continue
        try:
            evaluated(called, held)
        except CellError as error:
            return str(error)
        except NotReadable:
            continue
    for each in references(part):
        if each.is_cell and each.sheet is None:
            value = sheet.value(*moved(each))
            if isinstance(value, ErrorValue):
                return f"{cell_name(*moved(each))} holds {value}"
    for divided in part.parts():
        if not isinstance(divided, Operation) or divided.operator != "/":
            continue
        if isinstance(divided.right, Reference):
            value = sheet.value(*moved(divided.right))
            if value is None or value == 0:
                state = "empty" if value is None else "0"
                return f"divided by {cell_name(*moved(divided.right))}, which is {state}"
    for each in references(part):
        if each.is_cell and each.sheet is None and isinstance(sheet.value(*moved(each)), str):
            text = shown(sheet.value(*moved(each)))
            return f"{cell_name(*moved(each))} holds the text {text}"
    return ""


_ERROR_WORDS: Final = {
    "#DIV/0!": "a division by zero or by an empty cell",
    "#N/A": "something is missing or was not found",
    "#NUM!": "a number outside what the function takes",
    "#VALUE!": "text where a number belongs, or a name that is not known",
    "#REF!": "the formula refers to a cell that was deleted",
    "#NAME?": "a function or name that the spreadsheet does not know; the functions of this "
    "program are there once connected («cellfuncs connect»)",
    "#NULL!": "two ranges that have no cell in common",
}
