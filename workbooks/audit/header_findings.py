"""Mistakes in headers: the same twice, units that are missing or mean something else."""

from collections.abc import Iterator

from cellfuncs import units
from cellfuncs.errors import InputError, near_matches
from workbooks.audit.examined import Examined
from workbooks.audit.findings import Spot
from workbooks.audit.header_words import usual_unit
from workbooks.headings import MISREAD_UNITS, Heading, is_unit
from workbooks.logbook import cell_name
from workbooks.matching import folded


def of_headers(sheet: Examined) -> Iterator[Spot]:
    row = sheet.log.header_row
    seen: dict[str, Heading] = {}
    for heading in sheet.log.headings:
        first = seen.setdefault(_sameness(heading), heading)
        if first is not heading:
            where = cell_name(row, first.number)
            yield row, heading.number, "repeated header", f"{where} is «{first.text}» already"
        problem = _unit_problem(sheet, heading)
        if problem:
            yield row, heading.number, *problem


def _sameness(heading: Heading) -> str:
    if heading.column is not None:
        return f"\0{heading.column.key}"
    return folded(heading.text)


def _unit_problem(sheet: Examined, heading: Heading) -> tuple[str, str] | None:
    column, unit = heading.column, heading.written_unit
    is_number = sheet.kinds[heading.number] == "number"
    if unit is None:
        wanted = column.unit if column is not None and column.is_number else ""
        if column is None and is_number:
            wanted = usual_unit(heading.label)
        if wanted:
            return "no unit", f"«{heading.text}» names no unit, such as [{wanted}]"
        return None
    if column is not None and not column.is_number:
        return None
    if column is None and not (is_number and _is_meant_as_unit(heading)):
        return None
    if unit in MISREAD_UNITS and (column is None or not units.same_kind(unit, column.unit)):
        meant = MISREAD_UNITS[unit]
        stands_for = str(units.unit_of(unit).long_names[0])
        return "unknown unit", f"[{unit}] is the {stands_for}; write [{meant}]"
    try:
        units.unit_of(unit)
        if column is not None:
            units.factor(unit, column.unit)
    except InputError as error:
        return "unknown unit", str(error)
    return None


def _is_meant_as_unit(heading: Heading) -> bool:
    """Tell whether brackets hold a unit, however badly written, and no remark."""
    unit = heading.written_unit or ""
    if heading.in_square_brackets or is_unit(unit) or unit in MISREAD_UNITS:
        return True
    return "near matches" in near_matches(unit, units.COMMON) and len(unit) <= 12
