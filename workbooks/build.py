"""A recipe made into a template workbook that computes with nothing installed."""

import re
from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass
from datetime import UTC, datetime
from io import BytesIO
from pathlib import Path
from typing import Final
from zipfile import ZIP_DEFLATED, ZipFile

from openpyxl.formatting.rule import FormulaRule
from openpyxl.styles import Alignment, Border, Font, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.worksheet import Worksheet

from cellfuncs.bridges.formula import all_of, any_of, text_of
from cellfuncs.families.workbook import provenance
from cellfuncs.symbols import Expr, NotTraceable, name, node
from workbooks import supporting
from workbooks.charts import chart_sheet
from workbooks.connect import SPELLING
from workbooks.expression import Cells
from workbooks.package import write_whole
from workbooks.recipe import Column, Problem, Recipe, Table, lines_wanted
from workbooks.settings import COSMOLOGY_CELLS
from workbooks.sheets import (
    ALERT,
    BOLD,
    BOX,
    CENTRED,
    COMPUTED,
    FIRST_ROW,
    HEADER_ROW,
    ON_DARK,
    PAPER,
    PLAIN,
    QUIET,
    RULE,
    TITLE,
    TYPE_HERE,
    WASH,
    Book,
    fill_of,
    put,
)

STATUS: Final = "Status"
ROW: Final = "\0"
"""Stands for the row number in a formula that is written once for all rows"""
ROW_OK: Final = "ok"
UNEXPLAINED: Final = "no result: look at this row's inputs and at the sheet Settings"


@dataclass(frozen=True)
class Formulas:
    """What a template's computed cells hold: see `Cells.calls`, and what a user must have"""

    written: bool
    calls: str | None = None
    needs: str = ""


FORMULAS: Final = {
    "plain": Formulas(True),
    "none": Formulas(
        False, None, "The computed columns are empty until the command «cellfuncs fill» fills them."
    ),
    "calc": Formulas(
        True,
        SPELLING,
        "This file computes in LibreOffice Calc, connected with «cellfuncs connect calc». Excel "
        "spells the functions of an add-in otherwise and has a file of its own.",
    ),
    "excel": Formulas(
        True,
        "",
        "This file computes in Excel, connected with «cellfuncs connect excel». LibreOffice Calc "
        "spells the functions of an add-in otherwise and has a file of its own.",
    ),
}
"""By name. Calc knows an add-in's function in a file by its whole name, Excel by its short one:
no spelling serves both, so calls of the add-in make two files."""


@dataclass
class _Builder:
    """Makes one workbook."""

    recipe: Recipe
    formulas: Formulas
    rows: int | None
    made: datetime

    def built(self) -> Book:
        self.book = Book()
        for table in self.recipe.tables:
            self._table_sheet(table)
        for table in self.recipe.tables:
            if table.sheet.charts:
                chart_sheet(self.book, self.recipe, table, self.rows or table.sheet.rows)
        supporting.settings_sheet(self.book, self.recipe)
        if lines_wanted(self.recipe):
            supporting.line_sheet(self.book)
        supporting.how_to_sheet(self.book, self.recipe, self.formulas.needs)
        supporting.provenance_sheet(self.book, self.recipe, self.made)
        supporting.hidden_tables(self.book, self.recipe)
        workbook = self.book.workbook
        workbook.properties.title = self.recipe.text.title
        workbook.properties.creator = provenance()
        workbook.properties.created = self.made.replace(tzinfo=None)
        workbook.properties.modified = self.made.replace(tzinfo=None)
        workbook.calculation.fullCalcOnLoad = True
        return self.book

    def _table_sheet(self, table: Table) -> None:
        sheet = self.book.sheet(table.sheet.name)
        last = FIRST_ROW - 1 + (self.rows or table.sheet.rows)
        columns = [*table.inputs, *table.computed]
        letters = {column.key: get_column_letter(n) for n, column in enumerate(columns, 1)}
        status = get_column_letter(len(columns) + 1)
        put(sheet, "A1", self.recipe.text.title, TITLE)
        put(sheet, "A2", table.sheet.intro or self.recipe.text.purpose, QUIET)
        self._bands(sheet, len(table.inputs), len(columns) + 1)
        for column in columns:
            self._header(sheet, f"{letters[column.key]}{HEADER_ROW}", column.header, column.role)
            sheet.column_dimensions[letters[column.key]].width = _width(column)
        self._header(sheet, f"{status}{HEADER_ROW}", STATUS, "computed")
        sheet.column_dimensions[status].width = 66
        sheet.row_dimensions[HEADER_ROW].height = 48
        formulas = self._formulas(table, letters) if self.formulas.written else {}
        for row in range(FIRST_ROW, last + 1):
            for column in columns:
                cell = sheet[f"{letters[column.key]}{row}"]
                cell.border, cell.font = BOX, PLAIN
                if column.format:
                    cell.number_format = column.format
                if column.role == "computed":
                    cell.fill = fill_of(WASH)
                    cell.value = formulas.get(column.key, "").replace(ROW, str(row)) or None
                if not column.is_number:
                    cell.alignment = Alignment(horizontal="left", indent=1)
                    cell.number_format = "@" if column.kind == "text" else "General"
            cell = sheet[f"{status}{row}"]
            cell.border, cell.font, cell.fill = BOX, PLAIN, fill_of(WASH)
            cell.alignment = Alignment(horizontal="left", indent=1)
            cell.value = formulas.get(STATUS, "").replace(ROW, str(row)) or None
        for column in table.inputs:
            self._validate(sheet, column, f"{letters[column.key]}{FIRST_ROW}", last, table)
        area = f"{status}{FIRST_ROW}:{status}{last}"
        doubtful = f'AND(${status}{FIRST_ROW}<>"",${status}{FIRST_ROW}<>"{ROW_OK}")'
        sheet.conditional_formatting.add(
            area,
            FormulaRule(  # type: ignore[no-untyped-call]
                formula=[doubtful], fill=fill_of(ALERT), font=Font(bold=True)
            ),
        )
        sheet.freeze_panes = f"B{FIRST_ROW}"
        sheet.print_title_rows = f"{HEADER_ROW}:{HEADER_ROW}"
        sheet.print_area = f"A1:{status}{last}"
        sheet.auto_filter.ref = f"A{HEADER_ROW}:{status}{last}"

    def _bands(self, sheet: Worksheet, inputs: int, end: int) -> None:
        row = HEADER_ROW - 1
        for first, last, words, colour in (
            (1, inputs, "type here", TYPE_HERE),
            (inputs + 1, end, "computed: do not type", COMPUTED),
        ):
            for column in range(first, last + 1):
                sheet.cell(row, column).fill = fill_of(colour)
            cell = sheet.cell(row, first, words)
            cell.font = ON_DARK

    def _header(self, sheet: Worksheet, place: str, text: str, role: str) -> None:
        cell = sheet[place]
        cell.value = text
        cell.font = BOLD
        cell.fill = fill_of(PAPER if role == "input" else WASH)
        cell.alignment = CENTRED
        edge = Side(style="medium", color=TYPE_HERE if role == "input" else COMPUTED)
        cell.border = Border(left=RULE, right=RULE, top=edge, bottom=edge)

    def _formulas(self, table: Table, letters: Mapping[str, str]) -> dict[str, str]:
        """Return the formula of each computed column and of Status, with ROW for the row number."""
        cells = Cells(
            {key: name(f"${letter}{ROW}") for key, letter in letters.items()}
            | {key: name(key) for key in self._named()},
            self.formulas.calls,
        )
        formulas: dict[str, str] = {}
        for key, tree in table.nodes.items():
            # `fill` computes what no plain formula can
            with suppress(NotTraceable):
                formulas[key] = tree.of_cells(cells).formula(when_blank=node(""))
        return {**formulas, STATUS: self._status(table, cells, formulas)}

    def _status(self, table: Table, cells: Cells, formulas: Mapping[str, str]) -> str:
        """Return the formula that says in words what is wrong in a row, the first thing first."""
        filled = [Expr("blank", cells.symbols[key]) for key in table.anchors]
        failed = [Expr("ISERROR", cells.symbols[key]) for key in formulas]
        words: Expr = node(ROW_OK)
        if failed:
            words = Expr("IF", any_of(failed), node(UNEXPLAINED), words)
        for problem in reversed(table.problems):
            if problem.kind != "error":
                words = Expr("IF", broken(problem, cells), node(problem.words), words)
        words = Expr("IF", all_of(filled), node(""), words)
        # an error value in an input would make every question about it an error too
        for problem in reversed(table.problems):
            if problem.kind == "error":
                words = Expr("IF", broken(problem, cells), node(problem.words), words)
        return "=" + text_of(words)

    def _validate(
        self, sheet: Worksheet, column: Column, first: str, last: int, table: Table
    ) -> None:
        rule = DataValidation(allow_blank=True)
        if column.choices:
            rule = DataValidation("list", formula1=f'"{",".join(column.choices)}"')
            rule.error = f"{column.label} must be {' or '.join(column.choices)}."
        elif column.kind == "line":
            # any spelling may be typed, so the list only offers
            rule = DataValidation("list", formula1="line_name")
            rule.showErrorMessage = False
        elif column.is_number:
            limits = [
                inside(problem, name(first))
                for problem in table.problems
                if problem.column is column and problem.kind == "limit"
            ]
            allowed = text_of(all_of([Expr("ISNUMBER", name(first)), *limits]))
            rule = DataValidation("custom", formula1=allowed)
            rule.error = (
                f"{column.label} must be a number{_of_unit(column)}{_limits(table, column)}."
            )
        rule.allow_blank = True
        if rule.error:
            rule.showErrorMessage = True
            rule.error = rule.error[:225]
            rule.errorStyle = "warning"
            rule.errorTitle = column.label[:32]
        rule.showInputMessage = True
        rule.promptTitle = column.header[:32]
        within = _limits(table, column)
        rule.prompt = f"{column.note}{' It must be' + within + '.' if within else ''}"[:255] or None
        rule.add(f"{first}:{first.rstrip('0123456789')}{last}")
        sheet.add_data_validation(rule)

    def _named(self) -> Iterator[str]:
        yield from self.recipe.settings
        if self.recipe.text.cosmology:
            for cell in COSMOLOGY_CELLS:
                yield cell.cell


def inside(problem: Problem, cell: Expr) -> Expr:
    """Return the condition that holds where a number keeps a limit."""
    limit = problem.limit
    if not isinstance(limit, str):
        return Expr(problem.comparison, cell, node(limit))
    bound = name(limit)
    kept = Expr(problem.comparison, cell, bound * problem.factor)
    return Expr("OR", Expr("blank", bound), kept)


def broken(problem: Problem, cells: Cells) -> Expr:
    """Return the condition that holds where a row has this problem."""
    cell = cells.symbols[problem.column.key]
    blank = Expr("blank", cell)
    if problem.kind == "error":
        return Expr("ISERROR", cell)
    if problem.kind == "missing":
        return blank
    if problem.kind == "not a number":
        wrong = Expr("NOT", Expr("ISNUMBER", cell))
    elif problem.kind == "limit":
        wrong = Expr("NOT", inside(problem, cell))
    elif problem.kind == "not a choice":
        choices = [Expr("same", cell, node(choice)) for choice in problem.column.choices]
        wrong = Expr("NOT", any_of(choices))
    else:
        wrong = Expr("ISERROR", Expr("lookup", cell, name("line_key"), name("line_vacuum")))
    return Expr("AND", Expr("NOT", blank), wrong)


def _limits(table: Table, column: Column) -> str:
    """Return what a column's numbers are held to, in words with a blank before"""
    limits = [
        problem.words.removeprefix(f"{column.label} must be")
        for problem in table.problems
        if problem.column is column and problem.kind == "limit"
    ]
    return " and".join(limits)


def _of_unit(column: Column) -> str:
    return f" of {column.unit}" if column.unit else ""


def _width(column: Column) -> float:
    longest = max(len(word) for word in column.header.split())
    return max(column.width or 12.0, longest + 2.0)


def build(
    recipe: Recipe,
    path: Path,
    *,
    formulas: str = "plain",
    rows: int | None = None,
    overwrite: bool = False,
) -> None:
    """Write the template workbook of a recipe, whole or not at all.

    formulas: what goes into the computed cells, by its name in FORMULAS
    rows: rows to prepare in each sheet, where not as many as the recipe says
    overwrite: whether `path` may exist
    Raises LogbookError where `path` cannot be written.
    """
    builder = _Builder(recipe, FORMULAS[formulas], rows, datetime.now(UTC))
    packed = BytesIO()
    builder.built().workbook.save(packed)
    write_whole(path, _without_empty_types(packed), overwrite=overwrite)


_EMPTY_NUMBER = re.compile(rb'(<c r="[A-Z]+[0-9]+"(?: s="[0-9]+")?) t="n"( ?/>|></c>)')


def _without_empty_types(packed: BytesIO) -> bytes:
    """openpyxl calls an empty cell a number, which some programs then take for 0"""
    cleaned = BytesIO()
    with ZipFile(packed) as old, ZipFile(cleaned, "w", ZIP_DEFLATED) as new:
        for info in old.infolist():
            content = old.read(info)
            if info.filename.startswith("xl/worksheets/sheet"):
                content = _EMPTY_NUMBER.sub(rb"\1\2", content)
            new.writestr(info, content, ZIP_DEFLATED)
    return cleaned.getvalue()
