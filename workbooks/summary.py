"""What follows from a sheet's rows together: its results, and a row for each group of them."""

from typing import Any

from cellfuncs.errors import CellError, MissingInput, is_empty
from workbooks.computation import Computation
from workbooks.gathered import of_group
from workbooks.logbook import ErrorValue, Logbook
from workbooks.matching import folded, header_of, is_header, labels_of
from workbooks.recipe import Table


def write_results(logbook: Logbook, work: Computation) -> list[str]:
    """Write a table's results into their named cells; return those that have none as sentences."""
    told = []
    for result in work.table.sheet.results:
        total = work.totals[result.key]
        if result.key in logbook.named_cells:
            name, row, column = logbook.named_cells[result.key]
            sheet = logbook.sheet(name)
            sheet.set(row, column, shown(total, sheet.has_formula(row, column)))
        elif not result.hidden:
            words = str(total) if isinstance(total, CellError) else f"{total:.10g} {result.unit}"
            told.append(f"{result.label}: {words.strip()}")
    return told


def write_groups(logbook: Logbook, table: Table, work: Computation) -> None:
    """Write the rows of a sheet that has one for each group of rows of the computed sheet."""
    if table.sheet.name not in logbook.sheet_names:
        return
    sheet = logbook.sheet(table.sheet.name)
    labels = labels_of(table)
    header = sheet.header_row(lambda text: is_header(labels, text))
    if header is None:
        return
    places = {
        labels[folded(header_of(labels, text).label)]: number
        for number, text in enumerate(sheet.rows[header - 1], 1)
        if isinstance(text, str) and is_header(labels, text)
    }
    firsts: dict[str, int] = {}
    for index, text in enumerate(work.inputs[table.sheet.by].cells):
        if not is_empty(text) and not isinstance(text, ErrorValue):
            firsts.setdefault(of_group(text), index)
    for key, number in places.items():
        last = max(len(sheet.rows), header + len(firsts))
        for place, row in enumerate(range(header + 1, last + 1)):
            has_formula = sheet.has_formula(row, number)
            if place < len(firsts):
                index = list(firsts.values())[place]
                sheet.set(row, number, shown(value_of(table, key, work, index), has_formula))
            elif has_formula or sheet.rows[row - 1][number - 1] is not None:
                sheet.set(row, number, "" if has_formula else None)


def value_of(table: Table, key: str, work: Computation, index: int) -> Any:
    """Return what a group's column has, by the group's first row, or the CellError instead."""
    try:
        return table.nodes[key].of_row(work.values_at(index))
    except CellError as error:
        return error


def shown(value: Any, has_formula: bool) -> Any:
    """Return a value as a cell takes it; what lacks an input is as empty as a formula shows it."""
    if isinstance(value, MissingInput):
        return "" if has_formula else None
    return ErrorValue(value.shown) if isinstance(value, CellError) else value
