"""The sheets around a template's tables: settings, line names, how to use it, provenance."""

from collections.abc import Mapping
from datetime import datetime
from typing import Any, Final

from openpyxl.styles import Alignment
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.worksheet import Worksheet

from cellfuncs.bridges.formula import HIDDEN_TABLES, all_of, any_of, derived_settings, text_of
from cellfuncs.catalogue import Function
from cellfuncs.constants import EDITION
from cellfuncs.errors import DomainError
from cellfuncs.families.workbook import provenance
from cellfuncs.physics import lines, refraction
from cellfuncs.physics.expansion import PARAMETERS, PUBLISHED, published
from cellfuncs.symbols import Expr, name, node
from workbooks.expression import COSMOLOGY_RANGE, Call, Key, Node
from workbooks.gathered import Gathered
from workbooks.recipe import Column, Recipe, ResultCell, Setting, Table, lines_wanted
from workbooks.settings import COSMOLOGY_CELLS, OWN, SET_CELL, CosmologyCell
from workbooks.template.season import Season
from workbooks.template.sheets import (
    BOLD,
    FIRST_ROW,
    HEADER_ROW,
    PLAIN,
    QUIET,
    TITLE,
    WRAPPED,
    Book,
    put,
    put_heading,
    put_input,
    put_named,
    put_result,
)

_DERIVED: Final = {
    "expansion_holds": "Plain formulas can follow this expansion",
    "expansion_error": "Error of this template's sums, relative",
    "omega_curvature": "Curvature density over the critical one",
    "omega_photon": "Photon density over the critical one",
    "omega_neutrino": "Neutrino density over the critical one",
    "neutrino_ratio_1": "Neutrinos of kind 1: rest over thermal energy",
    "neutrino_ratio_2": "Neutrinos of kind 2: rest over thermal energy",
    "neutrino_ratio_3": "Neutrinos of kind 3: rest over thermal energy",
}


def settings_sheet(book: Book, recipe: Recipe, season: Season | None) -> None:
    sheet = book.sheet("Settings")
    put(sheet, "A1", "Settings", TITLE)
    put(sheet, "A2", "Type in the framed white cells.", QUIET)
    for letter, width in zip("ABCDE", (38, 22, 18, 22, 70), strict=True):
        sheet.column_dimensions[letter].width = width
    row = 4
    groups: dict[str, list[Setting]] = {}
    for setting in recipe.text.settings:
        groups.setdefault(setting.group, []).append(setting)
    for group, settings in groups.items():
        put_heading(sheet, row, (group, "Value", "Unit", "", "Note"))
        for offset, setting in enumerate(settings, 1):
            _setting(book, sheet, row + offset, setting)
        row += len(settings) + 2
    if season:
        put_heading(sheet, row, ("Dates", "In this workbook", "", "", "Note"))
        note = "the formulas know the Earth's motion from here"
        for words, day in (("First date", season.first), ("Last date", season.last)):
            row += 1
            put(sheet, f"A{row}", words, PLAIN)
            put_result(sheet, f"B{row}", day.isoformat(), "@")
            put(sheet, f"E{row}", note, QUIET)
            note = "to here; make a new template for later nights, or use «cellfuncs fill»"
        row += 3
    if recipe.text.cosmology:
        _cosmology(book, recipe, sheet, row)


def _setting(book: Book, sheet: Worksheet, row: int, setting: Setting) -> None:
    put(sheet, f"A{row}", setting.label, PLAIN)
    put_input(sheet, f"B{row}", setting.value, setting.format)
    put(sheet, f"C{row}", setting.unit, PLAIN)
    put(sheet, f"E{row}", setting.note, QUIET)
    if setting.choices:
        rule = DataValidation("list", formula1=f'"{",".join(setting.choices)}"')
        rule.showErrorMessage, rule.errorTitle = True, setting.label[:32]
        rule.error = f"{setting.label} must be {' or '.join(setting.choices)}."[:225]
        rule.add(f"B{row}")
        sheet.add_data_validation(rule)
    book.name(setting.key, sheet, f"$B${row}")


def _cosmology(book: Book, recipe: Recipe, sheet: Worksheet, row: int) -> None:
    put_heading(sheet, row, ("Cosmology", "In use", "Unit", "Own value", "Note"))
    row += 1
    put(sheet, f"A{row}", "Set", BOLD)
    put_input(sheet, f"B{row}", recipe.text.cosmology, "")
    put(
        sheet,
        f"E{row}",
        f"a published set, or «{OWN}»: then the column Own value holds what is used",
        QUIET,
    )
    book.name(SET_CELL, sheet, f"$B${row}")
    rule = DataValidation("list", formula1=f'"{",".join([*PUBLISHED, OWN])}"')
    rule.showErrorMessage, rule.errorTitle = True, "Cosmology"
    rule.error = "Choose a set from the list."
    rule.add(f"B{row}")
    sheet.add_data_validation(rule)
    derived = derived_settings()
    for cell in COSMOLOGY_CELLS:
        row += 1
        _parameter(book, sheet, row, cell, derived)
    row += 2
    put_heading(sheet, row, ("Follows from these", "In use", "Unit", "", "Note"))
    for key, words in _DERIVED.items():
        shape = "General" if key == "expansion_holds" else "0.000000E+00"
        row += 1
        put(sheet, f"A{row}", words, PLAIN)
        put_result(sheet, f"B{row}", "=" + text_of(derived[key]), shape)
        book.name(key, sheet, f"$B${row}")


def _parameter(
    book: Book, sheet: Worksheet, row: int, cell: CosmologyCell, derived: Mapping[str, Expr]
) -> None:
    own = name(cell.own_cell)
    meaning = cell.meaning.partition(";")[0]
    put(sheet, f"A{row}", f"{meaning[:1].upper()}{meaning[1:]}", PLAIN)
    put(sheet, f"C{row}", cell.unit, PLAIN)
    put_input(sheet, f"D{row}", None, "")
    book.name(cell.own_cell, sheet, f"$D${row}")
    book.name(cell.cell, sheet, f"$B${row}")
    if cell.cell in derived:
        formula = derived[cell.cell]
    else:
        fallback = PARAMETERS[cell.parameter].default
        instead = Expr("NA") if fallback is None else node(fallback)
        typed = Expr("IF", Expr("blank", own), instead, _allowed(cell, own))
        chosen = Expr("same", name(SET_CELL), node(OWN))
        formula = Expr("IF", chosen, typed, _from_set(cell))
    put_result(sheet, f"B{row}", "=" + text_of(formula), "0.######")
    put(sheet, f"E{row}", _note(cell), QUIET)


def results_sheet(book: Book, recipe: Recipe, table: Table, formulas: Mapping[str, str]) -> None:
    """Add the sheet with what follows from a table's columns as a whole."""
    sheet = book.sheet(results_title(recipe, table))
    put(sheet, "A1", recipe.text.title, TITLE)
    put(sheet, "A2", f"From all rows of the sheet {table.sheet.name}.", QUIET)
    for letter, width in zip("ABCD", (44, 18, 18, 90), strict=True):
        sheet.column_dimensions[letter].width = width
    put_heading(sheet, 4, ("Result", "Value", "Unit", "Note"))
    for row, result in enumerate(table.sheet.results, 5):
        put(sheet, f"A{row}", result.label, PLAIN)
        put_result(sheet, f"B{row}", formulas.get(result.key, ""), result.format or "General")
        put(sheet, f"C{row}", result.unit, PLAIN)
        put(sheet, f"D{row}", result.note, QUIET)
        sheet.row_dimensions[row].hidden = result.hidden
        book.name(result.key, sheet, f"$B${row}")


def results_title(recipe: Recipe, table: Table) -> str:
    several = sum(bool(each.results) for each in recipe.tables) > 1
    return f"{table.sheet.name[:23]} results" if several else "Results"


def line_sheet(book: Book) -> None:
    sheet = book.sheet("Line names")
    put(sheet, "A1", "Line names", TITLE)
    put(
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
    put_heading(sheet, HEADER_ROW, headers)
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
                cell.alignment = Alignment(horizontal="left", indent=1)
    for letter, width in zip("ABCDEF", (20, 12, 20, 18, 60, 60), strict=True):
        sheet.column_dimensions[letter].width = width
    sheet.freeze_panes = f"B{FIRST_ROW}"
    book.name("line_name", sheet, f"$A${FIRST_ROW}:$A${FIRST_ROW + len(table) - 1}")


def how_to_sheet(book: Book, recipe: Recipe, needs: str) -> None:
    sheet = book.sheet("How to use")
    sheet.column_dimensions["A"].width = 26
    sheet.column_dimensions["B"].width = 18
    sheet.column_dimensions["C"].width = 96
    put(sheet, "A1", recipe.text.title, TITLE)
    put(sheet, "A2", recipe.text.purpose, PLAIN)
    row = 4
    for number, step in enumerate([*([needs] if needs else []), *recipe.text.steps], 1):
        put(sheet, f"A{row}", f"Step {number}", BOLD).alignment = WRAPPED
        put(sheet, f"B{row}", step, PLAIN).alignment = WRAPPED
        sheet.merge_cells(f"B{row}:C{row}")
        sheet.row_dimensions[row].height = 16 * (1 + len(step) // 110)
        row += 1
    for caution in cautions(recipe):
        put(sheet, f"A{row}", "Caution", BOLD).alignment = WRAPPED
        put(sheet, f"B{row}", caution, BOLD).alignment = WRAPPED
        sheet.merge_cells(f"B{row}:C{row}")
        sheet.row_dimensions[row].height = 16 * (1 + len(caution) // 100)
        row += 1
    for table in (*recipe.tables, *recipe.summaries):
        row += 1
        for role, columns in (("type here", table.inputs), ("computed", table.computed)):
            columns = [column for column in columns if not column.hidden]
            if not columns:
                continue
            put_heading(sheet, row, (f"{table.sheet.name}: {role}", "Unit", "What it is"))
            for column in columns:
                row += 1
                put(sheet, f"A{row}", column.label, PLAIN).alignment = WRAPPED
                put(sheet, f"B{row}", column.unit, PLAIN).alignment = WRAPPED
                put(sheet, f"C{row}", _explained(table, column), PLAIN).alignment = WRAPPED
                sheet.row_dimensions[row].height = 16 * (1 + len(_explained(table, column)) // 95)
            row += 2
        results = [result for result in table.sheet.results if not result.hidden]
        if results:
            put_heading(sheet, row, (results_title(recipe, table), "Unit", "What it is"))
            for result in results:
                row += 1
                put(sheet, f"A{row}", result.label, PLAIN).alignment = WRAPPED
                put(sheet, f"B{row}", result.unit, PLAIN).alignment = WRAPPED
                words = _result_explained(table, result)
                put(sheet, f"C{row}", words, PLAIN).alignment = WRAPPED
                sheet.row_dimensions[row].height = 16 * (1 + len(words) // 95)
            row += 2


def _result_explained(table: Table, result: ResultCell) -> str:
    called = [made.summary for made in called_by(table.results[result.key])]
    words = result.note or (called[0] if called else result.formula)
    return f"{words[:1].upper()}{words[1:]}".removesuffix(".") + "."


def provenance_sheet(book: Book, recipe: Recipe, made: datetime) -> None:
    sheet = book.sheet("Provenance")
    sheet.column_dimensions["A"].width = 30
    sheet.column_dimensions["B"].width = 100
    put(sheet, "A1", "Provenance", TITLE)
    rows: list[tuple[str, str, Any]] = [
        ("Recipe", "recipe_name", recipe.name),
        ("Template made by", "template_version", provenance()),
        ("Template made on", "template_made", made.strftime("%Y-%m-%d %H:%M UTC")),
        ("Constants", "template_constants", EDITION),
    ]
    if recipe.text.cosmology:
        rows.append(("Cosmology in use", "cosmology_in_use", f"={SET_CELL}"))
    rows += [
        ("Ephemeris", "template_ephemeris", provenance("ephemeris")),
        ("Earth orientation", "template_earth_orientation", provenance("earth-orientation")),
        ("Last filled", "last_filled", None),
    ]
    for row, (label, key, value) in enumerate(rows, 3):
        put(sheet, f"A{row}", label, BOLD).alignment = WRAPPED
        put(sheet, f"B{row}", value, PLAIN).alignment = WRAPPED
        sheet.row_dimensions[row].height = 16 * (1 + len(str(value or "")) // 95)
        book.name(key, sheet, f"$B${row}")
    row = len(rows) + 4
    if recipe.text.cosmology:
        put_heading(sheet, row, ("Published set", "Source"))
        for set_name, (source, _) in PUBLISHED.items():
            row += 1
            put(sheet, f"A{row}", set_name, PLAIN)
            put(sheet, f"B{row}", source, PLAIN)
        row += 2
    put_heading(sheet, row, ("Computed column", "Function and source"))
    for table in (*recipe.tables, *recipe.summaries):
        for column in table.computed:
            sources = _sources(table, column)
            if sources and not column.hidden:
                row += 1
                of = f"{table.sheet.name}: " if table.gathers else ""
                put(sheet, f"A{row}", f"{of}{column.header}", PLAIN)
                put(sheet, f"B{row}", "; ".join(sources), PLAIN)
        for result in (each for each in table.sheet.results if not each.hidden):
            called = called_by(table.results[result.key])
            sources = list(dict.fromkeys(f"{made.name}: {made.source}" for made in called))
            if sources:
                row += 1
                put(sheet, f"A{row}", result.label, PLAIN)
                put(sheet, f"B{row}", "; ".join(sources), PLAIN)


def hidden_tables(book: Book, recipe: Recipe) -> None:
    sheet = book.sheet("Tables")
    sheet.sheet_state = "hidden"
    place = 0
    wanted = {
        key: values
        for key, values in HIDDEN_TABLES.items()
        if lines_wanted(recipe) or not key.startswith("line_")
    }
    for key, values in wanted.items():
        place += 1
        put_named(book, sheet, place, key, values)
    if recipe.text.cosmology:
        place += 1
        put_named(book, sheet, place, "published_set", tuple(PUBLISHED))
        for cell in COSMOLOGY_CELLS:
            if cell.parameter != "Ode0":
                place += 1
                values = tuple(_published_value(set_name, cell) for set_name in PUBLISHED)
                put_named(book, sheet, place, f"published_{cell.cell}", values)
        for key, formula in derived_settings().items():
            if key.endswith(("in_one_sum", "in_sums")):
                place += 1
                put_named(book, sheet, place, key, ("=" + text_of(formula),))
        place += 1
        _cosmology_range(book, sheet, place)
        place += 2
        typed = name("omega_dark_energy_typed")
        # what was typed counts only while the user's own set is in use
        own = Expr("IF", Expr("same", name(SET_CELL), node(OWN)), typed, node(""))
        blank = Expr("IF", Expr("blank", typed), node(""), own)
        put_named(book, sheet, place, "omega_dark_energy_own", ("=" + text_of(blank),))


def _cosmology_range(book: Book, sheet: Worksheet, place: int) -> None:
    """The cosmology in use as an add-in's function takes it; a mass a kind of neutrino"""
    for row, cell in enumerate(COSMOLOGY_CELLS, 2):
        used = "omega_dark_energy_own" if cell.parameter == "Ode0" else cell.cell
        sheet.cell(row, place, cell.parameter)
        sheet.cell(row, place + 1, f"={used}")
    first, last = get_column_letter(place), get_column_letter(place + 1)
    book.name(COSMOLOGY_RANGE, sheet, f"${first}$2:${last}${len(COSMOLOGY_CELLS) + 1}")


def _published_value(set_name: str, cell: CosmologyCell) -> float:
    cosmology = published(set_name)
    if cell.kind:
        return float(cosmology.m_nu[cell.kind - 1])
    return float(getattr(cosmology, cell.parameter.lower()))


def _from_set(cell: CosmologyCell) -> Expr:
    place = Expr("MATCH", name(SET_CELL), name("published_set"), node(0.0))
    return Expr("INDEX", name(f"published_{cell.cell}"), place)


def _allowed(cell: CosmologyCell, own: Expr) -> Expr:
    """Return a user's own value where it is one that `fill` takes too, else the error value."""
    limits = PARAMETERS[cell.parameter]
    conditions = []
    if limits.above is not None:
        conditions.append(own > limits.above)
    if limits.at_least is not None:
        conditions.append(own >= limits.at_least)
    if cell.parameter == "Neff":
        masses = [name(each.cell) for each in COSMOLOGY_CELLS if each.kind]
        massless = all_of([Expr("=", mass, node(0.0)) for mass in masses])
        conditions.append(any_of([massless, all_of([own >= 3.0, own < 4.0])]))
    value = Expr("IF", all_of(conditions), own, Expr("#NUM!")) if conditions else own
    return Expr("IF", Expr("ISNUMBER", own), value, Expr("#VALUE!"))


def _note(cell: CosmologyCell) -> str:
    parameter = PARAMETERS[cell.parameter]
    if cell.parameter == "Ode0":
        return "own value left empty: a flat universe"
    if cell.parameter == "Neff":
        return "with a mass above 0, from 3 to below 4: the template counts three kinds"
    if parameter.default is None:
        return "must be given with an own cosmology"
    return f"own value left empty: {parameter.default:g}"


def cautions(recipe: Recipe) -> list[str]:
    """Return what must be said where the functions of a recipe are offered, with the columns."""
    columns: dict[str, list[str]] = {}
    for table in recipe.tables:
        for column in table.computed:
            for caution in _cautions(table, column):
                columns.setdefault(caution, []).append(column.label)
    return [f"{', '.join(labels)}: {caution}" for caution, labels in columns.items()]


def _cautions(table: Table, column: Column) -> list[str]:
    called = called_by(table.nodes[column.key])
    return list(dict.fromkeys(made.caution for made in called if made.caution))


def called_by(tree: Node) -> list[Function]:
    """Return the functions that a formula calls."""
    return [part.function for part in tree.parts() if isinstance(part, (Call, Gathered))]


def _sources(table: Table, column: Column) -> list[str]:
    called = called_by(table.nodes[column.key])
    if table.gathers:
        # a row of a group shows what columns of the other sheet hold
        keys = [part.key for part in table.nodes[column.key].parts() if isinstance(part, Key)]
        nodes = table.gathers.nodes
        called += [made for key in keys if key in nodes for made in called_by(nodes[key])]
    return list(dict.fromkeys(f"{made.name}: {made.source}" for made in called))


def _explained(table: Table, column: Column) -> str:
    if column.role == "input":
        return column.note
    called = [made.summary for made in called_by(table.nodes[column.key])]
    meaning = column.note or (called[0] if called else column.formula)
    return " ".join((meaning, *_cautions(table, column)))
