"""A matched sheet's inputs taken in and its computed columns worked out, nothing written."""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from cellfuncs.catalogue import shown
from cellfuncs.errors import CellError, InputError, MissingInput, is_empty
from cellfuncs.families import sky
from cellfuncs.physics import lines
from cellfuncs.physics.expansion import Cosmology
from workbooks.expression import Columns, Node, Row
from workbooks.logbook import ErrorValue, cell_name
from workbooks.matching import Match, Remark
from workbooks.recipe import Column, Problem


class Input:
    """The cells of an input column, in the rows in use."""

    def __init__(self, column: Column, cells: list[Any], factor: float) -> None:
        self.cells = cells
        self._factor = factor if column.is_number else 1.0
        self.empty = np.array([value is None for value in cells], dtype=bool)
        self.errors = {
            index: InputError(f"the cell holds {value}")
            for index, value in enumerate(cells)
            if type(value) is ErrorValue
        }
        self._is_number = column.is_number
        if column.is_number or (column.kind == "time" and set(map(type, cells)) <= _FLOATS):
            self.values = np.array(
                [value if type(value) is float else np.nan for value in cells], dtype=np.float64
            )
            if self._factor != 1.0:
                self.values = self.values * self._factor
        else:
            self.values = np.full(len(cells), None, dtype=object)
            self.values[:] = [None if type(value) is ErrorValue else value for value in cells]

    def at(self, index: int) -> Any:
        """Return what a row holds, in the recipe's unit; an error value as the reason it is."""
        value = self.cells[index]
        if type(value) is float:
            return value * self._factor
        return self.errors.get(index, value)

    def are_no_numbers(self) -> Collection[int]:
        """Return the rows that hold something, but neither a number nor an error value."""
        return [
            index
            for index in np.flatnonzero(np.isnan(self.values) & ~self.empty).tolist()
            if index not in self.errors
        ]

    def fail(self, is_good: Any) -> Collection[int]:
        """Return the rows whose values do not pass; each value is asked about once."""
        bad = {
            value
            for value in set(self.cells)
            if value is not None and type(value) is not ErrorValue and not is_good(value)
        }
        if not bad:
            return ()
        return [
            index
            for index, value in enumerate(self.cells)
            if value in bad and index not in self.errors
        ]


_FLOATS = {float, type(None)}


@dataclass(frozen=True)
class Result:
    """The values of a computed column, in the recipe's unit, and why some rows have none."""

    values: Any
    errors: Mapping[int, CellError]

    def at(self, index: int) -> Any:
        """Return a row's value, or the CellError that says why it has none."""
        if index in self.errors:
            return self.errors[index]
        value = self.values[index]
        return value.item() if isinstance(value, np.generic) else value


class Computation:
    """The rows of a sheet that are in use, what is wrong with them, and what they give."""

    def __init__(
        self,
        match: Match,
        settings: Mapping[str, Any],
        cosmology: Cosmology,
        also: Iterable[int] = (),
        cells: Mapping[int, list[Any]] | None = None,
    ) -> None:
        """Work out the computed columns.

        also: columns to be read besides those that the recipe knows
        cells: all columns, where they have been read
        """
        self.match = match
        self.table = match.table
        self.settings = settings
        self.cosmology = cosmology
        if cells is None:
            numbers = {*(place.number for place in match.places.values()), *also}
            cells = match.sheet.columns(numbers)
        self.cells = cells
        """By number, from row 1: `cells[4][16]` is cell D17"""
        self.rows = self._rows_in_use()
        self.inputs = {column.key: self._input(column) for column in self.table.inputs}
        self._columns = self._as_columns()
        self.results: dict[str, Result] = {}
        self.totals: dict[str, float | CellError] = {}
        """Of the whole sheet, by the key of each of the recipe's results"""
        for key in self.table.order:
            if key in self.table.nodes:
                self.results[key] = self._computed(key, self.table.nodes[key])
            else:
                self.totals[key] = self._total(key, self.table.results[key])

    def _rows_in_use(self) -> Sequence[int]:
        begin = self.match.header_row
        places = [self.match.places.get(key) for key in self.table.anchors]
        filled: Any = False
        for place in places:
            if place is not None:
                cells = self.cells[place.number][begin:]
                filled = filled | np.array([value is not None for value in cells], dtype=bool)
        rows = np.flatnonzero(filled) + begin + 1
        if len(rows) and rows[-1] - rows[0] + 1 == len(rows):
            return range(int(rows[0]), int(rows[-1]) + 1)
        return [int(row) for row in rows]

    def of_rows(self, number: int) -> list[Any]:
        """Return the cells of a column in the rows in use."""
        cells = self.cells.get(number)
        if cells is None:
            return [None] * len(self.rows)
        if isinstance(self.rows, range):
            return cells[self.rows.start - 1 : self.rows.stop - 1]
        return [cells[row - 1] for row in self.rows]

    def _input(self, column: Column) -> Input:
        place = self.match.places.get(column.key)
        if place is None:
            return Input(column, [None] * len(self.rows), 1.0)
        return Input(column, self.of_rows(place.number), place.to_recipe)

    def _as_columns(self) -> Columns:
        values: dict[str, Any] = dict(self.settings)
        empty: dict[str, Any] = {}
        for column in self.table.inputs:
            values[column.key] = self.inputs[column.key].values
            if column.is_number:
                empty[column.key] = self.inputs[column.key].empty
        return Columns(values, empty, self.cosmology)

    def _computed(self, key: str, tree: Node) -> Result:
        length = len(self.rows)
        is_number = self.table.columns[key].is_number
        found = np.asarray(tree.of_columns(self._columns))
        if is_number and found.dtype.kind == "f":
            values = np.array(np.broadcast_to(found, (length,)), dtype=np.float64)
            without = np.flatnonzero(np.isnan(values)).tolist()
        else:
            values = np.full(length, None, dtype=object)
            values[:] = np.broadcast_to(found, (length,)).tolist()
            without = [index for index, value in enumerate(values) if is_empty(value)]
        errors: dict[int, CellError] = {}
        for index in without:
            try:
                # the careful way may find what the column call could not take, such as a remark
                values[index] = tree.of_row(self.values_at(index))
            except CellError as error:
                errors[index] = error
                values[index] = None
        if is_number:
            values = values.astype(np.float64)
        # a column that builds on this one finds the numbers here and the reasons in `results`
        self._columns.values[key] = values
        return Result(values, errors)

    def _total(self, key: str, tree: Node) -> float | CellError:
        try:
            row = Row({**self.settings, **self.totals}, self.cosmology, self._columns)
            total: float | CellError = tree.of_row(row)
        except CellError as error:
            total = error
        self._columns.values[key] = np.nan if isinstance(total, CellError) else total
        return total

    def values_at(self, index: int) -> Row:
        """Return what a row's formulas find there."""
        values = {**self.settings, **self.totals}
        for key, given in self.inputs.items():
            values[key] = given.at(index)
        for key, result in self.results.items():
            values[key] = result.at(index)
        return Row(values, self.cosmology, self._columns)

    # -- what is wrong with the inputs

    def problems(self) -> dict[int, list[Problem]]:
        """Return what the recipe finds wrong with the rows' inputs, at most one a column."""
        found: dict[int, list[Problem]] = {}
        told: dict[str, set[int]] = {}
        for problem in self.table.problems:
            key = problem.column.key
            known = told.setdefault(key, set())
            for index in self._broken(problem):
                if index not in known:
                    known.add(index)
                    found.setdefault(index, []).append(problem)
        return found

    def _broken(self, problem: Problem) -> Collection[int]:
        if problem.kind == "beyond":
            return self._beyond(problem, self.results[problem.column.key].values)
        given = self.inputs[problem.column.key]
        match problem.kind:
            case "error":
                return given.errors
            case "missing":
                return np.flatnonzero(self._missing(problem)).tolist()
            case "not a number":
                return given.are_no_numbers()
            case "limit":
                return self._beyond(problem, given.values)
            case "not a choice":
                choices = [choice.casefold() for choice in problem.column.choices]
                return given.fail(
                    lambda value: isinstance(value, str) and value.strip(" ").casefold() in choices
                )
            case "not a time":
                return given.fail(_is_time)
            case "not a line":
                return given.fail(_is_line)
        raise AssertionError(problem.kind)

    def _missing(self, problem: Problem) -> Any:
        if not problem.alternatives:
            return self.inputs[problem.column.key].empty
        missing: Any = True
        for group in problem.alternatives:
            missing = missing & np.any([self.inputs[key].empty for key in group], axis=0)
        return missing

    def _beyond(self, problem: Problem, values: Any) -> Collection[int]:
        limit = problem.limit
        bound = self.settings.get(limit) if isinstance(limit, str) else limit
        if bound is None:
            return ()
        if isinstance(limit, str):
            bound *= problem.factor
        with np.errstate(invalid="ignore"):
            within = {
                ">": values > bound,
                ">=": values >= bound,
                "<": values < bound,
                "<=": values <= bound,
            }[problem.comparison]
        return np.flatnonzero(~within & ~np.isnan(values)).tolist()

    def remark(self, index: int, problem: Problem) -> Remark:
        """Return the sentence for a problem that `problems` found in a row."""
        key = problem.column.key
        row = self.rows[index]
        if problem.kind == "beyond":
            number = self.match.places.get(key)
            where = self.match.cell(row, key) if number else f"{self.match.sheet.name}!row {row}"
            found = f"{self.results[key].at(index):.6g} {problem.column.unit}".strip()
            return Remark(where, f"{problem.words}; it is {found}")
        value = self.inputs[key].at(index)
        placed = key in self.match.places
        cell = self.match.cell(row, key) if placed else f"{self.match.sheet.name}!row {row}"
        if problem.kind == "missing":
            return Remark(cell, problem.words)
        if problem.kind == "not a line" and isinstance(value, str):
            try:
                lines.find(value)
            except CellError as error:
                return Remark(cell, f"{problem.column.label}: {error}")
        bound = ""
        if problem.kind == "limit" and isinstance(problem.limit, str):
            bound = f" ({self.settings[problem.limit]:g})"
        return Remark(cell, f"{problem.words}{bound}; it is {self._shown(index, key)}")

    def _shown(self, index: int, key: str) -> str:
        value = self.inputs[key].cells[index]
        place = self.match.places.get(key)
        unit = place.unit if place and type(value) is float else ""
        text = str(value) if isinstance(value, ErrorValue) else shown(value)
        return f"{text} {unit}".strip()

    def reason(self, index: int, number_of: Mapping[str, int]) -> list[Remark]:
        """Return the functions' own sentences for a row, each at the first cell it explains."""
        remarks: dict[str, Remark] = {}
        for key, number in number_of.items():
            error = self.results[key].errors.get(index)
            if error is not None and is_refusal(error):
                where = f"{self.match.sheet.name}!{cell_name(self.rows[index], number)}"
                remarks.setdefault(str(error), Remark(where, str(error)))
        return list(remarks.values())


def is_refusal(error: CellError) -> bool:
    """Tell whether an error belongs in the report; a result that lacks an input does not."""
    return not isinstance(error, MissingInput)


def _is_time(value: Any) -> bool:
    try:
        sky.UTC.parsed(value)
    except CellError:
        return False
    return True


def _is_line(value: Any) -> bool:
    if not isinstance(value, str):
        return False
    try:
        lines.find(value)
    except CellError:
        return False
    return True
