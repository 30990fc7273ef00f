"""A logbook's computed columns worked out and written in, nothing else touched."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Final

from cellfuncs.catalogue import CosmologySet, shown
from cellfuncs.errors import CellError, InputError, MissingInput
from cellfuncs.families.workbook import provenance
from cellfuncs.physics.expansion import DEFAULT, Cosmology, cosmology_from
from workbooks.computation import Computation, is_refusal
from workbooks.expression import given_arguments
from workbooks.files.edits import UNSET
from workbooks.files.saving import backups, check_target
from workbooks.logbook import ErrorValue, Logbook, LogbookError, cell_name
from workbooks.matching import Match, Place, Remark, folded, header_of, labels_of, matched
from workbooks.recipe import (
    ROW_OK,
    STATUS,
    Problem,
    Recipe,
    built_in,
    load,
    plain_key,
    unexplained,
)
from workbooks.settings import COSMOLOGY_CELLS, OWN, SET_CELL
from workbooks.summary import write_groups, write_results

__all__ = [
    "COMPUTED_WITH",
    "MADE_BY",
    "Match",
    "Remark",
    "Report",
    "SheetReport",
    "fill",
    "folded",
    "matched",
    "recipe_of",
    "settings_of",
    "trail",
]

MADE_BY: Final = "cellfuncs "
"""How every trail begins"""

COMPUTED_WITH: Final = "Computed with"
"""Header of the column that carries the trail in a logbook that is not made from a template"""


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
    backup: str = ""
    sheets: list[SheetReport] = field(default_factory=list)
    skipped: list[Remark] = field(default_factory=list)

    @property
    def has_problems(self) -> bool:
        return bool(self.skipped) or any(
            sheet.refused or sheet.refusals or sheet.doubts for sheet in self.sheets
        )


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
    backup: bool = False,
    now: datetime | None = None,
) -> Report:
    """Fill the computed columns of a logbook and write it to `output`, whole or not at all.

    path: the logbook, in any of the formats of `logbook.FORMATS`
    output: a file of the same format
    recipe: left out, the one that the logbook was made from
    overwrite: whether `output` may exist; it may be `path` itself
    backup: keep what `path` was, where it is written into
    Raises LogbookError where the file cannot be read, matched or written, RecipeError where the
    recipe cannot be used.
    """
    if path.suffix.lower() != output.suffix.lower():
        raise LogbookError(
            f"{output}: a filled logbook stays in its format, {path.suffix or 'without a suffix'}; "
            "`export` writes others"
        )
    check_target(output, overwrite=overwrite)
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
            filler = _Filler(match, settings, cosmology, ours)
            report.sheets.append(filler.filled())
            report.sheets[-1].notes += write_results(logbook, filler.work)
            for summary in recipe.summaries:
                if summary.gathers is match.table:
                    write_groups(logbook, summary, filler.work)
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
    logbook.save(output, overwrite=overwrite, backup=backup)
    if backup and output.resolve() == path.resolve():
        report.backup = str(backups(output)[-1])
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


class _Filler:
    """Writes what a sheet's rows give, and says what became of them."""

    def __init__(
        self, match: Match, settings: Mapping[str, Any], cosmology: Cosmology, ours: bool
    ) -> None:
        self.match, self.table, self.sheet = match, match.table, match.sheet
        self.ours = ours
        self.header = self.sheet.top[match.header_row - 1]
        self.report = SheetReport(self.sheet.name, self.table.sheet.name)
        self.status_at = self._headed(STATUS) if ours else None
        self.trail_at = None if ours else self._headed(COMPUTED_WITH)
        self.work = Computation(
            match, settings, cosmology, filter(None, (self.status_at, self.trail_at))
        )
        self.rows = self.work.rows
        self.problems = self.work.problems()
        # Found row by row in the end, so that a person can go down the sheet with them.
        self.doubts: list[tuple[int, Remark]] = []

    def filled(self) -> SheetReport:
        self._notes()
        made_by_us = self._made_by_us()
        targets = self._targets()
        if not self.ours and self.trail_at is None:
            self.trail_at = self._next_free(targets)
            self.sheet.set(self.match.header_row, self.trail_at, COMPUTED_WITH)
            self.sheet.describe(self.trail_at, "version, constants and cosmology of the results")
        self._clear_abandoned(targets)
        failed = {
            index
            for index, problems in self.problems.items()
            if any(problem.kind == "missing" for problem in problems)
        }
        lacking = frozenset(failed)
        for key, place in targets.items():
            failed |= self._write(key, place, lacking, made_by_us)
        self._tell(failed, {key: place.number for key, place in targets.items()})
        self._write_trail(failed)
        self._write_status(failed)
        return self.report

    def _notes(self) -> None:
        places = self.match.places
        for column in self.table.inputs:
            instead = self._default_of(column.key)
            if column.key not in places and instead is not None:
                self.report.notes.append(
                    f"there is no column {column.header}; taken as {instead} in all rows"
                )
        for key, place in places.items():
            column = self.table.columns[key]
            header = str(self.header[place.number - 1])
            unit = header_of(labels_of(self.table), header).unit
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

    def _headed(self, words: str) -> int | None:
        return next(
            (
                number
                for number, value in enumerate(self.header, 1)
                if isinstance(value, str) and folded(value) == folded(words)
            ),
            None,
        )

    def _targets(self) -> dict[str, Place]:
        """Return where each computed column goes; a header is written for those not yet there."""
        targets: dict[str, Place] = {}
        for column in self.table.computed:
            if column.key in self.match.places:
                targets[column.key] = self.match.places[column.key]
            elif not column.hidden:
                number = self._next_free(targets)
                targets[column.key] = Place(column, number, column.unit)
                self.sheet.set(self.match.header_row, number, column.header)
                self.sheet.describe(number, column.note or f"{column.label}: {column.formula}")
        return targets

    def _next_free(self, targets: Mapping[str, Place]) -> int:
        used = self.sheet.last_used_column(self.match.header_row)
        # what is written under a merged cell is lost when a spreadsheet program saves the file
        merged = (
            area.last_column for area in self.sheet.merged if area.last_row >= self.match.header_row
        )
        return max([used, *merged, *(place.number for place in targets.values())]) + 1

    def _made_by_us(self) -> frozenset[int] | None:
        """Return the rows whose results an earlier filling made, None for all of them"""
        if self.ours:
            return None
        if self.trail_at is None:
            return frozenset()
        trails = self.work.of_rows(self.trail_at)
        return frozenset(index for index, value in enumerate(trails) if _is_trail(value))

    def _clear_abandoned(self, targets: Mapping[str, Place]) -> None:
        """Take back what an earlier filling wrote into rows whose inputs are gone"""
        trails = self.work.cells.get(self.trail_at or 0)
        if not trails:
            return
        in_use = self.rows if isinstance(self.rows, range) else frozenset(self.rows)
        for row, value in enumerate(trails[self.match.header_row :], self.match.header_row + 1):
            if row not in in_use and _is_trail(value):
                for number in (*(place.number for place in targets.values()), self.trail_at or 0):
                    if self._at(row, number) is not None:
                        self.sheet.set(row, number, None)

    def _at(self, row: int, number: int) -> Any:
        cells = self.work.cells.get(number)
        return cells[row - 1] if cells else None

    def _write(
        self, key: str, place: Place, lacking: frozenset[int], ours: frozenset[int] | None
    ) -> set[int]:
        """Write a column's results; return the rows with an error that belongs in the report."""
        result = self.work.results[key]
        is_number = place.column.is_number
        values: list[Any] = (
            result.values / place.to_recipe if is_number else result.values
        ).tolist()
        failed = {index for index, error in result.errors.items() if is_refusal(error)}
        with_formula = place.number in self.sheet.formula_columns
        for index, error in result.errors.items():
            row = self.rows[index]
            formula = with_formula and self.sheet.has_formula(row, place.number)
            values[index] = self._in_place_of(error, row, place.number, formula, index in lacking)
        if place.number in self.work.cells:
            for index, held in enumerate(self.work.of_rows(place.number)):
                if not isinstance(held, str) or (not is_number and (ours is None or index in ours)):
                    continue
                row = self.rows[index]
                if with_formula and self.sheet.has_formula(row, place.number):
                    continue
                values[index] = UNSET
                where = f"{self.sheet.name}!{cell_name(row, place.number)}"
                words = f"holds the text {shown(held)}, which was left there"
                self.doubts.append((index, Remark(where, words)))
        self._set(place.number, values)
        return failed

    def _in_place_of(
        self, error: CellError, row: int, number: int, formula: bool, lacking: bool
    ) -> Any:
        """Return what a cell shows that has no result"""
        if not isinstance(error, MissingInput):
            return ErrorValue(error.shown)
        # what a row may lack leaves the cell empty; in a formula's cell "" is what it shows
        if formula:
            return ""
        if lacking:
            return ErrorValue(MissingInput.shown)
        return UNSET if self._at(row, number) is None else None

    def _set(self, number: int, values: Sequence[Any]) -> None:
        if isinstance(self.rows, range):
            if self.rows:
                self.sheet.set_rows(number, self.rows, values)
            return
        for row, value in zip(self.rows, values, strict=True):
            if value is not UNSET:
                self.sheet.set(row, number, value)

    def _tell(self, failed: set[int], number_of: Mapping[str, int]) -> None:
        self.report.refused = len(failed)
        self.report.filled = len(self.rows) - len(failed)
        for index in sorted(failed):
            self.report.refusals += self._remarks(index) or self.work.reason(index, number_of)
        self.doubts += [
            (index, remark)
            for index in self.problems
            if index not in failed
            for remark in self._remarks(index)
        ]
        self.report.doubts = [remark for _, remark in sorted(self.doubts, key=lambda pair: pair[0])]

    def _remarks(self, index: int) -> list[Remark]:
        return [self.work.remark(index, problem) for problem in self.problems.get(index, ())]

    def _write_trail(self, failed: set[int]) -> None:
        if self.trail_at is None:
            return
        made_with: list[Any] = [
            trail(self.work.cosmology if self._uses_cosmology() else None)
        ] * len(self.rows)
        for index in failed:
            held = self._at(self.rows[index], self.trail_at)
            made_with[index] = UNSET if held is None else None
        self._set(self.trail_at, made_with)

    def _write_status(self, failed: set[int]) -> None:
        if self.status_at is None:
            return
        words: list[Any] = [ROW_OK] * len(self.rows)
        for index in failed | set(self.problems):
            words[index] = self._status_words(self.problems.get(index, ()), index)
        self._set(self.status_at, words)

    def _status_words(self, problems: Sequence[Problem], index: int) -> str:
        if problems:
            return problems[0].words
        key = next(
            key
            for key, result in self.work.results.items()
            if index in result.errors and is_refusal(result.errors[index])
        )
        return unexplained(self.table, key)

    def _uses_cosmology(self) -> bool:
        return any(
            isinstance(argument, CosmologySet)
            for argument, _ in given_arguments(self.table.nodes.values())
        )


def _is_trail(value: Any) -> bool:
    return isinstance(value, str) and value.startswith(MADE_BY)
