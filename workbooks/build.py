"""A recipe made into a template workbook that computes with nothing installed."""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass
from datetime import UTC, datetime
from io import BytesIO
from pathlib import Path
from typing import Any, Final

from openpyxl import Workbook
from openpyxl.chart import Reference, ScatterChart, Series
from openpyxl.chart.layout import Layout, ManualLayout
from openpyxl.chart.shapes import GraphicalProperties
from openpyxl.formatting.rule import FormulaRule
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.workbook.defined_name import DefinedName
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.properties import PageSetupProperties
from openpyxl.worksheet.worksheet import Worksheet

from cellfuncs.bridges.formula import HIDDEN_TABLES, Guarded, derived_settings, text_of
from cellfuncs.constants import EDITION
from cellfuncs.errors import DomainError
from cellfuncs.families.workbook import provenance
from cellfuncs.physics import lines, refraction
from cellfuncs.physics.expansion import PARAMETERS, PUBLISHED, published
from cellfuncs.symbols import Expr, NotTraceable, name, node
from workbooks.expression import Call, Cells
from workbooks.package import write_whole
from workbooks.recipe import Chart, Column, Problem, Recipe, Setting, Sheet, Table, lines_wanted
from workbooks.settings import COSMOLOGY_CELLS, OWN, SET_CELL, CosmologyCell

HEADER_ROW: Final = 4
FIRST_ROW: Final = 5
STATUS: Final = "Status"
ROW: Final = "\0"
"""Stands for the row number in a formula that is written once for all rows"""
ROW_OK: Final = "ok"

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


class TemplateError(ValueError):
    """A recipe that cannot become the workbook that was asked for."""


@dataclass
class _Builder:
    """Makes one workbook; each method makes one sheet."""

    recipe: Recipe
    plain: bool
    rows: int | None
    made: datetime

    def workbook(self) -> Workbook:
        self.book = Workbook()
        first = self.book.active
        assert first is not None
        self.book.remove(first)
        for table in self.recipe.tables:
            self._table_sheet(table)
        for table in self.recipe.tables:
            if table.sheet.charts:
                self._chart_sheet(table)
        self._settings_sheet()
        if lines_wanted(self.recipe):
            self._line_sheet()
        self._how_to_sheet()
        self._provenance_sheet()
        self._hidden_tables()
        self.book.properties.title = self.recipe.text.title
        self.book.properties.creator = provenance()
        self.book.properties.created = self.made.replace(tzinfo=None)
        self.book.properties.modified = self.made.replace(tzinfo=None)
        self.book.calculation.fullCalcOnLoad = True
        return self.book

    def _sheet(self, title: str, *, gridlines: bool = False) -> Worksheet:
        sheet: Worksheet = self.book.create_sheet(title)
        sheet.sheet_view.showGridLines = gridlines
        sheet.page_setup.orientation = "landscape"
        sheet.page_setup.paperSize = 9
        sheet.page_setup.fitToWidth = 1
        sheet.page_setup.fitToHeight = 0
        sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
        return sheet

    def _name(self, key: str, sheet: Worksheet, place: str) -> None:
        self.book.defined_names[key] = DefinedName(key, attr_text=f"{_quoted(sheet.title)}!{place}")

    # the sheets where a person works

    def _table_sheet(self, table: Table) -> None:
        sheet = self._sheet(table.sheet.name)
        last = FIRST_ROW - 1 + (self.rows or table.sheet.rows)
        columns = [*table.inputs, *table.computed]
        letters = {column.key: get_column_letter(n) for n, column in enumerate(columns, 1)}
        status = get_column_letter(len(columns) + 1)
        _put(sheet, "A1", self.recipe.text.title, TITLE)
        _put(sheet, "A2", table.sheet.intro or self.recipe.text.purpose, QUIET)
        self._bands(sheet, len(table.inputs), len(columns) + 1)
        for column in columns:
            self._header(sheet, f"{letters[column.key]}{HEADER_ROW}", column.header, column.role)
            sheet.column_dimensions[letters[column.key]].width = _width(column)
        self._header(sheet, f"{status}{HEADER_ROW}", STATUS, "computed")
        sheet.column_dimensions[status].width = 58
        sheet.row_dimensions[HEADER_ROW].height = 48
        formulas = self._formulas(table, letters) if self.plain else {}
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
                    cell.alignment = Alignment(indent=1)
                    cell.number_format = "@" if column.kind == "text" else "General"
            cell = sheet[f"{status}{row}"]
            cell.border, cell.font, cell.fill = BOX, PLAIN, fill_of(WASH)
            cell.alignment = Alignment(indent=1)
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
            | {key: name(key) for key in self._named()}
        )
        formulas: dict[str, str] = {}
        for key, tree in table.nodes.items():
            # `fill` computes what no plain formula can
            with suppress(NotTraceable):
                formulas[key] = tree.of_cells(cells).formula(when_blank=node(""))
        return {**formulas, STATUS: self._status(table, cells, formulas)}

    def _status(self, table: Table, cells: Cells, formulas: Mapping[str, str]) -> str:
        """Return the formula that says in words what is wrong in a row, the first thing first."""
        filled = [
            Expr("blank", cells.symbols[column.key])
            for column in table.inputs
            if column.key in table.required
        ]
        failed = [Expr("ISERROR", cells.symbols[key]) for key in formulas]
        words: Expr = node(ROW_OK)
        if failed:
            unexplained = "no result: look at this row's inputs and at the sheet Settings"
            words = Expr("IF", _any(failed), node(unexplained), words)
        for problem in reversed(table.problems):
            words = Expr("IF", broken(problem, cells), node(problem.words), words)
        return "=" + text_of(Expr("IF", _all(filled), node(""), words))

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
            rule = DataValidation("custom", formula1=f"=ISNUMBER({first})")
            rule.error = f"{column.label} must be a number{_of_unit(column)}."
        rule.allow_blank = True
        if rule.error:
            rule.showErrorMessage = True
            rule.errorStyle = "warning"
            rule.errorTitle = column.label[:32]
        rule.showInputMessage = True
        rule.promptTitle = column.header[:32]
        limits = "; ".join(
            problem.words.removeprefix(column.label + " ")
            for problem in table.problems
            if problem.column is column and problem.kind == "limit"
        )
        rule.prompt = f"{column.note}{' It ' + limits + '.' if limits else ''}"[:255] or None
        rule.add(f"{first}:{first.rstrip('0123456789')}{last}")
        sheet.add_data_validation(rule)

    def _named(self) -> Iterator[str]:
        yield from self.recipe.settings
        if self.recipe.text.cosmology:
            for cell in COSMOLOGY_CELLS:
                yield cell.cell

    # the chart

    def _chart_sheet(self, table: Table) -> None:
        charts = table.sheet.charts
        title = "Chart" if len(self.recipe.tables) == 1 else f"{table.sheet.name[:24]} chart"
        sheet = self._sheet(title)
        sheet.page_setup.fitToHeight = 1
        _put(sheet, "A1", self.recipe.text.title, TITLE)
        points = self._points_sheet(table)
        row = 3
        for number, chart in enumerate(charts):
            drawn = self._chart(table, chart, points, number)
            sheet.add_chart(drawn, f"A{row}")
            row += 24

    def _points_sheet(self, table: Table) -> Worksheet:
        """What the charts draw: #N/A, which no program draws, in place of an empty result."""
        points = self._sheet(f"{table.sheet.name[:24]} points")
        points.sheet_state = "hidden"
        letters = _letters(table)
        last = FIRST_ROW - 1 + (self.rows or table.sheet.rows)
        for place, key in enumerate(_chart_keys(table.sheet.charts), 1):
            points.cell(1, place, f"points: {key}")
            shown_with = [
                f"ISNUMBER({_quoted(table.sheet.name)}!{letters[y]}{{row}})"
                for chart in table.sheet.charts
                if key == chart.x
                for y in chart.y
            ]
            for row in range(FIRST_ROW, last + 1):
                cell = f"{_quoted(table.sheet.name)}!{letters[key]}{row}"
                drawn = f"ISNUMBER({cell})"
                if shown_with:
                    # a point without a result must not stretch the axis
                    drawn = f"AND({drawn},OR({','.join(shown_with).format(row=row)}))"
                points.cell(row, place, f"=IF({drawn},{cell},NA())")
        return points

    def _chart(self, table: Table, chart: Chart, points: Worksheet, number: int) -> ScatterChart:
        keys = _chart_keys(table.sheet.charts)
        last = FIRST_ROW - 1 + (self.rows or table.sheet.rows)
        drawn = ScatterChart()
        drawn.style = 2
        drawn.scatterStyle = "lineMarker"
        drawn.title = chart.title
        drawn.width, drawn.height = 24, 11.5
        drawn.visible_cells_only = False  # what is drawn stands on a hidden sheet
        drawn.display_blanks = "gap"
        drawn.x_axis.title = table.columns[chart.x].header
        first = table.columns[chart.y[0]]
        label = chart.y_label or first.label
        drawn.y_axis.title = f"{label} [{first.unit}]" if first.unit else label
        drawn.x_axis.delete = drawn.y_axis.delete = False
        drawn.x_axis.number_format = drawn.y_axis.number_format = "General"
        drawn.x_axis.tickLblPos = drawn.y_axis.tickLblPos = "low"
        drawn.x_axis.majorGridlines = None
        drawn.legend = drawn.legend if len(chart.y) > 1 else None
        if drawn.legend is not None:
            drawn.legend.position = "b"
        x = Reference(points, min_col=keys.index(chart.x) + 1, min_row=FIRST_ROW, max_row=last)
        for key, (shape, colour) in zip(
            chart.y, (("circle", TYPE_HERE), ("diamond", "B5651D"), ("square", INK)), strict=False
        ):
            y = Reference(points, min_col=keys.index(key) + 1, min_row=FIRST_ROW, max_row=last)
            series = Series(y, x, title=table.columns[key].label)
            series.marker.symbol, series.marker.size = shape, 7
            series.marker.graphicalProperties = GraphicalProperties(solidFill=colour)
            series.marker.graphicalProperties.line.solidFill = colour
            series.graphicalProperties = GraphicalProperties()
            series.graphicalProperties.line.noFill = True
            drawn.series.append(series)
        drawn.layout = Layout(manualLayout=ManualLayout(x=0.09, y=0.12, w=0.87, h=0.68))
        return drawn

    # settings

    def _settings_sheet(self) -> None:
        sheet = self._sheet("Settings")
        _put(sheet, "A1", "Settings", TITLE)
        _put(sheet, "A2", "Type in the framed white cells.", QUIET)
        for letter, width in zip("ABCDE", (38, 22, 18, 22, 70), strict=True):
            sheet.column_dimensions[letter].width = width
        row = 4
        groups: dict[str, list[Setting]] = {}
        for setting in self.recipe.text.settings:
            groups.setdefault(setting.group, []).append(setting)
        for group, settings in groups.items():
            _heading(sheet, row, (group, "Value", "Unit", "", "Note"))
            for offset, setting in enumerate(settings, 1):
                self._setting(sheet, row + offset, setting)
            row += len(settings) + 2
        if self.recipe.text.cosmology:
            self._cosmology(sheet, row)

    def _setting(self, sheet: Worksheet, row: int, setting: Setting) -> None:
        _put(sheet, f"A{row}", setting.label, PLAIN)
        _input(sheet, f"B{row}", setting.value, setting.format)
        _put(sheet, f"C{row}", setting.unit, PLAIN)
        _put(sheet, f"E{row}", setting.note, QUIET)
        self._name(setting.key, sheet, f"$B${row}")

    def _cosmology(self, sheet: Worksheet, row: int) -> None:
        _heading(sheet, row, ("Cosmology", "In use", "Unit", "Own value", "Note"))
        row += 1
        _put(sheet, f"A{row}", "Set", BOLD)
        _input(sheet, f"B{row}", self.recipe.text.cosmology, "")
        _put(
            sheet,
            f"E{row}",
            f"a published set, or «{OWN}»: then the column Own value holds what is used",
            QUIET,
        )
        self._name(SET_CELL, sheet, f"$B${row}")
        rule = DataValidation("list", formula1=f'"{",".join([*PUBLISHED, OWN])}"')
        rule.showErrorMessage, rule.errorTitle = True, "Cosmology"
        rule.error = "Choose a set from the list."
        rule.add(f"B{row}")
        sheet.add_data_validation(rule)
        derived = derived_settings()
        for cell in COSMOLOGY_CELLS:
            row += 1
            self._parameter(sheet, row, cell, derived)
        row += 2
        _heading(sheet, row, ("Follows from these", "In use", "Unit", "", "Note"))
        for key, words in _DERIVED.items():
            row += 1
            _put(sheet, f"A{row}", words, PLAIN)
            _result(sheet, f"B{row}", "=" + text_of(derived[key]), "0.000000E+00")
            self._name(key, sheet, f"$B${row}")

    def _parameter(
        self, sheet: Worksheet, row: int, cell: CosmologyCell, derived: Mapping[str, Expr]
    ) -> None:
        own = name(cell.own_cell)
        meaning = cell.meaning.partition(";")[0]
        _put(sheet, f"A{row}", f"{meaning[:1].upper()}{meaning[1:]}", PLAIN)
        _put(sheet, f"C{row}", cell.unit, PLAIN)
        _input(sheet, f"D{row}", None, "")
        self._name(cell.own_cell, sheet, f"$D${row}")
        self._name(cell.cell, sheet, f"$B${row}")
        if cell.cell in derived:
            formula = derived[cell.cell]
        else:
            fallback = PARAMETERS[cell.parameter].default
            instead = Expr("NA") if fallback is None else node(fallback)
            typed = Expr("IF", Expr("blank", own), instead, own)
            chosen = Expr("same", name(SET_CELL), node(OWN))
            formula = Expr("IF", chosen, typed, _from_set(cell))
        _result(sheet, f"B{row}", "=" + text_of(formula), "0.######")
        _put(sheet, f"E{row}", _note(cell), QUIET)

    # what a person may look up

    def _line_sheet(self) -> None:
        sheet = self._sheet("Line names")
        _put(sheet, "A1", "Line names", TITLE)
        _put(
            sheet,
            "A2",
            "Rest wavelengths in Angstrom. Common spellings of each name are understood.",
            QUIET,
        )
        headers = (
            "Line",
            "Species",
            "Vacuum [Angstrom]",
            "Air [Angstrom]",
            "How obtained",
            "Source",
        )
        _heading(sheet, HEADER_ROW, headers)
        table = lines.lines()
        for row, line in enumerate(table, FIRST_ROW):
            try:
                air: float | None = refraction.air_from_vacuum(line.vacuum)
            except DomainError:
                air = None
            values = (line.name, line.species, line.vacuum, air, line.obtained, line.source)
            for place, value in enumerate(values, 1):
                cell = sheet.cell(row, place, value)
                cell.font = PLAIN
                if place in (3, 4):
                    cell.number_format = "0.000"
                else:
                    cell.alignment = Alignment(indent=1)
        for letter, width in zip("ABCDEF", (20, 12, 20, 18, 60, 60), strict=True):
            sheet.column_dimensions[letter].width = width
        sheet.freeze_panes = f"B{FIRST_ROW}"
        self._name("line_name", sheet, f"$A${FIRST_ROW}:$A${FIRST_ROW + len(table) - 1}")

    def _how_to_sheet(self) -> None:
        sheet = self._sheet("How to use")
        sheet.column_dimensions["A"].width = 26
        sheet.column_dimensions["B"].width = 18
        sheet.column_dimensions["C"].width = 96
        _put(sheet, "A1", self.recipe.text.title, TITLE)
        _put(sheet, "A2", self.recipe.text.purpose, PLAIN)
        row = 4
        for number, step in enumerate(self.recipe.text.steps, 1):
            _put(sheet, f"A{row}", f"Step {number}", BOLD).alignment = WRAPPED
            _put(sheet, f"B{row}", step, PLAIN).alignment = WRAPPED
            sheet.merge_cells(f"B{row}:C{row}")
            sheet.row_dimensions[row].height = 16 * (1 + len(step) // 110)
            row += 1
        for table in self.recipe.tables:
            row += 1
            for role, columns in (("type here", table.inputs), ("computed", table.computed)):
                _heading(sheet, row, (f"{table.sheet.name}: {role}", "Unit", "What it is"))
                for column in columns:
                    row += 1
                    _put(sheet, f"A{row}", column.label, PLAIN).alignment = WRAPPED
                    _put(sheet, f"B{row}", column.unit, PLAIN).alignment = WRAPPED
                    _put(sheet, f"C{row}", _explained(table, column), PLAIN).alignment = WRAPPED
                    sheet.row_dimensions[row].height = 16 * (
                        1 + len(_explained(table, column)) // 95
                    )
                row += 2

    def _provenance_sheet(self) -> None:
        sheet = self._sheet("Provenance")
        sheet.column_dimensions["A"].width = 30
        sheet.column_dimensions["B"].width = 100
        _put(sheet, "A1", "Provenance", TITLE)
        rows: list[tuple[str, str, Any]] = [
            ("Recipe", "recipe_name", self.recipe.name),
            ("Template made by", "template_version", provenance()),
            ("Template made on", "template_made", self.made.strftime("%Y-%m-%d %H:%M UTC")),
            ("Constants", "template_constants", EDITION),
        ]
        if self.recipe.text.cosmology:
            rows.append(("Cosmology in use", "cosmology_in_use", f"={SET_CELL}"))
        rows += [
            ("Ephemeris", "template_ephemeris", provenance("ephemeris")),
            ("Earth orientation", "template_earth_orientation", provenance("earth-orientation")),
            ("Last filled", "last_filled", None),
        ]
        for row, (label, key, value) in enumerate(rows, 3):
            _put(sheet, f"A{row}", label, BOLD)
            _put(sheet, f"B{row}", value, PLAIN)
            self._name(key, sheet, f"$B${row}")
        row = len(rows) + 4
        if self.recipe.text.cosmology:
            _heading(sheet, row, ("Published set", "Source"))
            for set_name, (source, _) in PUBLISHED.items():
                row += 1
                _put(sheet, f"A{row}", set_name, PLAIN)
                _put(sheet, f"B{row}", source, PLAIN)
            row += 2
        _heading(sheet, row, ("Computed column", "Function and source"))
        for table in self.recipe.tables:
            for column in table.computed:
                row += 1
                _put(sheet, f"A{row}", column.header, PLAIN)
                _put(sheet, f"B{row}", "; ".join(_sources(table, column)), PLAIN)

    def _hidden_tables(self) -> None:
        sheet = self._sheet("Tables")
        sheet.sheet_state = "hidden"
        place = 0
        wanted = {
            key: values
            for key, values in HIDDEN_TABLES.items()
            if lines_wanted(self.recipe) or not key.startswith("line_")
        }
        for key, values in wanted.items():
            place += 1
            self._column_of(sheet, place, key, values)
        if self.recipe.text.cosmology:
            place += 1
            self._column_of(sheet, place, "published_set", tuple(PUBLISHED))
            for cell in COSMOLOGY_CELLS:
                if cell.parameter != "Ode0":
                    place += 1
                    values = tuple(_published_value(set_name, cell) for set_name in PUBLISHED)
                    self._column_of(sheet, place, f"published_{cell.cell}", values)

    def _column_of(self, sheet: Worksheet, place: int, key: str, values: Sequence[Any]) -> None:
        sheet.cell(1, place, key)
        for row, value in enumerate(values, 2):
            sheet.cell(row, place, value)
        letter = get_column_letter(place)
        self._name(key, sheet, f"${letter}$2:${letter}${len(values) + 1}")


_DERIVED: Final = {
    "omega_curvature": "Curvature density over the critical one",
    "omega_photon": "Photon density over the critical one",
    "omega_neutrino": "Neutrino density over the critical one",
    "neutrino_ratio_1": "Neutrinos of kind 1: rest over thermal energy",
    "neutrino_ratio_2": "Neutrinos of kind 2: rest over thermal energy",
    "neutrino_ratio_3": "Neutrinos of kind 3: rest over thermal energy",
}


def _published_value(set_name: str, cell: CosmologyCell) -> float:
    cosmology = published(set_name)
    if cell.kind:
        return float(cosmology.m_nu[cell.kind - 1])
    return float(getattr(cosmology, cell.parameter.lower()))


def _from_set(cell: CosmologyCell) -> Expr:
    place = Expr("MATCH", name(SET_CELL), name("published_set"), node(0.0))
    return Expr("INDEX", name(f"published_{cell.cell}"), place)


def _note(cell: CosmologyCell) -> str:
    parameter = PARAMETERS[cell.parameter]
    if cell.parameter == "Ode0":
        return "own value left empty: a flat universe"
    if cell.parameter == "Neff":
        return "own value from 3 to below 4: the template counts three kinds of neutrino"
    if parameter.default is None:
        return "must be given with an own cosmology"
    return f"own value left empty: {parameter.default:g}"


def _letters(table: Table) -> dict[str, str]:
    ordered = [*table.inputs, *table.computed]
    return {column.key: get_column_letter(place) for place, column in enumerate(ordered, 1)}


def _chart_keys(charts: Sequence[Chart]) -> list[str]:
    keys = [key for chart in charts for key in (chart.x, *chart.y)]
    return list(dict.fromkeys(keys))


def _sources(table: Table, column: Column) -> list[str]:
    called = [part.function for part in table.nodes[column.key].parts() if isinstance(part, Call)]
    return list(dict.fromkeys(f"{made.name}: {made.source}" for made in called))


def _explained(table: Table, column: Column) -> str:
    if column.role == "input":
        return column.note
    called = [
        part.function.summary for part in table.nodes[column.key].parts() if isinstance(part, Call)
    ]
    return column.note or (called[0] if called else column.formula)


def broken(problem: Problem, cells: Cells) -> Expr:
    """Return the condition that holds where a row has this problem."""
    cell = cells.symbols[problem.column.key]
    blank = Expr("blank", cell)
    if problem.kind == "missing":
        return blank
    if problem.kind == "not a number":
        wrong = Expr("NOT", Expr("ISNUMBER", cell))
    elif problem.kind == "limit":
        limit = problem.limit
        bound = name(limit) if isinstance(limit, str) else node(limit)
        inside = Expr(problem.comparison, cell, bound)
        if isinstance(limit, str):
            inside = Expr("OR", Expr("blank", bound), inside)
        wrong = Expr("NOT", inside)
    elif problem.kind == "not a choice":
        choices = [Expr("same", cell, node(choice)) for choice in problem.column.choices]
        wrong = Expr("NOT", _any(choices))
    else:
        wrong = Expr("ISERROR", Expr("lookup", cell, name("line_key"), name("line_vacuum")))
    return Expr("AND", Expr("NOT", blank), wrong)


def _any(conditions: Sequence[Expr]) -> Expr:
    return conditions[0] if len(conditions) == 1 else Expr("OR", *conditions)


def _all(conditions: Sequence[Expr]) -> Expr:
    return conditions[0] if len(conditions) == 1 else Expr("AND", *conditions)


def _quoted(title: str) -> str:
    return "'" + title.replace("'", "''") + "'"


def _of_unit(column: Column) -> str:
    return f" of {column.unit}" if column.unit else ""


def _width(column: Column) -> float:
    longest = max(len(word) for word in column.header.split())
    return max(column.width or 12.0, longest + 2.0)


def _put(sheet: Worksheet, place: str, value: Any, font: Font) -> Any:
    cell = sheet[place]
    cell.value = value
    cell.font = font
    if isinstance(value, str) and not value.startswith("="):
        cell.data_type = "s"
    return cell


def _input(sheet: Worksheet, place: str, value: Any, number_format: str) -> None:
    cell = _put(sheet, place, value, PLAIN)
    cell.border, cell.fill = BOX, fill_of(PAPER)
    cell.alignment = Alignment(horizontal="left")
    if number_format:
        cell.number_format = number_format


def _result(sheet: Worksheet, place: str, formula: str, number_format: str) -> None:
    cell = _put(sheet, place, formula, PLAIN)
    cell.fill = fill_of(WASH)
    cell.alignment = Alignment(horizontal="left")
    cell.number_format = number_format


def _heading(sheet: Worksheet, row: int, words: Sequence[str]) -> None:
    for place, word in enumerate(words, 1):
        cell = sheet.cell(row, place, word or None)
        cell.font = ON_DARK
        cell.fill = fill_of(COMPUTED)


def build(
    recipe: Recipe,
    path: Path,
    *,
    formulas: str = "plain",
    rows: int | None = None,
    overwrite: bool = False,
) -> None:
    """Write the template workbook of a recipe, whole or not at all.

    formulas: "plain" puts standard spreadsheet formulas into the computed cells; "none" leaves them
    for `fill`
    rows: rows to prepare in each sheet, where not as many as the recipe says
    overwrite: whether `path` may exist
    Raises LogbookError where `path` cannot be written.
    """
    builder = _Builder(recipe, formulas == "plain", rows, datetime.now(UTC))
    packed = BytesIO()
    builder.workbook().save(packed)
    write_whole(path, packed.getvalue(), overwrite=overwrite)


__all__ = ["FIRST_ROW", "HEADER_ROW", "ROW_OK", "STATUS", "Guarded", "Sheet", "build"]
