"""A logbook's computed columns worked out and written in, nothing else touched."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from functools import partial
from pathlib import Path
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.catalogue import CosmologySet, is_empty, shown
from cellfuncs.errors import CellError, InputError, MissingInput
from cellfuncs.families.workbook import provenance
from cellfuncs.physics import lines
from cellfuncs.physics.expansion import DEFAULT, Cosmology, cosmology_from
from workbooks.build import ROW_OK, STATUS, UNEXPLAINED
from workbooks.expression import Columns, Row, given_arguments
from workbooks.logbook import (
    ErrorValue,
    Header,
    Logbook,
    LogbookError,
    Sheet,
    cell_name,
    parse_header,
)
from workbooks.recipe import Column, Problem, Recipe, Table, built_in, load, plain_key
from workbooks.settings import COSMOLOGY_CELLS, OWN, SET_CELL

MADE_BY: Final = "cellfuncs "
"""How every trail begins"""

COMPUTED_WITH: Final = "Computed with"
"""Header of the column that carries the trail in a logbook that is not made from a template"""


@dataclass(frozen=True)
class Remark:
    """Something that a person should hear, and the cell it is about."""

    cell: str
    sentence: str

    def __str__(self) -> str:
        return f"{self.cell}: {self.sentence}"


@dataclass
class SheetReport:
    """What became of one sheet's rows."""

    name: str
    table: str
    filled: int = 0
    refused: int = 0
    refusals: list[Remark] = field(default_factory=list)
    doubts: list[Remark] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


@dataclass
class Report:
    """What became of a logbook."""

    logbook: str
    recipe: str
    output: str
    sheets: list[SheetReport] = field(default_factory=list)
    skipped: list[Remark] = field(default_factory=list)

    @property
    def has_problems(self) -> bool:
        return bool(self.skipped) or any(
            sheet.refused or sheet.refusals or sheet.doubts for sheet in self.sheets
        )


@dataclass(frozen=True)
class Place:
    """Where a recipe's column stands in a sheet, and its unit there."""

    column: Column
    number: int
    unit: str

    @property
    def to_recipe(self) -> float:
        return units.factor(self.unit, self.column.unit) if self.column.is_number else 1.0


@dataclass(frozen=True)
class Match:
    """A sheet of a logbook read as a table of a recipe."""

    sheet: Sheet
    table: Table
    header_row: int
    places: Mapping[str, Place]

    def cell(self, row: int, key: str) -> str:
        return f"{self.sheet.name}!{cell_name(row, self.places[key].number)}"


def folded(label: str) -> str:
    """Return a label as it is compared: case and the width of blanks do not count."""
    return " ".join(label.split()).casefold()


def recipe_of(logbook: Logbook) -> Recipe:
    """Return the recipe that a template's Provenance sheet names."""
    place = logbook.named_cells.get("recipe_name")
    value = _value_at(logbook, place) if place else None
    if place is None or not isinstance(value, str):
        raise LogbookError(
            f"{logbook.path} does not say which recipe it was made from: name one with --recipe"
        )
    if value not in built_in():
        raise LogbookError(
            f"{_where(place)} names the recipe {value!r}, which does not come with this program: "
            "name its file with --recipe"
        )
    return load(value)


def fill(
    path: Path,
    output: Path,
    recipe: Recipe | None = None,
    *,
    overwrite: bool = False,
    now: datetime | None = None,
) -> Report:
    """Fill the computed columns of a logbook and write it to `output`, whole or not at all.

    path: the logbook, .xlsx
    recipe: left out, the one that the logbook was made from
    overwrite: whether `output` may exist; it may be `path` itself
    Raises LogbookError where the file cannot be read, matched or written, RecipeError where the
    recipe cannot be used.
    """
    logbook = Logbook.open(path)
    recipe = recipe or recipe_of(logbook)
    report = Report(str(path), recipe.name, str(output))
    settings, cosmology = settings_of(logbook, recipe)
    ours = "recipe_name" in logbook.named_cells
    for name in logbook.sheet_names:
        sheet = logbook.sheet(name)
        try:
            match = matched(sheet, recipe)
        except InputError as error:
            report.skipped.append(Remark(name, str(error)))
            continue
        if match is not None:
            report.sheets.append(_Filler(match, settings, cosmology, recipe, ours).filled())
    if not report.sheets and not report.skipped:
        wanted = " or ".join(
            ", ".join(column.header for column in table.inputs if column.key in table.required)
            for table in recipe.tables
        )
        raise LogbookError(
            f"no sheet of {path} has the columns that the recipe {recipe.name!r} needs: {wanted}"
        )
    if ours and "last_filled" in logbook.named_cells:
        sheet_name, row, column = logbook.named_cells["last_filled"]
        when = (now or datetime.now(UTC)).strftime("%Y-%m-%d %H:%M UTC")
        logbook.sheet(sheet_name).set(row, column, f"{when}; {trail(cosmology)}")
    logbook.save(output, overwrite=overwrite)
    return report


def trail(cosmology: Cosmology | None) -> str:
    """Return what made the numbers: version, constants and, where one is used, the cosmology."""
    parts = [provenance("version"), provenance("constants")]
    if cosmology is not None:
        own = "" if cosmology.name != "own" else f" (H0 {cosmology.h0:g}, Om0 {cosmology.om0:g})"
        parts.append(f"cosmology {cosmology.name}{own}")
    return "; ".join(parts)


def settings_of(logbook: Logbook, recipe: Recipe) -> tuple[dict[str, Any], Cosmology]:
    """Return the settings and the cosmology: the workbook's where it has them, else the recipe's.

    Raises LogbookError, naming the cell, where a setting cannot be used.
    """
    named = logbook.named_cells
    values: dict[str, Any] = {}
    for key, setting in recipe.settings.items():
        value = _value_at(logbook, named[key]) if key in named else setting.value
        if setting.kind == "number" and value is not None and not isinstance(value, (int, float)):
            raise LogbookError(f"{_where(named[key])}: {setting.label} is {value!r}, not a number")
        values[key] = value
    given: Any = recipe.text.cosmology or DEFAULT
    if SET_CELL in named:
        chosen = _value_at(logbook, named[SET_CELL])
        given = chosen if chosen is not None else given
        if isinstance(given, str) and folded(given) == OWN:
            given = _own_parameters(logbook)
    try:
        cosmology = cosmology_from(given)
    except CellError as error:
        place = _where(named[SET_CELL]) if SET_CELL in named else recipe.source
        raise LogbookError(f"{place}: {error}") from None
    for cell in COSMOLOGY_CELLS:
        masses = cosmology.m_nu
        values[cell.cell] = (
            (masses[cell.kind - 1] if cell.kind <= len(masses) else 0.0)
            if cell.kind
            else getattr(cosmology, cell.parameter.lower())
        )
    return values, cosmology


def _own_parameters(logbook: Logbook) -> dict[str, Any]:
    named = logbook.named_cells
    parameters: dict[str, Any] = {}
    masses = [0.0, 0.0, 0.0]
    for cell in COSMOLOGY_CELLS:
        value = _value_at(logbook, named[cell.own_cell]) if cell.own_cell in named else None
        if value is None:
            continue
        if cell.kind:
            masses[cell.kind - 1] = value
        else:
            parameters[cell.parameter] = value
    if any(masses):
        parameters["m_nu"] = masses
    return parameters


def _value_at(logbook: Logbook, place: tuple[str, int, int]) -> Any:
    name, row, column = place
    rows = logbook.sheet(name).rows
    if row > len(rows) or column > len(rows[row - 1]):
        return None
    return rows[row - 1][column - 1]


def _where(place: tuple[str, int, int]) -> str:
    name, row, column = place
    return f"{name}!{cell_name(row, column)}"


def matched(sheet: Sheet, recipe: Recipe) -> Match | None:
    """Return the sheet as the table whose columns it has, None where it has none.

    Raises InputError where it has the columns but a header names a unit that does not fit.
    """
    best: tuple[int, Table, int] | None = None
    for table in recipe.tables:
        labels = _labels(table)
        row = sheet.header_row(partial(_is_header, labels))
        if row is None:
            continue
        headers = [value for value in sheet.rows[row - 1] if isinstance(value, str)]
        found = {
            labels[folded(_header_of(labels, text).label)]
            for text in headers
            if _is_header(labels, text)
        }
        needed = table.required or {column.key for column in table.inputs}
        if needed <= found and (best is None or len(found) > best[0]):
            best = (len(found), table, row)
    if best is None:
        return None
    _, table, row = best
    return Match(sheet, table, row, dict(_placed(sheet, table, row)))


def _is_header(labels: Mapping[str, str], text: str) -> bool:
    return folded(_header_of(labels, text).label) in labels


def _labels(table: Table) -> dict[str, str]:
    return {
        folded(label): column.key
        for column in table.sheet.columns
        for label in (column.label, *column.aliases)
    }


def _header_of(labels: Mapping[str, str], text: str) -> Header:
    """Return a header's label and unit; brackets that belong to an alias are no unit."""
    return Header(text) if folded(text) in labels else parse_header(text)


def _placed(sheet: Sheet, table: Table, row: int) -> Iterator[tuple[str, Place]]:
    labels = _labels(table)
    seen: dict[str, int] = {}
    for number, value in enumerate(sheet.rows[row - 1], 1):
        if not isinstance(value, str):
            continue
        header = _header_of(labels, value)
        key = labels.get(folded(header.label))
        if key is None:
            continue
        where = f"{cell_name(row, number)} holds {value!r}"
        if key in seen:
            raise InputError(
                f"{where}, but {cell_name(row, seen[key])} is that column already; "
                "no row of the sheet was filled"
            )
        seen[key] = number
        column = table.columns[key]
        unit = column.unit if header.unit is None else header.unit
        if column.is_number:
            try:
                units.factor(unit, column.unit)
            except InputError as error:
                raise InputError(f"{where}: {error}; no row of the sheet was filled") from None
        yield key, Place(column, number, unit)


@dataclass
class _Filler:
    match: Match
    settings: Mapping[str, Any]
    cosmology: Cosmology
    recipe: Recipe
    ours: bool

    def __post_init__(self) -> None:
        self.table, self.sheet, self.places = self.match.table, self.match.sheet, self.match.places
        self.anchors = self.table.anchors
        self.report = SheetReport(self.sheet.name, self.table.sheet.name)

    def filled(self) -> SheetReport:
        self._notes()
        numbers = [number for number in self._row_numbers() if self._in_use(number)]
        raw = {column.key: self._raw(column, numbers) for column in self.table.inputs}
        columns = self._columns(raw, len(numbers))
        results = {key: self._computed(key, columns, raw) for key in self.table.nodes}
        self._write(numbers, raw, results)
        return self.report

    def _notes(self) -> None:
        for column in self.table.inputs:
            instead = self._default_of(column.key)
            if column.key not in self.places and instead is not None:
                self.report.notes.append(
                    f"there is no column {column.header}; taken as {instead} in all rows"
                )
        for key, place in self.places.items():
            column = self.table.columns[key]
            header = str(self.sheet.rows[self.match.header_row - 1][place.number - 1])
            unit = _header_of(_labels(self.table), header).unit
            if column.is_number and column.unit and unit is None:
                self.report.notes.append(
                    f"{self.match.cell(self.match.header_row, key)} names no unit; "
                    f"taken as {column.unit}, the recipe's"
                )

    def _default_of(self, key: str) -> Any:
        """Return what a function takes where this input is left out, None if it must be there"""
        for argument, given in given_arguments(self.table.nodes.values()):
            if argument.optional and plain_key(given) == key:
                return argument.default
        return None

    def _row_numbers(self) -> range:
        return range(self.match.header_row + 1, len(self.sheet.rows) + 1)

    def _cell(self, row: int, key: str) -> Any:
        place = self.places.get(key)
        return None if place is None else self.sheet.rows[row - 1][place.number - 1]

    def _in_use(self, row: int) -> bool:
        return any(self._cell(row, key) is not None for key in self.anchors)

    def _raw(self, column: Column, numbers: Sequence[int]) -> list[Any]:
        """Return the cells of an input in the recipe's unit; what is no number stays as it is."""
        cells = [self._cell(row, column.key) for row in numbers]
        place = self.places.get(column.key)
        factor = place.to_recipe if place else 1.0
        return [
            value * factor if type(value) is float and column.is_number else _as_error(value)
            for value in cells
        ]

    def _columns(self, raw: Mapping[str, list[Any]], length: int) -> Columns:
        values: dict[str, Any] = dict(self.settings)
        empty: dict[str, Any] = {}
        for column in self.table.inputs:
            cells = raw[column.key]
            if column.is_number:
                values[column.key] = np.array(
                    [value if type(value) is float else np.nan for value in cells], dtype=np.float64
                )
                empty[column.key] = np.array([value is None for value in cells], dtype=bool)
            else:
                texts = np.full(length, None, dtype=object)
                texts[:] = [None if isinstance(value, CellError) else value for value in cells]
                values[column.key] = texts
        return Columns(values, empty, self.cosmology)

    def _computed(self, key: str, columns: Columns, raw: dict[str, list[Any]]) -> list[Any]:
        """Return a value a row, or the CellError that says why there is none."""
        length = len(next(iter(raw.values()), []))
        tree = self.table.nodes[key]
        computed = np.asarray(tree.of_columns(columns))
        values = np.broadcast_to(computed, (length,)).tolist()
        for index, value in enumerate(values):
            if is_empty(value):
                row = {name: cells[index] for name, cells in raw.items()}
                values[index] = self._reason(tree, row)
        # a column that builds on this one finds the numbers here and the reasons in `raw`
        is_number = self.table.columns[key].is_number
        columns.values[key] = (
            np.array([np.nan if isinstance(v, CellError) else v for v in values], dtype=float)
            if is_number
            else np.array([None if isinstance(v, CellError) else v for v in values], dtype=object)
        )
        raw[key] = values
        return list(values)

    def _reason(self, tree: Any, row: Mapping[str, Any]) -> Any:
        try:
            # the careful way may find what the column call could not take, such as a remark
            return tree.of_row(Row({**self.settings, **row}, self.cosmology))
        except CellError as error:
            return error

    def _write(
        self, numbers: Sequence[int], raw: Mapping[str, list[Any]], results: Mapping[str, list[Any]]
    ) -> None:
        targets = self._targets(results)
        words_at = self._status_column()
        trail_at = None if self.ours else self._trail_column(targets)
        made_with = trail(self.cosmology if self._uses_cosmology() else None)
        self._clear_abandoned(set(numbers), targets, trail_at)
        for index, row in enumerate(numbers):
            problems = list(self._problems(index, raw))
            missing = any(problem.kind == "missing" for problem in problems)
            ours = self._is_ours(row, trail_at)
            failed = False
            for key, place in targets.items():
                value = results[key][index]
                failed |= self._set(row, place, value, missing, ours)
            remarks = [self._remark(row, problem, raw, index) for problem in problems]
            failed = failed or missing
            if failed:
                self.report.refused += 1
                self.report.refusals += remarks or self._unexplained(row, results, index, targets)
                if trail_at is not None and self._at(row, trail_at) is not None:
                    self.sheet.set(row, trail_at, None)
            else:
                self.report.filled += 1
                self.report.doubts += remarks
                if trail_at is not None:
                    self.sheet.set(row, trail_at, made_with)
            if words_at is not None:
                first = problems[0].words if problems else UNEXPLAINED if failed else ROW_OK
                self.sheet.set(row, words_at, first)

    def _is_ours(self, row: int, trail_at: int | None) -> bool:
        """Tell whether an earlier filling made this row's results"""
        if trail_at is None:
            return True
        made_with = self._at(row, trail_at)
        return isinstance(made_with, str) and made_with.startswith(MADE_BY)

    def _clear_abandoned(
        self, in_use: set[int], targets: Mapping[str, Place], trail_at: int | None
    ) -> None:
        """Take back what an earlier filling wrote into rows whose inputs are gone"""
        if trail_at is None:
            return
        for row in self._row_numbers():
            if row not in in_use and self._is_ours(row, trail_at):
                for number in (*(place.number for place in targets.values()), trail_at):
                    if self._at(row, number) is not None:
                        self.sheet.set(row, number, None)

    def _set(self, row: int, place: Place, value: Any, missing: bool, ours: bool) -> bool:
        """Write one result; tell whether it is an error that belongs in the report."""
        formula = self.sheet.has_formula(row, place.number)
        text_of_ours = ours and not place.column.is_number
        if not formula and not text_of_ours and isinstance(self._at(row, place.number), str):
            self.report.doubts.append(
                Remark(
                    f"{self.sheet.name}!{cell_name(row, place.number)}",
                    f"holds the text {shown(self._at(row, place.number))}, which was left there",
                )
            )
            return isinstance(value, CellError) and not isinstance(value, MissingInput)
        if isinstance(value, MissingInput):
            # what a row may lack leaves the cell empty; in a formula's cell "" is what it shows
            if formula:
                self.sheet.set(row, place.number, "")
            elif missing:
                self.sheet.set(row, place.number, ErrorValue(MissingInput.shown))
            elif self._at(row, place.number) is not None:
                self.sheet.set(row, place.number, None)
            return False
        if isinstance(value, CellError):
            self.sheet.set(row, place.number, ErrorValue(value.shown))
            return True
        if place.column.is_number:
            value = float(value) / place.to_recipe
        self.sheet.set(row, place.number, value)
        return False

    def _at(self, row: int, number: int) -> Any:
        cells = self.sheet.rows[row - 1]
        return cells[number - 1] if number <= len(cells) else None

    def _problems(self, index: int, raw: Mapping[str, list[Any]]) -> Iterator[Problem]:
        """Yield what the recipe finds wrong with a row's inputs, at most one a column."""
        told: set[str] = set()
        for problem in self.table.problems:
            key = problem.column.key
            if key not in told and self._broken(problem, raw[key][index]):
                told.add(key)
                yield problem

    def _broken(self, problem: Problem, value: Any) -> bool:
        if problem.kind == "error" or isinstance(value, CellError):
            return problem.kind == "error" and isinstance(value, CellError)
        if problem.kind == "missing" or value is None:
            return problem.kind == "missing" and value is None
        if problem.kind == "not a number":
            return type(value) is not float
        if problem.kind == "limit":
            limit = problem.limit
            bound = self.settings.get(limit) if isinstance(limit, str) else limit
            if bound is None or type(value) is not float:
                return False
            if isinstance(limit, str):
                bound *= problem.factor
            return not {
                ">": value > bound,
                ">=": value >= bound,
                "<": value < bound,
                "<=": value <= bound,
            }[problem.comparison]
        if not isinstance(value, str):
            return True
        if problem.kind == "not a choice":
            choices = [choice.casefold() for choice in problem.column.choices]
            return value.strip(" ").casefold() not in choices
        try:
            lines.find(value)
        except CellError:
            return True
        return False

    def _remark(
        self, row: int, problem: Problem, raw: Mapping[str, list[Any]], index: int
    ) -> Remark:
        key = problem.column.key
        value = raw[key][index]
        cell = self.match.cell(row, key) if key in self.places else f"{self.sheet.name}!row {row}"
        if problem.kind == "missing":
            return Remark(cell, problem.words)
        if problem.kind == "not a line" and isinstance(value, str):
            try:
                lines.find(value)
            except CellError as error:
                return Remark(cell, f"{problem.column.label}: {error}")
        if problem.kind == "limit":
            limit = problem.limit
            bound = f" ({self.settings[limit]:g})" if isinstance(limit, str) else ""
            return Remark(cell, f"{problem.words}{bound}; it is {self._shown(row, key)}")
        return Remark(cell, f"{problem.words}; it is {self._shown(row, key)}")

    def _shown(self, row: int, key: str) -> str:
        value = self._cell(row, key)
        unit = self.places[key].unit if type(value) is float else ""
        text = str(value) if isinstance(value, ErrorValue) else shown(value)
        return f"{text} {unit}".strip()

    def _unexplained(
        self,
        row: int,
        results: Mapping[str, list[Any]],
        index: int,
        targets: Mapping[str, Place],
    ) -> list[Remark]:
        """The functions' own sentences, where the inputs look well each by itself"""
        remarks: dict[str, Remark] = {}
        for key, place in targets.items():
            value = results[key][index]
            if isinstance(value, CellError) and not isinstance(value, MissingInput):
                where = f"{self.sheet.name}!{cell_name(row, place.number)}"
                remarks.setdefault(str(value), Remark(where, str(value)))
        return list(remarks.values())

    def _targets(self, results: Mapping[str, list[Any]]) -> dict[str, Place]:
        """Return where each computed column goes; a header is written for those not yet there."""
        targets: dict[str, Place] = {}
        for column in self.table.computed:
            if column.key in self.places:
                targets[column.key] = self.places[column.key]
            else:
                number = self._next_free(targets)
                targets[column.key] = Place(column, number, column.unit)
                self.sheet.set(self.match.header_row, number, column.header)
        return {key: targets[key] for key in results}

    def _next_free(self, targets: Mapping[str, Place]) -> int:
        rows = self.sheet.rows[self.match.header_row - 1 :]
        used = max(
            (number for row in rows for number, value in enumerate(row, 1) if value is not None),
            default=0,
        )
        return max([used, *(place.number for place in targets.values())]) + 1

    def _trail_column(self, targets: Mapping[str, Place]) -> int:
        for number, value in enumerate(self.sheet.rows[self.match.header_row - 1], 1):
            if isinstance(value, str) and folded(value) == folded(COMPUTED_WITH):
                return number
        number = self._next_free(targets)
        self.sheet.set(self.match.header_row, number, COMPUTED_WITH)
        return number

    def _status_column(self) -> int | None:
        if not self.ours:
            return None
        header = self.sheet.rows[self.match.header_row - 1]
        return next(
            (
                number
                for number, value in enumerate(header, 1)
                if isinstance(value, str) and folded(value) == folded(STATUS)
            ),
            None,
        )

    def _uses_cosmology(self) -> bool:
        return any(
            isinstance(argument, CosmologySet)
            for argument, _ in given_arguments(self.table.nodes.values())
        )


def _as_error(value: Any) -> Any:
    """Return an error value as the reason that it is, everything else as it is."""
    return InputError(f"the cell holds {value}") if isinstance(value, ErrorValue) else value
