"""A recipe made into a template workbook that computes with nothing installed."""

import re
from collections.abc import Iterator, Mapping, Sequence
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
from cellfuncs.bridges.sample import group_key, over_rows
from cellfuncs.bridges.steps import Steps
from cellfuncs.families.workbook import provenance
from cellfuncs.symbols import Expr, NotTraceable, kept, name, node
from workbooks.commands.connect import SPELLING
from workbooks.expression import Cells
from workbooks.files.saving import write_whole
from workbooks.recipe import (
    ROW_OK,
    STATUS,
    Column,
    Problem,
    Recipe,
    Table,
    lines_wanted,
    season_wanted,
    unexplained,
    working_title,
)
from workbooks.settings import COSMOLOGY_CELLS
from workbooks.template import supporting
from workbooks.template.charts import chart_sheet
from workbooks.template.season import Season, season_sheet, working_sheet
from workbooks.template.sheets import (
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
    letters_of,
    put,
    quoted,
)

ROW: Final = "\0"
"""Stands for the row number in a formula that is written once for all rows"""


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
    season: Season | None

    def built(self) -> Book:
        self.book = Book()
        self.steps: dict[str, Steps] = {}
        for table in self.recipe.tables:
            self._table_sheet(table)
        for summary in self.recipe.summaries:
            self._summary_sheet(summary)
        for table in (*self.recipe.tables, *self.recipe.summaries):
            if table.sheet.charts or table.sheet.histograms:
                chart_sheet(self.book, self.recipe, table, self._rows_of(table))
        supporting.settings_sheet(self.book, self.recipe, self.season)
        if lines_wanted(self.recipe):
            supporting.line_sheet(self.book)
        supporting.how_to_sheet(self.book, self.recipe, self.formulas.needs)
        supporting.provenance_sheet(self.book, self.recipe, self.made)
        supporting.hidden_tables(self.book, self.recipe)
        if self.season:
            season_sheet(self.book, self.season)
        for table in (*self.recipe.tables, *self.recipe.summaries):
            steps = self.steps[table.sheet.name]
            if steps.formulas:
                rows = range(FIRST_ROW, FIRST_ROW + self._rows_of(table))
                working_sheet(self.book, working_title(table.sheet.name), steps, rows, ROW)
        workbook = self.book.workbook
        workbook.properties.title = self.recipe.text.title
        workbook.properties.creator = provenance()
        workbook.properties.created = self.made.replace(tzinfo=None)
        workbook.properties.modified = self.made.replace(tzinfo=None)
        workbook.calculation.fullCalcOnLoad = True
        return self.book

    def _rows_of(self, table: Table) -> int:
        return self.rows or table.sheet.rows

    def _table_sheet(self, table: Table) -> None:
        sheet = self.book.sheet(table.sheet.name)
        last = FIRST_ROW - 1 + self._rows_of(table)
        columns = [*table.inputs, *table.computed]
        letters = letters_of(table)
        status = get_column_letter(len(columns) + 1)
        put(sheet, "A1", self.recipe.text.title, TITLE)
        put(sheet, "A2", table.sheet.intro or self.recipe.text.purpose, QUIET)
        self._bands(sheet, len(table.inputs), [not column.hidden for column in columns] + [True])
        for column in columns:
            self._header(sheet, f"{letters[column.key]}{HEADER_ROW}", column.header, column.role)
            sheet.column_dimensions[letters[column.key]].width = _width(column)
            sheet.column_dimensions[letters[column.key]].hidden = column.hidden
        self._header(sheet, f"{status}{HEADER_ROW}", STATUS, "computed")
        sheet.column_dimensions[status].width = 66
        sheet.row_dimensions[HEADER_ROW].height = 48
        steps = self.steps[table.sheet.name] = self._steps(table)
        formulas = self._formulas(table, steps) if self.formulas.written else {}
        for row in range(FIRST_ROW, last + 1):
            self._row(sheet, row, columns, letters, formulas)
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
        if table.results:
            results = self._results(table, steps) if self.formulas.written else {}
            supporting.results_sheet(self.book, self.recipe, table, results)

    def _row(
        self,
        sheet: Worksheet,
        row: int,
        columns: Sequence[Column],
        letters: Mapping[str, str],
        formulas: Mapping[str, str],
    ) -> None:
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
                if column.kind != "time":
                    cell.number_format = "@" if column.kind == "text" else "General"

    def _summary_sheet(self, table: Table) -> None:
        """Add the sheet with a row for each group of rows of another."""
        assert table.gathers is not None
        sheet = self.book.sheet(table.sheet.name)
        last = FIRST_ROW - 1 + self._rows_of(table)
        letters = letters_of(table)
        end = get_column_letter(len(letters))
        put(sheet, "A1", self.recipe.text.title, TITLE)
        put(sheet, "A2", table.sheet.intro, QUIET)
        self._bands(sheet, 0, [True] * len(letters))
        for column in table.computed:
            self._header(sheet, f"{letters[column.key]}{HEADER_ROW}", column.header, "computed")
            sheet.column_dimensions[letters[column.key]].width = _width(column)
        sheet.row_dimensions[HEADER_ROW].height = 48
        steps = self.steps[table.sheet.name] = self._steps(table)
        formulas = {}
        if self.formulas.written:
            place = self._first_of_group(table.gathers, table.sheet.by)
            formulas = self._summary_formulas(table, steps, place)
            self._tell_of_more(sheet, table, place)
        for row in range(FIRST_ROW, last + 1):
            self._row(sheet, row, table.computed, letters, formulas)
        sheet.freeze_panes = f"B{FIRST_ROW}"
        sheet.print_title_rows = f"{HEADER_ROW}:{HEADER_ROW}"
        sheet.print_area = f"A1:{end}{last}"

    def _tell_of_more(self, sheet: Worksheet, table: Table, place: Expr) -> None:
        """Say above the table how many groups it has no row for."""
        rows, groups = node(float(self._rows_of(table))), Expr("MAX", place)
        more = Expr("&", Expr("&", node("This sheet has rows for "), rows), node(" of "))
        more = Expr("&", Expr("&", more, groups), node("; «cellfuncs fill» writes them all."))
        put(
            sheet,
            "A2",
            "=" + text_of(Expr("IF", groups > rows, more, node(table.sheet.intro))),
            QUIET,
        )
        sheet.conditional_formatting.add(
            "A2",
            FormulaRule(  # type: ignore[no-untyped-call]
                formula=[text_of(groups > rows)], fill=fill_of(ALERT), font=Font(bold=True)
            ),
        )

    def _summary_formulas(self, table: Table, steps: Steps, place: Expr) -> dict[str, str]:
        """Return formulas that look up the first row of the n-th group, n counted from the top."""
        gathers = table.gathers
        assert gathers is not None
        row = kept("row of the group", Expr("MATCH", name(ROW) - (FIRST_ROW - 1), place, node(0.0)))
        last = FIRST_ROW - 1 + self._rows_of(gathers)
        symbols = {}
        for key, letter in letters_of(gathers).items():
            area = f"{quoted(gathers.sheet.name)}!${letter}${FIRST_ROW}:${letter}${last}"
            found = Expr("INDEX", name(area), row)
            # what is looked up in an empty cell would be 0
            symbols[key] = Expr("IF", Expr("=", found, node("")), node(""), found)
        cells = Cells({**symbols, **{key: name(key) for key in self._named()}})
        formulas = {}
        for key, tree in table.nodes.items():
            value = Expr("IF", Expr("ISNUMBER", row), tree.of_cells(cells).value, node(""))
            formulas[key] = "=" + text_of(steps.taken_out(value))
        return formulas

    def _first_of_group(self, table: Table, by: str) -> Expr:
        """Return the range that numbers the groups of a table, in the first row of each."""
        steps = self.steps[table.sheet.name]
        cell = name(f"${letters_of(table)[by]}{ROW}")
        key = group_key(cell)
        here, keys = name(ROW), over_rows("group", key)
        numbers = over_rows("row", Expr("+", here, node(0.0)))
        before = Expr("SUMPRODUCT", Expr("*", Expr("=", keys, key), numbers < here))
        named = Expr("NOT", Expr("=", key, node("")))
        is_first = Expr("AND", named, Expr("=", before, node(0.0)))
        first = kept("first of its group", Expr("IF", is_first, node(1.0), node(0.0)))
        firsts = over_rows("first of its group", first)
        count = Expr("SUMPRODUCT", Expr("*", firsts, numbers <= here))
        ordinal = Expr("IF", Expr("=", first, node(1.0)), count, node(0.0))
        return steps.taken_out(over_rows("number of the group", ordinal))

    def _results(self, table: Table, steps: Steps) -> dict[str, str]:
        cells = self._cells(table)
        formulas = {}
        for key, tree in table.results.items():
            with suppress(NotTraceable):
                guarded = tree.of_cells(cells).mapped(steps.taken_out)
                formulas[key] = guarded.formula(when_blank=node(""))
        return formulas

    def _bands(self, sheet: Worksheet, inputs: int, seen: Sequence[bool]) -> None:
        row = HEADER_ROW - 1
        bands = [(inputs + 1, len(seen), "computed: do not type", COMPUTED)]
        if inputs:
            bands.insert(0, (1, inputs, "type here", TYPE_HERE))
        for first, last, words, colour in bands:
            for column in range(first, last + 1):
                sheet.cell(row, column).fill = fill_of(colour)
            # words in a hidden column would not be seen
            cell = sheet.cell(row, first + list(seen[first - 1 :]).index(True), words)
            cell.font = ON_DARK

    def _header(self, sheet: Worksheet, place: str, text: str, role: str) -> None:
        cell = sheet[place]
        cell.value = text
        cell.font = BOLD
        cell.fill = fill_of(PAPER if role == "input" else WASH)
        cell.alignment = CENTRED
        edge = Side(style="medium", color=TYPE_HERE if role == "input" else COMPUTED)
        cell.border = Border(left=RULE, right=RULE, top=edge, bottom=edge)

    def _steps(self, table: Table) -> Steps:
        """Return the working columns of a table, which are on a sheet of their own."""
        own, working = quoted(table.sheet.name), quoted(working_title(table.sheet.name))

        def seen(cell: str) -> str:
            if cell.startswith("$") and cell.endswith(ROW):
                return f"{own}!{cell}"
            return cell.removeprefix(f"{working}!")

        last = FIRST_ROW - 1 + self._rows_of(table)

        def column(place: int) -> str:
            return f"{working}!${get_column_letter(place + 1)}"

        return Steps(
            lambda place: f"{column(place)}{ROW}",
            lambda place: f"{column(place)}${FIRST_ROW}:${get_column_letter(place + 1)}${last}",
            seen,
        )

    def _cells(self, table: Table) -> Cells:
        return Cells(
            {key: name(f"${letter}{ROW}") for key, letter in letters_of(table).items()}
            | {key: name(key) for key in (*self._named(), *table.results)},
            self.formulas.calls,
        )

    def _formulas(self, table: Table, steps: Steps) -> dict[str, str]:
        """Return the formula of each computed column and of Status, with ROW for the row number."""
        cells = self._cells(table)
        formulas: dict[str, str] = {}
        for key, tree in table.nodes.items():
            # `fill` computes what no plain formula can
            with suppress(NotTraceable):
                guarded = tree.of_cells(cells).mapped(steps.taken_out)
                formulas[key] = guarded.formula(when_blank=node(""))
        status = self._status(table, cells)
        return {**formulas, STATUS: "=" + text_of(steps.taken_out(status))}

    def _status(self, table: Table, cells: Cells) -> Expr:
        """Return the formula that says in words what is wrong in a row, the first thing first."""
        filled = [Expr("blank", cells.symbols[key]) for key in table.anchors]
        words: Expr = node(ROW_OK)
        for problem in reversed(table.problems):
            if problem.kind == "beyond":
                words = Expr("IF", broken(problem, cells), node(problem.words), words)
        # what others build on comes first
        for key in reversed([*table.nodes]):
            failed = Expr("ISERROR", cells.symbols[key])
            words = Expr("IF", failed, node(unexplained(table, key)), words)
        for problem in reversed(table.problems):
            if problem.kind == "not a time" and self.season:
                outside = node(f"{problem.column.label} is {self.season.outside}")
                words = Expr("IF", off_season(problem, cells), outside, words)
            if problem.kind not in ("error", "beyond"):
                words = Expr("IF", broken(problem, cells), node(problem.words), words)
        words = Expr("IF", all_of(filled), node(""), words)
        # an error value in an input would make every question about it an error too
        for problem in reversed(table.problems):
            if problem.kind == "error":
                words = Expr("IF", broken(problem, cells), node(problem.words), words)
        return words

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
    if problem.alternatives:
        blanks = [
            [Expr("blank", cells.symbols[key]) for key in keys] for keys in problem.alternatives
        ]
        return all_of([any_of(group) for group in blanks])
    cell = cells.symbols[problem.column.key]
    blank = Expr("blank", cell)
    if problem.kind == "error":
        return Expr("ISERROR", cell)
    if problem.kind == "missing":
        return blank
    if problem.kind == "not a number":
        wrong = Expr("NOT", Expr("ISNUMBER", cell))
    elif problem.kind in ("limit", "beyond"):
        wrong = Expr("NOT", inside(problem, cell))
    elif problem.kind == "not a choice":
        choices = [Expr("same", cell, node(choice)) for choice in problem.column.choices]
        wrong = Expr("NOT", any_of(choices))
    elif problem.kind == "not a time":
        wrong = Expr("ISERROR", moment_of(cell))
    else:
        wrong = Expr("ISERROR", Expr("lookup", cell, name("line_key"), name("line_vacuum")))
    return Expr("AND", Expr("NOT", blank), wrong)


def off_season(problem: Problem, cells: Cells) -> Expr:
    """Return the condition that holds where a moment is outside the workbook's season table."""
    cell = cells.symbols[problem.column.key]
    moment = moment_of(cell)
    outside = any_of([moment < name("season_first"), moment >= name("season_last")])
    return Expr("IF", Expr("blank", cell), node(False), outside)


def moment_of(cell: Expr) -> Expr:
    return Expr("reading", node("moment"), cell)


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
    season: Season | None = None,
    overwrite: bool = False,
) -> None:
    """Write the template workbook of a recipe, whole or not at all.

    formulas: what goes into the computed cells, by its name in FORMULAS
    rows: rows to prepare in each sheet, where not as many as the recipe says
    season: the dates that plain formulas follow the Earth through; left out, two years from today
    overwrite: whether `path` may exist
    Raises LogbookError where `path` cannot be written.
    """
    now = datetime.now(UTC)
    needed = season_wanted(recipe) and FORMULAS[formulas].calls is None and formulas != "none"
    dates = (season or Season.from_today(now.date())) if needed else None
    builder = _Builder(recipe, FORMULAS[formulas], rows, now, dates)
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
